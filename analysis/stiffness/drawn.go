package stiffness

import (
	"fmt"
	"math"
)

// groups is into how many parts the draws are split to see how well they know
// their own interval.
const groups = 10

// drawn sums up the draws and holds them against the propagated interval.
func drawn(batches [][]float64, q Quantity) Drawn {
	v := join(batches)
	d := Drawn{PropagatedLo: q.Value - q.U95, PropagatedHi: q.Value + q.U95}
	for _, x := range v {
		d.Mean += x / float64(len(v))
	}
	d.SD = math.Sqrt(variance(v))
	d.Lo, d.Hi = shortest(v, 0.95)
	d.Noise = noise(batches)
	apart := math.Max(math.Abs(d.Lo-d.PropagatedLo), math.Abs(d.Hi-d.PropagatedHi))
	for _, digits := range []int{2, 1} {
		d.Tolerance = tolerance(q.U, digits)
		if apart <= d.Tolerance+2*d.Noise {
			d.Digits, d.Agrees = digits, true
			break
		}
	}
	return d
}

// noise is the standard error of the shortest interval's ends, from the
// scatter of the intervals of parts of the draws; 0 for too few draws.
func noise(batches [][]float64) float64 {
	if len(batches) < groups {
		return 0
	}
	var lo, hi [groups]float64
	for g := range groups {
		var part [][]float64
		for b := g; b < len(batches); b += groups {
			part = append(part, batches[b])
		}
		lo[g], hi[g] = shortest(join(part), 0.95)
	}
	v := math.Max(variance(lo[:]), variance(hi[:]))
	return math.Sqrt(v / groups)
}

func variance(v []float64) float64 {
	mean, sum := 0.0, 0.0
	for _, x := range v {
		mean += x / float64(len(v))
	}
	for _, x := range v {
		sum += (x - mean) * (x - mean) / float64(len(v)-1)
	}
	return sum
}

// shortest is the shortest interval with a share p of the sorted values.
func shortest(v []float64, p float64) (lo, hi float64) {
	n := int(math.Round(p * float64(len(v))))
	best := math.Inf(1)
	for i := 0; i+n < len(v); i++ {
		if w := v[i+n] - v[i]; w < best {
			best, lo, hi = w, v[i], v[i+n]
		}
	}
	return lo, hi
}

// tolerance is half a unit of u's first or second significant digit (JCGM 101,
// 7.9.2).
func tolerance(u float64, digits int) float64 {
	if !(u > 0) {
		return 0
	}
	return 0.5 * math.Pow(10, math.Floor(math.Log10(u))+1-float64(digits))
}

func (mc *MonteCarlo) words() string {
	m := mc.Modulus
	how := [...]string{"differs from", "agrees to one digit of u with", "agrees to two digits of u with"}[m.Digits]
	return fmt.Sprintf("%d draws of all inputs (seed %d) give 95 %% of the moduli in %.6g\u202fMPa to %.6g\u202fMPa, which %s the propagated %.6g\u202fMPa to %.6g\u202fMPa (tolerance %.2g\u202fMPa at each end, beside the draws' own noise of %.2g\u202fMPa)",
		mc.Draws, mc.Seed, m.Lo, m.Hi, how, m.PropagatedLo, m.PropagatedHi, m.Tolerance, m.Noise)
}
