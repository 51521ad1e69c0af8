package stiffness

import (
	"math"
	"strconv"

	"gaugelog/analysis/beam"
	"gaugelog/config"

	"gonum.org/v1/gonum/mat"
)

// observation is one row of the fit.
type observation struct {
	step, gauge    int
	mm, u, uBefore float64
	dof            float64
}

// change is how one load's force changed in one step.
type change struct {
	load    int
	n       float64
	weighed bool
}

// shearMode says where the shear stiffness comes from.
type shearMode int

const (
	shearFree  shearMode = iota // fitted
	shearRatio                  // tied to the bending stiffness by an assumed E/G
	shearGiven                  // from a stated shear modulus
	shearNone                   // left out: the section's area is not known
)

// model turns a state and unknowns into increments. Unknowns are, in this
// order: alpha = 1/EI; gamma = 1/S in mode shearFree; then either the
// compliances of the supports in yields, or (rigid) those supports' own
// movement in each step.
type model struct {
	rig         *config.Rig
	sec         *Section
	rows        []observation
	changes     [][]change  // by step
	springs     [][]float64 // by step and gauge: increment in mm that pushes a plunger
	mode        shearMode
	yields      []int // supports fitted
	rigid       bool
	determinate bool
}

// determinateLayout reports whether statics alone gives the reactions.
func determinateLayout(rig *config.Rig) bool {
	held := 0
	for _, s := range rig.Supports {
		held++
		if s.Kind == "clamp" {
			held++
		}
	}
	return held == 2
}

// unknowns is the number of columns.
func (m *model) unknowns() int {
	n := 1
	if m.mode == shearFree {
		n++
	}
	if m.rigid {
		return n + len(m.yields)*len(m.changes)
	}
	return n + len(m.yields)
}

func (m *model) names() []string {
	out := []string{"bending stiffness"}
	if m.mode == shearFree {
		out = append(out, "shear stiffness")
	}
	if m.rigid {
		for k := range m.changes {
			for _, s := range m.yields {
				out = append(out, "movement of support "+m.rig.Supports[s].Name+" in step "+strconv.Itoa(k+1))
			}
		}
		return out
	}
	for _, s := range m.yields {
		out = append(out, "compliance of support "+m.rig.Supports[s].Name)
	}
	return out
}

// firstYield is the column of the first support.
func (m *model) firstYield() int {
	if m.mode == shearFree {
		return 2
	}
	return 1
}

// loads are the forces of step k on the beam, plungers included.
func (m *model) loads(st *state, k int) []beam.Load {
	var out []beam.Load
	for _, c := range m.changes[k] {
		n := c.n * st.weight[c.load]
		if c.weighed {
			n *= st.gravity
		}
		out = append(out, beam.Load{Name: m.rig.Loads[c.load].Name, From: st.loadFrom[c.load], To: st.loadTo[c.load], Force: n})
	}
	for g, w := range m.springs[k] {
		if f := -st.contact[g]*w + st.stuck[g]; f != 0 {
			out = append(out, beam.Point(st.gauge[g], f))
		}
	}
	return out
}

// beam builds the rig's beam in this state.
func (m *model) beam(st *state, ei, s float64, compliance []float64) beam.Beam {
	b := beam.Beam{From: m.rig.Specimen.From.Value, Length: m.rig.Specimen.Length.Value, EI: ei, S: s}
	for i, sup := range m.rig.Supports {
		b.Supports = append(b.Supports, beam.Support{Name: sup.Name, At: st.support[i], Clamp: sup.Kind == "clamp", Compliance: compliance[i]})
	}
	return b
}

// see is what gauge g reads of a line, its gain included.
func (m *model) see(st *state, g int, s *beam.Solution, compliance []float64) float64 {
	return st.gain[g] * m.look(st, g, s, func(i int) float64 { return compliance[i] * s.Reaction(i).Force })
}

func (m *model) look(st *state, g int, s *beam.Solution, seatMoves func(int) float64) float64 {
	gauge, x := m.rig.Gauges[g], st.gauge[g]
	if sees(gauge) == "seat" {
		return seatMoves(seat(m.rig, gauge.At.Value))
	}
	w := s.Deflection(x)
	if len(gauge.Bar) == 2 {
		a, b := st.bar[g][0], st.bar[g][1]
		w -= ((b-x)*s.Deflection(a) + (x-a)*s.Deflection(b)) / (b - a)
	}
	return w
}

// rho is S's tie to EI: gamma = rho alpha (mm2), from an assumed E/G.
func (m *model) rho(st *state) float64 {
	i, a, kappa := m.sec.shape(st.dims)
	return st.ratio * i / (kappa * a)
}

// gammaGiven is 1/S from a stated shear modulus.
func (m *model) gammaGiven(st *state) float64 {
	_, a, kappa := m.sec.shape(st.dims)
	return 1 / (kappa * a * st.shear)
}

// parts takes theta apart: alpha, gamma and every support's compliance.
func (m *model) parts(st *state, theta []float64) (alpha, gamma float64, compliance []float64) {
	alpha = theta[0]
	switch m.mode {
	case shearFree:
		gamma = theta[1]
	case shearRatio:
		gamma = m.rho(st) * alpha
	case shearGiven:
		gamma = m.gammaGiven(st)
	}
	compliance = append([]float64(nil), st.given...)
	if !m.rigid {
		for j, s := range m.yields {
			compliance[s] = theta[m.firstYield()+j]
		}
	} else {
		for _, s := range m.yields {
			compliance[s] = 0
		}
	}
	return alpha, gamma, compliance
}

// evaluate gives the increments predicted and their derivatives by the
// unknowns at theta; for a determinate beam they do not depend on theta.
func (m *model) evaluate(st *state, theta []float64) ([]float64, *mat.Dense, error) {
	if m.determinate {
		return m.linear(st, theta)
	}
	return m.curved(st, theta)
}

// linear uses that the sag of a determinate beam is a sum of its causes.
func (m *model) linear(st *state, theta []float64) ([]float64, *mat.Dense, error) {
	x := mat.NewDense(len(m.rows), m.unknowns(), nil)
	f := make([]float64, len(m.rows))
	inf := math.Inf(1)
	none := make([]float64, len(m.rig.Supports))
	sets := make([][]beam.Load, len(m.changes))
	for k := range sets {
		sets[k] = m.loads(st, k)
	}
	bend, err := m.beam(st, 1, inf, none).SolveEach(sets)
	if err != nil {
		return nil, nil, err
	}
	var shear []*beam.Solution
	if m.mode != shearNone {
		if shear, err = m.beam(st, inf, 1, none).SolveEach(sets); err != nil {
			return nil, nil, err
		}
	}
	rho, gamma := 0.0, 0.0
	switch m.mode {
	case shearRatio:
		rho = m.rho(st)
	case shearGiven:
		gamma = m.gammaGiven(st)
	}
	for r, o := range m.rows {
		b := m.see(st, o.gauge, bend[o.step], none)
		switch m.mode {
		case shearFree:
			x.Set(r, 1, m.see(st, o.gauge, shear[o.step], none))
		case shearRatio:
			b += rho * m.see(st, o.gauge, shear[o.step], none)
		case shearGiven:
			f[r] += gamma * m.see(st, o.gauge, shear[o.step], none)
		}
		x.Set(r, 0, b)
		f[r] += st.moved(m.rig.Gauges[o.gauge].Stand, o.step)
	}
	for s := range m.rig.Supports {
		if err := m.supportColumns(st, s, sets, f, x); err != nil {
			return nil, nil, err
		}
	}
	for r := range f {
		for j, t := range theta {
			f[r] += x.At(r, j) * t
		}
	}
	return f, x, nil
}

func (s *state) moved(stand string, k int) float64 {
	if o := s.offset[stand]; k < len(o) {
		return o[k]
	}
	return 0
}

// supportColumns adds what support s of a determinate beam does by yielding.
func (m *model) supportColumns(st *state, s int, sets [][]beam.Load, f []float64, x *mat.Dense) error {
	yields := -1
	for j, y := range m.yields {
		if y == s {
			yields = j
		}
	}
	if yields < 0 && st.given[s] == 0 {
		return nil
	}
	inf := math.Inf(1)
	one := make([]float64, len(m.rig.Supports))
	one[s] = 1
	b := m.beam(st, inf, inf, one)
	if m.rigid && yields >= 0 {
		b.Supports[s].Compliance, b.Supports[s].Settlement = 0, 1
		sets = make([][]beam.Load, len(sets))
	}
	lines, err := b.SolveEach(sets)
	if err != nil {
		return err
	}
	for r, o := range m.rows {
		line := lines[o.step]
		v := st.gain[o.gauge] * m.look(st, o.gauge, line, func(i int) float64 {
			if i != s {
				return 0
			}
			return line.Deflection(st.support[s])
		})
		switch {
		case yields < 0:
			f[r] += st.given[s] * v
		case m.rigid:
			x.Set(r, m.firstYield()+o.step*len(m.yields)+yields, v)
		default:
			x.Set(r, m.firstYield()+yields, v)
		}
	}
	return nil
}

// curved solves a redundant beam as it is; derivatives are differences. A
// compliance (or 1/S) below zero, which noise may ask for, is carried on from
// zero in a straight line.
func (m *model) curved(st *state, theta []float64) ([]float64, *mat.Dense, error) {
	safe := append([]float64(nil), theta...)
	if !(safe[0] > 0) {
		safe[0] = 1e-12
	}
	for j := 1; j < len(safe); j++ {
		safe[j] = math.Max(0, safe[j])
	}
	f, err := m.solved(st, safe)
	if err != nil {
		return nil, nil, err
	}
	x := mat.NewDense(len(m.rows), len(theta), nil)
	for j := range theta {
		h := m.stepSize(safe, j)
		up := append([]float64(nil), safe...)
		up[j] += h
		fu, err := m.solved(st, up)
		if err != nil {
			return nil, nil, err
		}
		down, width := f, h
		if safe[j] > h {
			lo := append([]float64(nil), safe...)
			lo[j] -= h
			if down, err = m.solved(st, lo); err != nil {
				return nil, nil, err
			}
			width = 2 * h
		}
		for r := range f {
			x.Set(r, j, (fu[r]-down[r])/width)
		}
	}
	for r := range f {
		for j := range theta {
			f[r] += x.At(r, j) * (theta[j] - safe[j])
		}
	}
	return f, x, nil
}

// stepSize is a small change of unknown j, in proportion to the beam.
func (m *model) stepSize(theta []float64, j int) float64 {
	l := m.rig.Specimen.Length.Value
	switch {
	case j == 0:
		return 1e-5 * theta[0]
	case j == 1 && m.mode == shearFree:
		return math.Max(1e-5*theta[1], 1e-7*theta[0]*l*l)
	}
	return math.Max(1e-5*theta[j], 1e-8*theta[0]*l*l*l)
}

func (m *model) solved(st *state, theta []float64) ([]float64, error) {
	alpha, gamma, compliance := m.parts(st, theta)
	s := math.Inf(1)
	if gamma > 0 {
		s = 1 / gamma
	}
	f := make([]float64, len(m.rows))
	sets := make([][]beam.Load, len(m.changes))
	for k := range sets {
		sets[k] = m.loads(st, k)
	}
	lines, err := m.beam(st, 1/alpha, s, compliance).SolveEach(sets)
	if err != nil {
		return nil, err
	}
	for r, o := range m.rows {
		f[r] = m.see(st, o.gauge, lines[o.step], compliance) + st.moved(m.rig.Gauges[o.gauge].Stand, o.step)
	}
	return f, nil
}
