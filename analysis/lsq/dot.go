package lsq

import "math"

// sum2 accumulates products in twice the working precision (Ogita, Rump and
// Oishi, Accurate sum and dot product, SIAM J. Sci. Comput. 26, 2005,
// algorithm Dot2). Residuals in refinement need it: there the large terms
// cancel and only their rounding errors would be left.
type sum2 struct{ high, low float64 }

// add adds v.
func (s *sum2) add(v float64) {
	t := s.high + v
	z := t - s.high
	s.low += (s.high - (t - z)) + (v - z)
	s.high = t
}

// addProduct adds x*y with the rounding error of the product.
func (s *sum2) addProduct(x, y float64) {
	p := x * y
	e := math.FMA(x, y, -p)
	s.add(p)
	s.low += e
}

// value rounds the sum to working precision.
func (s *sum2) value() float64 { return s.high + s.low }
