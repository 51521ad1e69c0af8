package creep

import (
	"errors"
	"math"
)

// Allan returns the overlapping Allan deviation of values read at equal
// intervals, at averaging factor m: the square root of half the mean squared
// difference of neighbouring means of m values (NIST SP 1065, section
// 5.2.4), in the unit of the values. An error where fewer than 2m values are
// given.
func Allan(v []float64, m int) (float64, error) {
	return allan(v, m, 1)
}

// AllanPlain is Allan without overlap (NIST SP 1065, section 5.2.2): the
// means follow one another.
func AllanPlain(v []float64, m int) (float64, error) {
	return allan(v, m, m)
}

func allan(v []float64, m, stride int) (float64, error) {
	if m < 1 || len(v) < 2*m {
		return 0, errors.New("an Allan deviation needs at least two means of the averaging factor's length")
	}
	sums := cumulative(v)
	var s float64
	n := 0
	for i := 0; i+2*m <= len(v); i += stride {
		d := (sums[i+2*m] - 2*sums[i+m] + sums[i]) / float64(m)
		s += d * d
		n++
	}
	return math.Sqrt(s / (2 * float64(n))), nil
}

// AllanModified is the modified Allan deviation (NIST SP 1065, section
// 5.2.5), which tells white noise from flicker where Allan does not. It needs
// 3m-1 values or more.
func AllanModified(v []float64, m int) (float64, error) {
	if m < 1 || len(v) < 3*m-1 || len(v) < 2 {
		return 0, errors.New("a modified Allan deviation needs three times the averaging factor in values")
	}
	sums := cumulative(v)
	var s float64
	n := 0
	for j := 0; j+3*m <= len(v)+1; j++ {
		var d float64
		for i := j; i < j+m; i++ {
			d += sums[i+2*m] - 2*sums[i+m] + sums[i]
		}
		s += d * d
		n++
	}
	f := float64(m)
	return math.Sqrt(s / (2 * float64(n) * f * f * f * f)), nil
}

// cumulative returns the running sums of v less its mean, which changes no
// difference of means and keeps digits.
func cumulative(v []float64) []float64 {
	var mean float64
	for _, x := range v {
		mean += x / float64(len(v))
	}
	out := make([]float64, len(v)+1)
	for i, x := range v {
		out[i+1] = out[i] + (x - mean)
	}
	return out
}

// Soak says how a gauge at rest wanders.
type Soak struct {
	// TauS are averaging times, s; DeviationMM the overlapping Allan
	// deviations at them, never below the resolution's floor.
	TauS, DeviationMM []float64
	// AverageS is the averaging time of least deviation.
	AverageS float64
	// FloorMM is resolution / sqrt 12; Floored is true where the readings
	// scatter less than that and the floor stands in their place.
	FloorMM float64
	Floored bool
}

// SoakOf works out the Allan deviations of a no-load soak read every
// intervalS seconds, at averaging factors 1, 2, 4 and so on to a quarter of
// the record, and the averaging time they recommend. resolutionMM is that of
// the gauge: constant quantised readings are not exact, and get the floor.
func SoakOf(sagMM []float64, intervalS, resolutionMM float64) (Soak, error) {
	if !(intervalS > 0) || !(resolutionMM >= 0) || len(sagMM) < 8 {
		return Soak{}, errors.New("a soak needs eight readings or more at an interval above 0")
	}
	s := Soak{FloorMM: resolutionMM / math.Sqrt(12)}
	var spread float64
	for i := range sagMM {
		spread = max(spread, math.Abs(sagMM[i]-sagMM[0]))
	}
	least := math.Inf(1)
	for m := 1; m <= len(sagMM)/4; m *= 2 {
		d, err := Allan(sagMM, m)
		if err != nil || !finite(d) {
			return Soak{}, errors.New("the soak's readings are not all numbers")
		}
		tau := float64(m) * intervalS
		if d < least {
			least, s.AverageS = d, tau
		}
		// Averaging helps below the floor only where noise dithers the steps.
		if spread < 1.5*resolutionMM && d < s.FloorMM {
			d, s.Floored = s.FloorMM, true
		}
		s.TauS, s.DeviationMM = append(s.TauS, tau), append(s.DeviationMM, d)
	}
	return s, nil
}
