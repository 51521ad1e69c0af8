package analysis

import (
	"math"

	"gaugelog/analysis/beam"
	"gaugelog/analysis/evaluate"
	"gaugelog/analysis/history"
	"gaugelog/analysis/steps"
	"gaugelog/analysis/stiffness"
	"gaugelog/config"
)

// factsBuilder draws what rules may ask from the result and the history.
type factsBuilder struct {
	r                        *Result
	h                        *history.History
	f                        *steps.Findings
	ei, s, gravity, uGravity float64

	step, gauge int
	out         *evaluate.Facts
}

// build fills the facts; what this run cannot tell stays nil.
func (b *factsBuilder) build(moments []evaluate.Moment) (*evaluate.Facts, error) {
	rig := b.h.Rig
	b.out = &evaluate.Facts{Details: map[string]string{}}
	for _, d := range rig.Details {
		b.out.Details[d.Name] = d.Text
	}
	b.section()
	b.limits()
	b.step, b.gauge = creepStep(b.f), -1
	if b.step >= 0 {
		b.gauge = creepGauge(rig, b.f, b.step)
	} else {
		for i, g := range rig.Gauges {
			if g.Name == rig.Read.CreepGauge {
				b.gauge = i
			}
		}
	}
	b.places()
	if b.step < 0 {
		return b.out, nil
	}
	full, end := b.interval()
	b.loads()
	b.climate(full, end)
	b.sags()
	return b.out, b.readings(moments, full, end)
}

func (b *factsBuilder) section() {
	c := b.h.Rig.Specimen.Section
	b.out.Width, b.out.Depth = meanLength(c.Width, c.U), meanLength(c.Depth, c.U)
	if s, err := stiffness.SectionOf(c); err == nil {
		b.out.SecondMoment = evaluate.Measured(s.SecondMoment.Value, s.SecondMoment.U)
		if s.Modulus > 0 {
			b.out.SectionModulus = evaluate.Measured(s.Modulus, 0)
		}
	}
	if s := b.h.Rig.Specimen.Expect.Strength; s != nil {
		b.out.Strength = evaluate.Measured(s.Value, s.U)
	}
}

// meanLength is the mean of measured places, with the instrument's u and the
// scatter of the mean; nil for none.
func meanLength(places []config.Length, u *config.Length) *evaluate.Quantity {
	if len(places) == 0 {
		return nil
	}
	n, sum, squares := float64(len(places)), 0.0, 0.0
	for _, p := range places {
		sum += p.Value
	}
	for _, p := range places {
		squares += (p.Value - sum/n) * (p.Value - sum/n)
	}
	q := evaluate.Measured(sum/n, 0)
	switch {
	case u != nil:
		q.U = u.Value
	case n == 1:
		q.U = places[0].U
	}
	if n > 1 {
		q.U = math.Hypot(q.U, math.Sqrt(squares/(n-1)/n))
	}
	return q
}

func (b *factsBuilder) limits() {
	l := b.h.Rig.Limits
	if l.Sag != nil {
		b.out.LimitSag = evaluate.Exactly(l.Sag.Value)
	}
	if l.SpanOverSag != nil {
		b.out.LimitSpanOverSag = evaluate.Exactly(l.SpanOverSag.Value)
	}
}

// places fills what the rig file says of supports and gauges.
func (b *factsBuilder) places() {
	rig := b.h.Rig
	measured, seeing := 0.0, 0.0
	for _, s := range b.f.Supports {
		if s.Measured {
			measured++
		}
	}
	for _, g := range rig.Gauges {
		if touches(g) {
			seeing++
		}
	}
	b.out.Supports, b.out.SupportsMeasured = evaluate.Exactly(float64(len(rig.Supports))), evaluate.Exactly(measured)
	b.out.Gauges = evaluate.Exactly(seeing)
	if b.gauge < 0 {
		return
	}
	g := &rig.Gauges[b.gauge]
	b.out.Resolution = evaluate.Exactly(g.Resolution.Value)
	left, right := neighbours(rig.Supports, g.At.Value)
	if left == nil || right == nil {
		return
	}
	mid := (left.At.Value + right.At.Value) / 2
	b.out.Span = evaluate.Measured(right.At.Value-left.At.Value, both(left.At.U, right.At.U))
	b.out.GaugeOffCentre = evaluate.Measured(math.Abs(g.At.Value-mid), g.At.U)
	if l := b.onlyLoad(); l != nil {
		b.out.LoadOffCentre = evaluate.Measured(math.Abs(l.At.Value-mid), l.At.U)
	}
}

// both combines two uncertainties; unknown where either is.
func both(a, b float64) float64 {
	if a == 0 || b == 0 {
		return 0
	}
	return math.Hypot(a, b)
}

// neighbours are the supports on either side of a place, nil where none.
func neighbours(supports []config.Support, at float64) (left, right *config.Support) {
	for i := range supports {
		s := &supports[i]
		if s.At.Value <= at && (left == nil || s.At.Value > left.At.Value) {
			left = s
		}
		if s.At.Value > at && (right == nil || s.At.Value < right.At.Value) {
			right = s
		}
	}
	return left, right
}

// delta is what a load adds in the creep step to the baseline, N.
func (b *factsBuilder) delta(name string) float64 {
	return b.f.Steps[b.step].Loads[name] - b.f.Steps[b.f.Baseline].Loads[name]
}

// onlyLoad is the one load at one place of the creep step, nil if otherwise.
func (b *factsBuilder) onlyLoad() *config.Load {
	if b.step < 0 {
		return nil
	}
	var only *config.Load
	for i := range b.h.Rig.Loads {
		l := &b.h.Rig.Loads[i]
		if b.delta(l.Name) == 0 {
			continue
		}
		if only != nil || l.At == nil {
			return nil
		}
		only = l
	}
	return only
}

// interval fills the durations and returns the creep step's full load and end.
func (b *factsBuilder) interval() (full, end int64) {
	st := b.f.Steps[b.step]
	full, end = st.Full, st.To
	if full == 0 {
		full = st.From
	}
	for _, c := range b.f.Loads {
		switch c.Step {
		case b.step:
			full = c.Full
		case b.step + 1:
			end = c.Full - int64(c.RampS*1e9)
			if after := b.f.Steps[c.Step]; totalOf(after.Loads) <= totalOf(b.f.Steps[b.f.Baseline].Loads)+1e-6 {
				b.out.RecoveryDuration = lasted(after.To-c.Full, after.StartU)
			}
		}
	}
	b.out.Duration = lasted(end-full, st.StartU)
	if st.Found != 0 && st.Full != 0 {
		b.out.LoadRamp = evaluate.Measured(st.RampS, st.StartU)
	}
	return full, end
}

func lasted(ns int64, u float64) *evaluate.Quantity {
	q := evaluate.Exactly(seconds(ns))
	if u > 0 {
		q = evaluate.Measured(q.Value, u)
	}
	return q
}

// loads fills the creep step's load and the stress it makes.
func (b *factsBuilder) loads() {
	rig, st := b.h.Rig, b.f.Steps[b.step]
	var total, places, loaded, weighed, variance float64
	known := true
	var forces []beam.Load
	units := unitLoads(rig)
	for _, l := range stepLoads(b.h, st, b.gravity) {
		if b.delta(l.Load) == 0 {
			continue
		}
		known = known && l.U > 0
		variance += l.U * l.U
		if l.Weighed {
			weighed += b.delta(l.Load)
		}
	}
	for i, l := range rig.Loads {
		n := b.delta(l.Name)
		if n == 0 {
			continue
		}
		total += n
		places++
		if i < len(units) {
			units[i].Force = n
			forces = append(forces, units[i])
		}
	}
	b.out.Load = evaluate.Measured(total, 0)
	if known && b.uGravity > 0 {
		b.out.Load.U = math.Hypot(math.Sqrt(variance), weighed*b.uGravity/b.gravity)
	}
	for i := b.f.Baseline + 1; i <= b.step; i++ {
		if s := b.f.Steps[i]; s.Response == nil || *s.Response {
			loaded++
		}
	}
	b.out.LoadPlaces, b.out.LoadSteps = evaluate.Exactly(places), evaluate.Exactly(loaded)
	if b.out.SectionModulus == nil || len(forces) != int(places) {
		return
	}
	if sol, err := beamOf(rig, b.ei, b.s, true).Solve(forces); err == nil {
		b.out.Stress = evaluate.Measured(math.Abs(sol.MaxMoment().Value)/b.out.SectionModulus.Value, 0)
	}
}

// climate fills the surroundings' extremes over the creep step, from the first
// probe that read them all through it.
func (b *factsBuilder) climate(full, end int64) {
	for i := range b.h.Rig.Probes {
		samples := b.h.Ambient(i)
		if b.out.TemperatureMin == nil {
			lo, hi := extremes(samples, full, end, func(s history.AmbientSample) float64 { return s.Celsius })
			b.out.TemperatureMin, b.out.TemperatureMax = lo, hi
		}
		if b.out.HumidityMin == nil {
			lo, hi := extremes(samples, full, end, func(s history.AmbientSample) float64 { return s.HumidityPercent / 100 })
			b.out.HumidityMin, b.out.HumidityMax = lo, hi
		}
	}
}

// extremes are the least and greatest in [full, end]; nil where more than an
// hour and more than a twentieth of it went by unread.
func extremes(samples []history.AmbientSample, full, end int64, of func(history.AmbientSample) float64) (lo, hi *evaluate.Quantity) {
	hole := max(hour, (end-full)/20)
	last, least, most := full, math.Inf(1), math.Inf(-1)
	for _, s := range samples {
		v := of(s)
		if s.Time < full || s.Time > end || math.IsNaN(v) {
			continue
		}
		if s.Time-last > hole {
			return nil, nil
		}
		last, least, most = s.Time, math.Min(least, v), math.Max(most, v)
	}
	if end-last > hole || math.IsInf(least, 0) {
		return nil, nil
	}
	return evaluate.Measured(least, 0), evaluate.Measured(most, 0)
}
