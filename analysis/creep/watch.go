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

// Limits are what Watch holds the sag against.
type Limits struct {
	SagMM float64 // 0: none
}

// The rules of the two levels. Two windows in succession must agree, so that
// a knock, which falls into one window, raises nothing; z is in units of the
// scatter that windows of the same length had before, which counts what is
// left of daily cycles.
const (
	cautionRatio = 1.25
	clearRatio   = 1.5
	leastZ       = 6
	leastHistory = 8 // windows before a rate can be judged
)

// Watch looks for acceleration in the temperature-compensated sag (mm) of
// one steady load, at ages in h (rising), with windows of 3 h and its
// doublings. Offsets that are known must have been taken out.
func Watch(ageH, sagMM []float64, l Limits) Acceleration {
	var out Acceleration
	if len(ageH) < 10 {
		return out
	}
	for w := 3.0; w <= ageH[len(ageH)-1]/float64(leastHistory); w *= 2 {
		watchScale(ageH, sagMM, w, l, &out)
	}
	return out
}

// window is one window's rate.
type window struct {
	endH, rate, last float64 // h, mm/h, mm
}

// windows cuts the record into windows of w hours that do not overlap and
// have a robust slope each; windows with too few readings are left out.
func windows(age, sag []float64, w float64) []window {
	var out []window
	i := 0
	for k := math.Floor(age[0] / w); i < len(age); k++ {
		var x, y []float64
		for ; i < len(age) && age[i] < (k+1)*w; i++ {
			x, y = append(x, age[i]), append(y, sag[i])
		}
		if k == 0 || len(x) < 4 || x[len(x)-1]-x[0] < 0.6*w {
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
func watchScale(age, sag []float64, w float64, l Limits, out *Acceleration) {
	win := windows(age, sag, w)
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
		if low-base < leastZ*u {
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

// scatter is the robust standard deviation of a window's rate about the
// median of its neighbours, over the last forty windows: what daily cycles
// and noise do.
func scatter(win []window) float64 {
	var d []float64
	for i := max(2, len(win)-40); i < len(win); i++ {
		d = append(d, win[i].rate-median5(win, i))
	}
	return lsq.MADScale * lsq.MAD(d)
}
