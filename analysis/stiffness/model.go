package stiffness

import (
	"strconv"

	"gaugelog/analysis/beam"
	"gaugelog/config"

	"gonum.org/v1/gonum/mat"
)

// observation is one row of the fit.
type observation struct {
	step, gauge    int
	mm, u, uBefore float64
	carried, dof   float64
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
	// margin is by how much the beam is taken longer at both ends, mm: its ends
	// are free, so that it bears the same, and a support or load at an end may
	// be moved by its uncertainty.
	margin float64
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
	b := beam.Beam{From: m.rig.Specimen.From.Value - m.margin, Length: m.rig.Specimen.Length.Value + 2*m.margin, EI: ei, S: s}
	for i, sup := range m.rig.Supports {
		b.Supports = append(b.Supports, beam.Support{Name: sup.Name, At: st.support[i], Clamp: sup.Kind == "clamp", Compliance: compliance[i]})
	}
	return b
}

// margins is how far the drawn or shifted places may lie off the beam's ends:
// ten times the greatest stated uncertainty of a place.
func margins(rig *config.Rig) float64 {
	u := 0.0
	for _, s := range rig.Supports {
		u = max(u, s.At.U)
	}
	for _, g := range rig.Gauges {
		u = max(u, g.At.U)
		for _, foot := range g.Bar {
			u = max(u, foot.U)
		}
	}
	for _, l := range rig.Loads {
		for _, p := range []*config.Length{l.At, l.From, l.To} {
			if p != nil {
				u = max(u, p.U)
			}
		}
	}
	return 10 * u
}

// stand is the stand that carries gauge g; a gauge on a bar is carried by the
// beam.
func (m *model) stand(g int) string {
	if len(m.rig.Gauges[g].Bar) == 2 {
		return ""
	}
	return m.rig.Gauges[g].Stand
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
