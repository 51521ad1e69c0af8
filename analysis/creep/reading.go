package creep

import (
	"math"

	"gaugelog/analysis/lsq"

	"gonum.org/v1/gonum/mat"
)

// Reading is the sag of the creep gauge a time after full load of the creep
// step, without what temperature, offsets and drift did.
type Reading struct {
	AfterH float64
	Sag    Value // mm
	// Relative is Sag over the initial sag of the same step; Coefficient is
	// Relative - 1. Nil where the initial sag was not read.
	Relative, Coefficient *Value
	// Modelled is true where no reading was near and the law stands in.
	Modelled bool
}

// Recovered is the state a time after unloading.
type Recovered struct {
	AfterH float64
	// Share is the part of the sag before unloading that came back, 0..1.
	Share    Value
	Residual Value // sag left, mm
	// Predicted is the sag left by the law of the loading part, mm.
	Predicted Value
}

// near reads the compensated sag of the creep gauge at tH: the law plus a
// straight line in ln(age) through the residuals within an octave each side,
// so that the law's curvature cannot bias it. age counts from origin; from
// and to bound the readings that may be used. Compensated readings are f's;
// the noise is another fit's where f itself is in question.
func near(law func(tH float64) float64, f, noise *Fit, tH, origin, from, to float64) (Value, bool) {
	s := &f.sys.in.Series[0]
	var x, y, u []float64
	left, right := false, false
	for i, t := range s.TimeH {
		age, at := t-origin, tH-origin
		if t < from || t > to || age < at/2 || age > at*2 {
			continue
		}
		x, y, u = append(x, math.Log(age/at)), append(y, f.CompensatedMM[0][i]-law(t)), append(u, noise.Scale*s.U[i])
		left, right = left || age <= at*1.05, right || age >= at/1.05
	}
	if len(x) < 3 || !left || !right {
		return Value{}, false
	}
	degree := 1
	if len(x) < 5 {
		degree = 0
	}
	a := lsq.Polynomial(x, degree)
	sol, err := lsq.Solve(lsq.Problem{Design: a, Y: y, U: u})
	if err != nil {
		sol, err = lsq.Solve(lsq.Problem{Design: mat.NewDense(len(x), 1, ones(len(x))), Y: y, U: u})
		if err != nil {
			return Value{}, false
		}
	}
	scatter := max(1, sol.ResidualSD())
	return Value{law(tH) + sol.X[0], math.Hypot(sol.U(0)*scatter, noise.SlowMM)}, true
}

func ones(n int) []float64 {
	v := make([]float64, n)
	for i := range v {
		v[i] = 1
	}
	return v
}

// read fills After and Equivalent.
func (a *Analysis) read(in *Input, o Options) {
	f := a.Best
	at := func(h float64) (Value, bool) {
		return near(f.At, f, f, in.FullH+h, in.FullH, in.FullH, in.EndH)
	}
	initial, hasInitial := at(in.initialH())
	if !hasInitial {
		a.note("no-initial", "no readings about %.3g h after full load; relative creep is given by the single-load equivalent only", in.initialH())
	}
	for _, h := range o.TimesH {
		// A hold counted from the begin of the ramp ends a little early; beyond
		// the data there is a forecast or nothing.
		if in.FullH+h > in.EndH+endsEarly*h {
			continue
		}
		a.Equivalent = append(a.Equivalent, Relative{h, f.Equivalent(h, in.initialH())})
		v, ok := at(h)
		r := Reading{AfterH: h, Sag: v}
		if !ok {
			r.Modelled = true
			r.Sag = Value{f.At(in.FullH + h), f.U(in.FullH + h)}
		}
		if hasInitial && initial.Value != 0 {
			rel := quotient(r.Sag, initial)
			if h == in.initialH() {
				rel.U = 0
			}
			r.Relative = &rel
			r.Coefficient = &Value{rel.Value - 1, rel.U}
		}
		a.After = append(a.After, r)
	}
}

// endsEarly is the share of a time asked for by which a step may end before it
// and still be read at it: sag goes with the logarithm of time or slower.
const endsEarly = 1e-3

// quotient is a/b of independent figures.
func quotient(a, b Value) Value {
	q := a.Value / b.Value
	return Value{q, math.Hypot(a.U, q*b.U) / math.Abs(b.Value)}
}

// recover fills Recovery, PermanentSet and LoadingOnly: the laws of the
// loading part, weighted, predict the recovery; what they do not explain of
// the sag left at its end is the permanent set.
func (a *Analysis) recover(in *Input, loading []*Fit, unload Change, o Options) {
	b := &Analysis{}
	b.choose(loading)
	if b.Best == nil {
		a.note("no-loading-law", "the loading part alone fixes no law; the recovery cannot be checked against it")
		return
	}
	free := unload.AtH + unload.RampH
	last := in.Series[0].TimeH[len(in.Series[0].TimeH)-1]
	predict := func(t float64) Value {
		m, w, s := b.average(func(f *Fit) Value {
			v, g := f.gradient(t, in.Series[0].Changes)
			return Value{v, lsq.PropagateU(f.inner, g)}
		})
		return Value{m, math.Hypot(w, s)}
	}
	law := func(t float64) float64 { return predict(t).Value }
	before, ok := near(law, a.Best, b.Best, unload.AtH-1e-6, in.FullH, in.FullH, unload.AtH)
	if !ok {
		before = Value{law(unload.AtH - 1e-6), predict(unload.AtH - 1e-6).U}
	}
	at := func(h float64) (Recovered, bool) {
		v, ok := near(law, a.Best, b.Best, free+h, free, free, last)
		if !ok || before.Value == 0 {
			return Recovered{}, false
		}
		q := quotient(v, before)
		return Recovered{AfterH: h, Residual: v, Share: Value{1 - q.Value, q.U}, Predicted: predict(free + h)}, true
	}
	for _, h := range o.TimesH {
		if r, ok := at(h); ok {
			a.Recovery = append(a.Recovery, r)
		}
	}
	end, ok := at(last - free)
	if !ok {
		a.note("recovery-too-short", "too few readings after the unloading to judge the recovery")
		return
	}
	set := Value{end.Residual.Value - end.Predicted.Value, math.Hypot(end.Residual.U, end.Predicted.U)}
	a.PermanentSet = &set
	k := b.Best.Coverage()
	if math.Abs(set.Value) > max(3, k)*set.U {
		a.LoadingOnly = true
		if set.Value > 0 {
			a.note("recovery-not-linear", "the law of the loading part predicts %.4g\u202fmm left at the end of the recovery, %.4g\u202fmm were: %.3g\u202fmm (u %.2g\u202fmm) of permanent set; the law is taken from the loading part alone",
				end.Predicted.Value, end.Residual.Value, set.Value, set.U)
		} else {
			a.note("recovery-overshoots", "more came back (%.4g\u202fmm left) than the law of the loading part predicts (%.4g\u202fmm): the beam, a zero or a load is not what the marks say; the law is taken from the loading part alone",
				end.Residual.Value, end.Predicted.Value)
		}
	}
}
