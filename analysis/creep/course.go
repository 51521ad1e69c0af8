package creep

import (
	"math"
	"sort"

	"gonum.org/v1/gonum/mat"
)

// terms is the number of terms of a steady course.
const terms = 4

// courseTerms are what creep without acceleration is made of, for a watch of
// days to months: nothing in it can turn upward by itself, but a constant rate.
func courseTerms(t float64) [terms]float64 {
	return [terms]float64{1, math.Log(t), math.Pow(t/100, 0.35), t / 1000}
}

// courseFrom is the age from which a steady course is followed, h.
const courseFrom = 4

// course holds running sums of the normal equations of a steady course, so
// that it can be fitted up to any instant at once.
type course struct {
	age []float64
	sum [][terms * (terms + 1)]float64 // before each reading
	y0  float64
	// leastRate is the least rate until each of leastAt, and when it was, h.
	leastAt, leastRate, leastWhen []float64
}

func courseOf(age, sag []float64) *course {
	c := &course{}
	for i, t := range age {
		if t < courseFrom {
			continue
		}
		if len(c.age) == 0 {
			c.y0 = sag[i]
			c.sum = append(c.sum, [terms * (terms + 1)]float64{})
		}
		f := courseTerms(t)
		s := c.sum[len(c.sum)-1]
		for a := range terms {
			for b := range terms {
				s[a*(terms+1)+b] += f[a] * f[b]
			}
			s[a*(terms+1)+terms] += f[a] * (sag[i] - c.y0)
		}
		c.age, c.sum = append(c.age, t), append(c.sum, s)
	}
	c.findLeast()
	return c
}

// leastEvery parts the instants at which the rate is looked at for its
// minimum, h.
const leastEvery = 6

// findLeast follows the rate at the end of the course so far.
func (c *course) findLeast() {
	rate, when := math.Inf(1), 0.0
	for i, t := range c.age {
		if k := len(c.leastAt); k > 0 && t < c.leastAt[k-1]+leastEvery || i == 0 {
			continue
		}
		if s, ok := c.until(t); ok {
			if r := s.rate(t-2*leastEvery, t); r < rate {
				rate, when = r, t
			}
		}
		c.leastAt, c.leastRate, c.leastWhen = append(c.leastAt, t), append(c.leastRate, rate), append(c.leastWhen, when)
	}
}

// least is the least rate until t, mm/h, and when it was; 0 where none is
// known.
func (c *course) least(t float64) (rate, when float64) {
	k := sort.SearchFloat64s(c.leastAt, t+1e-9) - 1
	if k < 0 || math.IsInf(c.leastRate[k], 1) {
		return 0, t
	}
	return c.leastRate[k], c.leastWhen[k]
}

// steady is a course fitted up to endH.
type steady struct {
	coefficient [terms]float64
	endH        float64
}

// until fits the readings up to endH; false where they are too few.
func (c *course) until(endH float64) (*steady, bool) {
	n := sort.SearchFloat64s(c.age, endH)
	if n < 4*terms || c.age[n-1] < 5*c.age[0] {
		return nil, false
	}
	s := c.sum[n]
	a, b := mat.NewSymDense(terms, nil), mat.NewVecDense(terms, nil)
	var scale [terms]float64
	for i := range terms {
		scale[i] = 1 / math.Sqrt(s[i*(terms+1)+i])
	}
	for i := range terms {
		for j := i; j < terms; j++ {
			a.SetSym(i, j, s[i*(terms+1)+j]*scale[i]*scale[j])
		}
		a.SetSym(i, i, a.At(i, i)+1e-10) // keeps terms that look alike apart
		b.SetVec(i, s[i*(terms+1)+terms]*scale[i])
	}
	var chol mat.Cholesky
	if !chol.Factorize(a) {
		return nil, false
	}
	var x mat.VecDense
	if err := chol.SolveVecTo(&x, b); err != nil {
		return nil, false
	}
	out := &steady{endH: c.age[n-1]}
	for i := range terms {
		out.coefficient[i] = x.AtVec(i) * scale[i]
	}
	return out, true
}

// rate is the course's mean rate between two ages, mm/h.
func (s *steady) rate(from, to float64) float64 {
	from = max(from, courseFrom/4)
	if to <= from {
		return 0
	}
	a, b := courseTerms(from), courseTerms(to)
	var rise float64
	for i, c := range s.coefficient {
		rise += c * (b[i] - a[i])
	}
	return rise / (to - from)
}
