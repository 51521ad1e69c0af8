package creep

import (
	"math"

	"gaugelog/analysis/lsq"
)

// Stage is the stage of creep at the end of the step.
type Stage string

// The stages: the rate falls, stays, grows.
const (
	Primary   Stage = "primary"
	Secondary Stage = "secondary"
	Tertiary  Stage = "tertiary"
)

// stage fills Rate, Method and Stage; Acceleration is known.
func (a *Analysis) stage(in *Input) {
	f := a.Best
	var age, sag []float64
	for i, t := range in.Series[0].TimeH {
		if t > in.FullH && t < in.EndH && i < len(f.CompensatedMM[0]) {
			age, sag = append(age, t-in.FullH), append(sag, f.CompensatedMM[0][i])
		}
	}
	if len(age) == 0 {
		return
	}
	end := in.steadyEnd()
	law := f.Rate(math.Min(end, in.FullH+age[len(age)-1]) - 1e-9)
	a.Rate, a.Method = &law, "law"
	if local, mid, ok := localRate(age, sag); ok {
		there := f.Rate(in.FullH + mid)
		if math.Abs(local.Value-there.Value) > max(4*math.Hypot(local.U, there.U), 0.1*math.Abs(there.Value)) {
			a.Rate, a.Method = &local, "local"
			a.note("rate-off-law", "the sag at the end of the step runs at %.3g\u202fmm/d where the law has %.3g\u202fmm/d", local.Value, there.Value)
		}
	}
	a.Stage = stageOf(age, sag, f, in)
	if a.Acceleration.CautionH != nil {
		a.Stage = Tertiary
	}
}

// watch looks for acceleration in the creep gauge under the creep step's
// load; its times are counted from the caller's origin.
func (in *Input) watch() Acceleration {
	age, sag := in.calm()
	var changes []float64
	for _, c := range in.Series[0].Changes {
		if c.AtH > in.FullH && c.AtH < in.EndH {
			changes = append(changes, c.AtH+c.RampH-in.FullH)
		}
	}
	if len(age) == 0 {
		return Acceleration{}
	}
	out := Watch(age, sag, Limits{ChangesH: changes, SagMM: in.LimitMM, ResolutionMM: in.Series[0].ResolutionMM})
	for _, p := range []*float64{out.MinimumH, out.CautionH, out.ClearAreaH} {
		if p != nil {
			*p += in.FullH
		}
	}
	return out
}

// localRate is the slope of sag over the last tenth of the time (at least a
// day where there is one), mm/d, by the median of pairs, and the middle of
// that time, h.
func localRate(age, sag []float64) (Value, float64, bool) {
	end := age[len(age)-1]
	from := end - max(0.1*end, min(24, 0.5*end))
	var x, y []float64
	for i, t := range age {
		if t >= from {
			x, y = append(x, t/24), append(y, sag[i])
		}
	}
	if len(x) < 6 {
		return Value{}, 0, false
	}
	x, y = thin(x, y, 300)
	l, err := lsq.TheilSen(x, y, 1.96)
	if err != nil {
		return Value{}, 0, false
	}
	return Value{l.Slope, (l.High - l.Low) / (2 * 1.96)}, (from + end) / 2, true
}

// thin keeps at most n points, evenly.
func thin(x, y []float64, n int) ([]float64, []float64) {
	if len(x) <= n {
		return x, y
	}
	var a, b []float64
	for i := range n {
		k := i * (len(x) - 1) / (n - 1)
		a, b = append(a, x[k]), append(b, y[k])
	}
	return a, b
}

// stageOf reads m = d ln(rate)/d ln t over the last half decade, in bins of
// a twelfth of a decade; where the readings do not tell, the law does.
func stageOf(age, sag []float64, f *Fit, in *Input) Stage {
	end := age[len(age)-1]
	width := math.Pow(10, 1.0/12)
	var t, w []float64
	for hi := end * 1.0001; hi > end/math.Pow(10, 0.5); hi /= width {
		var st, sw, n float64
		for i, x := range age {
			if x <= hi && x > hi/width {
				st, sw, n = st+math.Log(x), sw+sag[i], n+1
			}
		}
		if n > 0 {
			t, w = append(t, st/n), append(w, sw/n)
		}
	}
	var x, y []float64
	for i := range len(t) - 1 {
		rate := (w[i] - w[i+1]) / (math.Exp(t[i]) - math.Exp(t[i+1]))
		if rate > 0 {
			x, y = append(x, (t[i]+t[i+1])/2), append(y, math.Log(rate))
		}
	}
	if len(x) >= 5 {
		if l, err := lsq.TheilSen(x, y, 1.96); err == nil && l.High-l.Low < 1 {
			return stageFrom(l.Slope)
		}
	}
	at := in.FullH + end
	a, b := f.Rate(at).Value, f.Rate(in.FullH+end/1.5).Value
	if a <= 0 || b <= 0 {
		return Primary
	}
	return stageFrom(math.Log(a/b) / math.Log(1.5))
}

func stageFrom(m float64) Stage {
	switch {
	case m > 0.15:
		return Tertiary
	case m > -0.15:
		return Secondary
	}
	return Primary
}
