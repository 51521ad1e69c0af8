package lsq

import (
	"math"

	"gonum.org/v1/gonum/mat"
)

// search is a bounded Levenberg–Marquardt search: residuals r(p) of length m
// in units of their uncertainty, and their Jacobian (m x len(p)).
type search struct {
	m            int
	residual     func(p, r []float64) bool // false: r cannot be worked out at p
	jacobian     func(p []float64, j *mat.Dense)
	lower, upper []float64
	limit        int
	// enough ends the search where a step is not expected to lower chi2 by
	// more than this share of it; 0: where none lowers it. near is how small,
	// in lengths of residual, a last step need be.
	enough, near float64

	p, r    []float64
	chi2    float64
	scale   []float64 // greatest length each Jacobian column ever had
	taken   int
	damping float64
	growth  float64
}

// run searches from start and returns how it ended.
func (s *search) run(start []float64) Status {
	s.p, s.r = append([]float64(nil), start...), make([]float64, s.m)
	s.clamp(s.p)
	s.scale = make([]float64, len(start))
	s.damping, s.growth = 1e-3, 2
	if !s.residual(s.p, s.r) {
		s.chi2 = math.Inf(1)
		return Stalled
	}
	s.chi2 = dot(s.r, s.r)
	j := mat.NewDense(s.m, len(s.p), nil)
	for ; s.taken < s.limit; s.taken++ {
		s.jacobian(s.p, j)
		if !s.improve(j) {
			s.polish(j)
			return s.ending(j)
		}
	}
	s.polish(j)
	return IterationLimit
}

func (s *search) clamp(p []float64) {
	for i := range p {
		if s.lower != nil {
			p[i] = max(p[i], s.lower[i])
		}
		if s.upper != nil {
			p[i] = min(p[i], s.upper[i])
		}
	}
}

// bound reports whether parameter i stands on a bound.
func (s *search) bound(i int) bool {
	return s.lower != nil && s.p[i] <= s.lower[i] || s.upper != nil && s.p[i] >= s.upper[i]
}

// free lists the parameters that may move: not those on a bound that the
// gradient pushes outward.
func (s *search) free(j *mat.Dense) []int {
	var cols []int
	for i := range s.p {
		g := mat.Dot(j.ColView(i), mat.NewVecDense(s.m, s.r)) // downhill is -g
		out := s.lower != nil && s.p[i] <= s.lower[i] && g >= 0 || s.upper != nil && s.p[i] >= s.upper[i] && g <= 0
		if !out {
			cols = append(cols, i)
		}
	}
	return cols
}

// improve takes one damped step that lowers chi2; false if none does.
func (s *search) improve(j *mat.Dense) bool {
	cols := s.free(j)
	if len(cols) == 0 || s.chi2 == 0 {
		return false
	}
	for i := range s.p {
		s.scale[i] = max(s.scale[i], mat.Norm(j.ColView(i), 2))
	}
	trial, r := make([]float64, len(s.p)), make([]float64, s.m)
	for range 60 {
		step, expected := s.step(j, cols, s.damping)
		if expected <= s.enough*s.chi2 {
			return false
		}
		copy(trial, s.p)
		var change, size float64
		for k, c := range cols {
			trial[c] += step[k]
		}
		s.clamp(trial)
		for i := range trial {
			change = max(change, math.Abs(trial[i]-s.p[i])/(math.Abs(s.p[i])+1e-300))
			size += math.Abs(trial[i] - s.p[i])
		}
		if size == 0 || change < 1e-15 {
			return false
		}
		if s.residual(trial, r) {
			if chi2 := dot(r, r); chi2 < s.chi2 {
				gain := (s.chi2 - chi2) / expected
				s.damping *= max(1.0/3, 1-math.Pow(2*gain-1, 3))
				s.damping = max(s.damping, 1e-15)
				s.growth = 2
				small := s.chi2-chi2 <= max(1e-15, s.enough)*s.chi2
				copy(s.p, trial)
				copy(s.r, r)
				s.chi2 = chi2
				return !small
			}
		}
		s.damping *= s.growth
		s.growth *= 2
	}
	return false
}

// step returns the damped step in the free parameters and the fall of chi2
// that a linear model expects of it.
func (s *search) step(j *mat.Dense, cols []int, damping float64) (step []float64, expected float64) {
	n := len(cols)
	a := mat.NewDense(s.m+n, n, nil)
	b := make([]float64, s.m+n)
	for k, c := range cols {
		for i := range s.m {
			a.Set(i, k, j.At(i, c))
		}
		scale := s.scale[c]
		if scale == 0 {
			scale = 1
		}
		a.Set(s.m+k, k, math.Sqrt(damping)*scale)
	}
	for i := range s.m {
		b[i] = -s.r[i]
	}
	f := newFactor(a)
	step = f.solve(b, false)
	for k := range step {
		step[k] /= f.scale[k]
	}
	for i := range s.m {
		var js float64
		for k := range step {
			js += a.At(i, k) * step[k]
		}
		expected += s.r[i]*s.r[i] - (s.r[i]+js)*(s.r[i]+js)
	}
	return step, max(expected, 1e-300)
}

// polish takes undamped steps as long as they shrink: chi2 is flat to
// rounding near its minimum, the step is not, so this wins the last digits.
func (s *search) polish(j *mat.Dense) {
	last := math.Inf(1)
	trial, r := make([]float64, len(s.p)), make([]float64, s.m)
	for range 30 {
		s.jacobian(s.p, j)
		cols := s.free(j)
		if len(cols) == 0 {
			return
		}
		step, _ := s.step(j, cols, 0)
		copy(trial, s.p)
		var size float64
		for k, c := range cols {
			trial[c] += step[k]
			size = max(size, math.Abs(step[k])*s.scale[c])
		}
		s.clamp(trial)
		if size < s.near {
			return
		}
		if !(size < last/2) || size > 0.1*(math.Sqrt(s.chi2)+1e-300) && !math.IsInf(last, 1) || !s.residual(trial, r) {
			return
		}
		chi2 := dot(r, r)
		if !(chi2 <= s.chi2*(1+1e-10)) {
			return
		}
		copy(s.p, trial)
		copy(s.r, r)
		s.chi2, last = chi2, size
	}
}

// ending judges the point reached by the angle between residual and Jacobian.
func (s *search) ending(j *mat.Dense) Status {
	s.jacobian(s.p, j)
	status := Converged
	for i := range s.p {
		if s.bound(i) {
			status = AtBound
		}
	}
	length := math.Sqrt(s.chi2)
	for _, c := range s.free(j) {
		n := mat.Norm(j.ColView(c), 2)
		if n == 0 || length == 0 {
			continue
		}
		if math.Abs(mat.Dot(j.ColView(c), mat.NewVecDense(s.m, s.r))) > 1e-5*n*length && length > 1e-12*float64(s.m) {
			return Stalled
		}
	}
	return status
}

func dot(a, b []float64) float64 {
	var s sum2
	for i := range a {
		s.addProduct(a[i], b[i])
	}
	return s.value()
}
