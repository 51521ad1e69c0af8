package creep

import (
	"math"

	"gaugelog/analysis/lsq"
)

// Acceleration says when the sag began to go faster, h after the origin of
// the ages given to Watch. It is a warning to keep away, never leave to go
// near and check; a brittle break gives none.
type Acceleration struct {
	// MinimumH is when the rate was least, given only where it rose since.
	MinimumH *float64
	// CautionH is when two windows in succession ran at 1.25 times the least
	// rate or more, ClearAreaH at 1.5 times or with the sag limit a day away.
	CautionH, ClearAreaH *float64
}

// Limits are what Watch holds the sag against, and what it must know.
type Limits struct {
	SagMM float64 // 0: none
	// ChangesH are load changes within the ages given, h: after each the creep
	// begins anew and so does the watch.
	ChangesH []float64
}

// The rules of the two levels. Two windows in succession must agree, so that
// a knock, which falls into one window, raises nothing; z is in units of the
// scatter that windows of the same length had before, which counts what is
// left of daily cycles.
const (
	cautionRatio = 1.25
	clearRatio   = 1.5
	firstZ       = 3 // of the first of two windows, then of the second
	secondZ      = 5
	leastHistory = 8 // windows before a rate can be judged
)

// Watch looks for acceleration in the temperature-compensated sag (mm) of
// one load, at ages in h (rising), with windows of 3 h and its doublings.
// Jumps that stay are taken out first: a knock is no acceleration.
func Watch(ageH, sagMM []float64, l Limits) Acceleration {
	var out Acceleration
	sag := withoutJumps(sagMM)
	for i, origin := 0, 0.0; i < len(ageH); {
		end := math.Inf(1)
		for _, c := range l.ChangesH {
			if c > ageH[i] {
				end = min(end, c)
			}
		}
		j := i
		var age []float64
		for j < len(ageH) && ageH[j] < end {
			age = append(age, ageH[j]-origin)
			j++
		}
		watchSegment(age, sag[i:j], origin, l, &out)
		i, origin = j, end
	}
	return out
}

// watchSegment watches one interval of steady load that began at origin.
func watchSegment(age, sag []float64, origin float64, l Limits, out *Acceleration) {
	if len(age) < 10 {
		return
	}
	var own Acceleration
	for w := 3.0; w <= age[len(age)-1]/float64(leastHistory); w *= 2 {
		// Windows at several phases, so that none waits long for its end.
		for phase := 0.0; phase < w; phase += max(w/8, 3) {
			watchScale(age, sag, w, phase, l, &own)
		}
	}
	for _, p := range []struct{ from, to **float64 }{{&own.MinimumH, &out.MinimumH}, {&own.CautionH, &out.CautionH}, {&own.ClearAreaH, &out.ClearAreaH}} {
		if *p.from != nil {
			earliest(p.to, origin+**p.from)
		}
	}
}

// withoutJumps returns the sag with jumps taken out that stand out from the
// differences about them and stay: medians of three readings before and
// after differ by most of the jump.
func withoutJumps(sag []float64) []float64 {
	out := make([]float64, len(sag))
	copy(out, sag)
	if len(sag) < 12 {
		return out
	}
	d := make([]float64, len(sag)-1)
	for i := range d {
		d[i] = sag[i+1] - sag[i]
	}
	var shift, sigma, middle float64
	for i := 1; i < len(sag); i++ {
		if i%8 == 1 {
			near := d[max(0, i-41):min(len(d), i+8)]
			middle, sigma = lsq.Median(near), lsq.MADScale*lsq.MAD(near)
		}
		jump := d[i-1] - middle
		if i >= 3 && i+3 <= len(sag) && math.Abs(jump) > 8*sigma && sigma > 0 {
			step := lsq.Median(sag[i:i+3]) - lsq.Median(sag[i-3:i])
			if math.Abs(step) > 0.7*math.Abs(jump) {
				shift += jump
			}
		}
		out[i] = sag[i] - shift
	}
	return out
}

// window is one window's rate.
type window struct {
	endH, rate, last float64 // h, mm/h, mm
}

// windows cuts the record, from phase on, into windows of w hours that do not overlap and
// have a robust slope each; windows with too few readings are left out.
func windows(age, sag []float64, w, phase float64) []window {
	var out []window
	i := 0
	for k := math.Floor((age[0] - phase) / w); i < len(age); k++ {
		var x, y []float64
		for ; i < len(age) && age[i]-phase < (k+1)*w; i++ {
			x, y = append(x, age[i]), append(y, sag[i])
		}
		if k <= 0 || len(x) < 4 || x[len(x)-1]-x[0] < 0.6*w {
			continue // the first window holds the fast begin
		}
		x, y = thin(x, y, 24)
		if s, ok := slope(x, y); ok {
			out = append(out, window{x[len(x)-1], s, y[len(y)-1]})
		}
	}
	return out
}

// slope is Theil and Sen's.
func slope(x, y []float64) (float64, bool) {
	l, err := lsq.TheilSen(x, y, 1.96)
	return l.Slope, err == nil
}

// watchScale looks at one window length and keeps the earliest findings.
func watchScale(age, sag []float64, w, phase float64, l Limits, out *Acceleration) {
	win := windows(age, sag, w, phase)
	least, leastAt := math.Inf(1), 0.0
	for i := range win {
		if i < leastHistory+1 {
			continue
		}
		// The reference ends two windows before those judged.
		ref := median5(win, i-4)
		if ref < least {
			least, leastAt = ref, win[i-4].endH
		}
		u := scatter(win[:i-1])
		a, b := win[i-1].rate, win[i].rate
		low := min(a, b)
		base := max(least, 0)
		if a-base < firstZ*u || b-base < secondZ*u {
			continue
		}
		if low > cautionRatio*base {
			earliest(&out.CautionH, win[i].endH)
			if out.MinimumH == nil || leastAt < *out.MinimumH {
				m := leastAt
				out.MinimumH = &m
			}
			soon := l.SagMM > 0 && win[i].last+24*b > l.SagMM
			if b > clearRatio*base && a > cautionRatio*base || soon {
				earliest(&out.ClearAreaH, win[i].endH)
			}
		}
	}
}

func earliest(p **float64, v float64) {
	if *p == nil || v < **p {
		*p = &v
	}
}

// median5 is the median rate of the five windows up to i.
func median5(win []window, i int) float64 {
	var v []float64
	for k := max(0, i-4); k <= i; k++ {
		v = append(v, win[k].rate)
	}
	return lsq.Median(v)
}

// scatter is the standard deviation of a window's rate from window to
// window over the last forty, by second differences, which a steady trend
// leaves at 0: what daily cycles and noise do. The sum of squares is not
// robust on purpose: where windows scatter wildly nothing can be said.
func scatter(win []window) float64 {
	var s, n float64
	for i := max(1, len(win)-40); i+1 < len(win); i++ {
		d := win[i+1].rate - 2*win[i].rate + win[i-1].rate
		s, n = s+d*d, n+1
	}
	if n < 3 {
		return math.Inf(1)
	}
	return math.Sqrt(s/(6*n)) * (1 + 4/n)
}
