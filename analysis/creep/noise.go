package creep

import (
	"math"
)

// noise is how the residuals of one series scatter: an independent part,
// scale times each bin's u, and a part that fades from one bin to the next as
// exp(-dt/fade): a first-order autoregression in continuous time, so that
// unequally spaced bins are served. whiten turns residuals into independent
// ones of unit variance by the scalar Kalman filter.
type noise struct {
	scale  float64 // factor on the bins' u
	slow   float64 // standard deviation of the fading part, mm
	fadeH  float64
	decay  []float64 // exp(-dt/fade) to the bin before
	gain   []float64
	sd     []float64 // of the innovation, mm
	logDet float64
}

// newNoise prepares the filter for bins at timeH with u.
func newNoise(timeH, u []float64, scale, slow, fadeH float64) *noise {
	n := &noise{scale: scale, slow: slow, fadeH: fadeH}
	product := 1.0 // of variances whose logarithm is still to be taken
	n.decay, n.gain, n.sd = make([]float64, len(u)), make([]float64, len(u)), make([]float64, len(u))
	left := slow * slow
	for i := range u {
		if i > 0 && slow > 0 {
			d := math.Exp(-(timeH[i] - timeH[i-1]) / fadeH)
			n.decay[i] = d
			left = d*d*left + slow*slow*(1-d*d)
		}
		white := scale * u[i] * scale * u[i]
		total := left + white
		n.gain[i] = left / total
		n.sd[i] = math.Sqrt(total)
		left *= white / total
		// One logarithm for many bins: the product stays far from the ends of
		// what a float64 holds.
		if product *= total; product < 1e-200 || product > 1e200 {
			n.logDet += math.Log(product)
			product = 1
		}
	}
	n.logDet += math.Log(product)
	return n
}

// whiten overwrites v, one value a bin.
func (n *noise) whiten(v []float64) {
	var state float64
	for i := range n.sd {
		state *= n.decay[i]
		e := v[i] - state
		state += n.gain[i] * e
		v[i] = e / n.sd[i]
	}
}

// whitenAll overwrites every column.
func (n *noise) whitenAll(sets ...[][]float64) {
	for _, cols := range sets {
		for _, v := range cols {
			n.whiten(v)
		}
	}
}

// effective is the number of independent bins that would fix a constant as
// well as these do; for equal spacing N(1-rho)/(1+rho).
func (n *noise) effective(u []float64) float64 {
	one := make([]float64, len(u))
	var mean float64
	for i := range one {
		one[i] = 1
		mean += 1 / (n.scale*n.scale*u[i]*u[i] + n.slow*n.slow)
	}
	n.whiten(one)
	var s float64
	for _, v := range one {
		s += v * v
	}
	if mean == 0 {
		return 0
	}
	return s * float64(len(u)) / mean
}

// estimateNoise finds the noise of greatest likelihood for residuals r (mm),
// its scale never below leastScale. lost is the number of parameters already
// fitted to them.
func estimateNoise(timeH, u, r []float64, lost float64) *noise {
	n := len(r)
	typical := rms(u)
	work := make([]float64, n)
	cost := func(ratio, fade float64) (value, scale float64) {
		f := newNoise(timeH, u, 1, ratio*typical, fade)
		copy(work, r)
		f.whiten(work)
		var s float64
		for _, v := range work {
			s += v * v
		}
		dof := max(float64(n)-lost, 1)
		scale = math.Sqrt(s / dof)
		scale = max(scale, leastScale)
		return f.logDet + 2*float64(n)*math.Log(scale) + s/(scale*scale), scale
	}
	// The fading part brings two parameters and must earn them.
	best, scale := cost(0, 1)
	best -= 4
	found := false
	if n < 8 {
		return newNoise(timeH, u, scale, 0, 1)
	}
	span := timeH[n-1] - timeH[0]
	step := 1.0
	lnRatio, lnFade := 0.0, 0.0
	for i := -2.0; i <= 5; i++ {
		for f := math.Log(1.0 / 60); f <= math.Log(max(span/5, 0.1)); f += 1 {
			if c, s := cost(math.Exp(i), math.Exp(f)); c < best-1e-9 {
				best, scale, lnRatio, lnFade = c, s, i, f
				found = true
			}
		}
	}
	if !found {
		return newNoise(timeH, u, scale, 0, 1)
	}
	for step > 0.02 {
		moved := false
		for _, d := range [][2]float64{{step, 0}, {-step, 0}, {0, step}, {0, -step}} {
			a, b := lnRatio+d[0], lnFade+d[1]
			if b > math.Log(max(span/5, 0.1)) || a > 12 {
				continue
			}
			if c, s := cost(math.Exp(a), math.Exp(b)); c < best-1e-9 {
				best, scale, lnRatio, lnFade, moved = c, s, a, b, true
			}
		}
		if !moved {
			step /= 2
		}
	}
	return newNoise(timeH, u, scale, math.Exp(lnRatio)*typical*scale, math.Exp(lnFade))
}

// leastScale bounds how much smaller than stated the scatter may be taken: a
// constant quantised reading scatters not at all, and is not exact for that.
const leastScale = 0.1

func rms(v []float64) float64 {
	var s float64
	for _, x := range v {
		s += x * x
	}
	if len(v) == 0 {
		return 0
	}
	return math.Sqrt(s / float64(len(v)))
}
