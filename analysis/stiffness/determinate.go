package stiffness

import (
	"math"

	"gaugelog/analysis/beam"

	"gonum.org/v1/gonum/mat"
)

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
		f[r] += st.moved(m.stand(o.gauge), o)
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
