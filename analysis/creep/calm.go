package creep

import (
	"math"

	"gaugelog/analysis/lsq"
)

// The watch for acceleration compensates for temperature and humidity by
// itself: a law bends where the sag runs away from it or where a knock was
// overlooked, and takes the weather's coefficients with it. What repeats from
// day to day does not bend, so the coefficients are taken from what is left
// of sag and surroundings once their means over a day are gone.

// calm returns the creep gauge's sag under the creep step's load without what
// the surroundings did, at ages in h since full load.
func (in *Input) calm() (age, sag []float64) {
	s := &in.Series[0]
	var at []float64
	for i, t := range s.TimeH {
		if t > in.FullH && t < in.EndH {
			age, at, sag = append(age, t-in.FullH), append(at, t), append(sag, s.SagMM[i])
		}
	}
	if len(age) < 48 {
		return age, sag
	}
	var felt []*Ambient
	for i := range in.Ambient {
		a := &in.Ambient[i]
		if !a.answers(0) {
			continue
		}
		if _, _, searched := a.lagBounds(); searched {
			felt = append(felt, a)
		} else if a.Prior != nil { // a reference gauge: what it shows is known to be shared
			for k, t := range at {
				sag[k] -= a.Prior.Value * (interpolate(a.TimeH, a.Value, t) - interpolate(a.TimeH, a.Value, at[0]))
			}
		}
	}
	if len(felt) > 0 {
		compensateDaily(at, age, sag, felt)
	}
	return age, sag
}

// lagged is a record seen through one lag: whole, and without its day's mean.
type lagged struct{ whole, daily []float64 }

// through returns the record through a lag, at instants at.
func (a *Ambient) through(lagH float64, at, age []float64) lagged {
	f, _ := Lagged(a.TimeH, a.Value, lagH)
	v := make([]float64, len(at))
	for k, t := range at {
		v[k] = interpolate(a.TimeH, f, t)
	}
	return lagged{v, withoutDay(age, v)}
}

// withoutDay returns v less its mean over the day about each age, later over
// up to four days, so that weather counts too; NaN where no such time is
// there, or the sag still runs fast.
func withoutDay(age, v []float64) []float64 {
	sum := make([]float64, len(v)+1)
	for i, x := range v {
		sum[i+1] = sum[i] + x - v[0]
	}
	out := make([]float64, len(v))
	i, j := 0, 0
	for k, t := range age {
		half := min(max(t/8, 12), 48)
		for i < len(age) && age[i] < t-half {
			i++
		}
		for j < len(age) && age[j] <= t+half {
			j++
		}
		if t < 24 || t+half > age[len(age)-1] || j-i < 12 {
			out[k] = math.NaN()
			continue
		}
		out[k] = v[k] - v[0] - (sum[j]-sum[i])/float64(j-i)
	}
	return out
}

// compensateDaily takes the answers to the records off sag, at the lags that
// leave least: each record's lag in turn, twice.
func compensateDaily(at, age, sag []float64, felt []*Ambient) {
	y := withoutDay(age, withoutJumps(sag))
	x := make([]lagged, len(felt))
	lags := make([]float64, len(felt))
	bounds := func(a *Ambient) (lo, hi float64) {
		// A longer lag would turn weather into what looks like creep.
		lo, hi, _ = a.lagBounds()
		return lo, max(min(hi, math.Log(age[len(age)-1]/6)), lo+0.1)
	}
	for j, a := range felt {
		lo, hi := bounds(a)
		lags[j] = (lo + hi) / 2
		x[j] = a.through(math.Exp(lags[j]), at, age)
	}
	// What creep leaves when a day's mean is gone is no answer to the weather.
	steep := make([]float64, len(age))
	for k, t := range age {
		steep[k] = math.Log(max(t, 1))
	}
	x = append(x, lagged{steep, withoutDay(age, steep)})
	for range 2 {
		for j, a := range felt {
			lo, hi := bounds(a)
			lags[j] = lsq.Minimize(func(l float64) float64 {
				x[j] = a.through(math.Exp(l), at, age)
				_, left := answer(y, x)
				return left
			}, lo, hi, 9, 0.02)
			x[j] = a.through(math.Exp(lags[j]), at, age)
		}
		if len(felt) == 1 {
			break
		}
	}
	c, _ := answer(y, x)
	for j := range min(len(c), len(felt)) {
		for k := range sag {
			sag[k] -= c[j] * (x[j].whole[k] - x[j].whole[0])
		}
	}
}

// answer regresses y on the records' daily parts, twice, the second time
// without what stands out by four times the scatter; it returns the
// coefficients and the scatter left, infinite where nothing can be said.
func answer(y []float64, x []lagged) ([]float64, float64) {
	limit := math.Inf(1)
	var c, rest []float64
	for range 2 {
		var rows []float64
		var b []float64
		for k, v := range y {
			if math.IsNaN(v) || c != nil && math.Abs(left(v, x, c, k)) > limit {
				continue
			}
			b = append(b, v)
			for _, r := range x {
				rows = append(rows, r.daily[k])
			}
		}
		if len(b) < 24 {
			return nil, math.Inf(1)
		}
		if c = normal(rows, b, len(x)); c == nil {
			return nil, math.Inf(1)
		}
		rest = rest[:0]
		for k, v := range y {
			if !math.IsNaN(v) {
				rest = append(rest, math.Abs(left(v, x, c, k)))
			}
		}
		limit = 4 * lsq.MADScale * lsq.Median(rest)
	}
	return c, limit
}

func left(v float64, x []lagged, c []float64, k int) float64 {
	for j, a := range c {
		v -= a * x[j].daily[k]
	}
	return v
}

// normal solves the normal equations of few well-scaled columns; nil where
// they cannot be told apart.
func normal(rows, b []float64, n int) []float64 {
	a := make([]float64, n*(n+1))
	for r, v := range b {
		line := rows[r*n : (r+1)*n]
		for i := range n {
			for j := range n {
				a[i*(n+1)+j] += line[i] * line[j]
			}
			a[i*(n+1)+n] += line[i] * v
		}
	}
	for i := range n {
		p := a[i*(n+1)+i]
		if !(p > 1e-9*rms(b)*rms(b)*1e-6) {
			return nil
		}
		for k := i + 1; k < n; k++ {
			f := a[k*(n+1)+i] / p
			for j := i; j <= n; j++ {
				a[k*(n+1)+j] -= f * a[i*(n+1)+j]
			}
		}
	}
	x := make([]float64, n)
	for i := n - 1; i >= 0; i-- {
		t := a[i*(n+1)+n]
		for j := i + 1; j < n; j++ {
			t -= a[i*(n+1)+j] * x[j]
		}
		x[i] = t / a[i*(n+1)+i]
	}
	return x
}
