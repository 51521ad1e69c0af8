package creep

import (
	"math"
	"slices"
)

// Lagged returns value as seen through a first-order lag of lagH hours, and
// its derivative by ln lagH, at the same times. Between readings the input is
// taken as straight, so that sparse readings are not biased; before the first
// it is taken as constant. lagH 0 returns value itself and zeros.
func Lagged(timeH, value []float64, lagH float64) (out, slope []float64) {
	out, slope = make([]float64, len(value)), make([]float64, len(value))
	if lagH <= 0 {
		copy(out, value)
		return out, slope
	}
	before, e, g := math.NaN(), 0.0, 0.0
	for i := range value {
		if i == 0 {
			out[0] = value[0]
			continue
		}
		a := (timeH[i] - timeH[i-1]) / lagH
		if math.Abs(a-before) > 1e-9*a || i == 1 { // mostly the interval is the same
			before, e, g = a, math.Exp(-a), 1-a/2 // g is (1-e)/a where a is too small to divide by
			if a > 1e-9 {
				g = -math.Expm1(-a) / a
			}
		}
		de, dg := a*e, g-e
		out[i] = e*out[i-1] + (g-e)*value[i-1] + (1-g)*value[i]
		slope[i] = de*out[i-1] + e*slope[i-1] + (dg-de)*value[i-1] - dg*value[i]
	}
	return out, slope
}

// interpolate returns v at time t, straight between times, constant outside.
func interpolate(timeH, v []float64, t float64) float64 {
	i, exact := slices.BinarySearch(timeH, t)
	switch {
	case exact:
		return v[i]
	case i == 0:
		return v[0]
	case i == len(v):
		return v[len(v)-1]
	}
	w := (t - timeH[i-1]) / (timeH[i] - timeH[i-1])
	return v[i-1] + w*(v[i]-v[i-1])
}

// lagBounds returns the bounds of ln lag, and whether the lag is searched.
func (a *Ambient) lagBounds() (lower, upper float64, searched bool) {
	lo, hi := a.LagH[0], a.LagH[1]
	if lo == 0 && hi == 0 {
		lo, hi = 0.1, 12
	}
	if lo == hi {
		return math.Log(max(lo, 1e-9)), math.Log(max(hi, 1e-9)), false
	}
	return math.Log(max(lo, 1e-3)), math.Log(hi), true
}

// answers reports whether series s answers to the ambient record.
func (a *Ambient) answers(s int) bool { return a.Series == nil || slices.Contains(a.Series, s) }
