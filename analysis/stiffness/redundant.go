package stiffness

import (
	"math"

	"gaugelog/analysis/beam"

	"gonum.org/v1/gonum/mat"
)

// curved solves a redundant beam as it is; derivatives are differences. A
// compliance (or 1/S) below zero, which noise may ask for, is carried on from
// zero in a straight line.
func (m *model) curved(st *state, theta []float64) ([]float64, *mat.Dense, error) {
	safe, _ := possible(theta)
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

// predict gives the increments alone, without derivatives where it can.
func (m *model) predict(st *state, theta []float64) ([]float64, error) {
	if _, is := possible(theta); !is {
		f, _, err := m.curved(st, theta)
		return f, err
	}
	return m.solved(st, theta)
}

// possible are the unknowns with none below zero, and whether they were so.
func possible(theta []float64) (safe []float64, is bool) {
	safe, is = append([]float64(nil), theta...), true
	if !(safe[0] > 0) {
		safe[0], is = 1e-12, false
	}
	for j := 1; j < len(safe); j++ {
		is = is && safe[j] >= 0
		safe[j] = math.Max(0, safe[j])
	}
	return safe, is
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
		f[r] = m.see(st, o.gauge, lines[o.step], compliance) + st.moved(m.stand(o.gauge), o)
	}
	return f, nil
}
