package stiffness

import (
	"fmt"
	"math"

	"gaugelog/analysis/beam"
	"gaugelog/config"
)

func (p *predictor) step(name string, forces []StepLoad, loads []beam.Load, line *beam.Solution) (PredictedStep, []float64) {
	out := PredictedStep{Step: name, Loads: map[string]float64{}}
	for _, f := range forces {
		out.Loads[f.Load] += f.N
	}
	creep := 1.0
	if c := p.rig.Specimen.Expect.CreepCoefficient; c != nil {
		creep += c.Value
	}
	sags := make([]float64, len(p.rig.Gauges))
	for i, g := range p.rig.Gauges {
		if sees(g) == "reference" {
			continue
		}
		sags[i] = p.sag(g, line) - p.sag(g, p.zero)
		pg := PredictedGauge{Gauge: g.Name, AtMM: g.At.Value, Sag: sags[i], WithCreep: sags[i] * creep, Slope: line.Slope(g.At.Value) - p.zero.Slope(g.At.Value)}
		if len(g.Travel) == 2 && g.Travel[1].Value > g.Travel[0].Value {
			pg.TravelUsed = math.Abs(pg.WithCreep) / (g.Travel[1].Value - g.Travel[0].Value)
		}
		out.Gauges = append(out.Gauges, pg)
		if pg.TravelUsed > 0.8 {
			p.warn("travel", g.Name, "step %s uses %.0f %% of the travel of gauge %s, creep included; preset it at the far end or use a longer one", name, 100*pg.TravelUsed, g.Name)
		}
	}
	out.Greatest = p.greatest(loads)
	out.WithCreep = out.Greatest.Value * creep
	out.Moment = line.MaxMoment()
	if p.sec.Modulus > 0 {
		out.Stress = math.Abs(out.Moment.Value) / p.sec.Modulus * p.largeSpan(loads, out.Greatest.Value)
	}
	if s := p.rig.Specimen.Expect.Strength; s != nil && s.Value > 0 {
		out.StressShare = out.Stress / s.Value
	}
	for _, r := range line.Uplift() {
		out.Uplift = append(out.Uplift, r.Name)
	}
	p.judge(&out)
	return out, sags
}

// largeSpan is the factor of ASTM D790 on the stress of three-point bending
// where the standard asks for it: one load amid two plain supports, the span
// more than sixteen depths, the sag more than a tenth of the span; 1 elsewhere.
func (p *predictor) largeSpan(loads []beam.Load, sag float64) float64 {
	s := p.rig.Supports
	if len(loads) != 1 || loads[0].From != loads[0].To || len(s) != 2 || s[0].Kind == "clamp" || s[1].Kind == "clamp" {
		return 1
	}
	l, amid := span(p.rig), (s[0].At.Value+s[1].At.Value)/2
	if math.Abs(loads[0].From-amid) > 0.01*l || l <= 16*p.sec.Depth || sag <= 0.1*l {
		return 1
	}
	return D790LargeSpan(sag, p.sec.Depth, l)
}

func (p *predictor) sag(g config.Gauge, line *beam.Solution) float64 {
	if sees(g) == "seat" {
		s := seat(p.rig, g.At.Value)
		return line.Reaction(s).Force * p.beam.Supports[s].Compliance
	}
	w := line.Deflection(g.At.Value)
	if len(g.Bar) == 2 {
		a, b, x := g.Bar[0].Value, g.Bar[1].Value, g.At.Value
		w -= ((b-x)*line.Deflection(a) + (x-a)*line.Deflection(b)) / (b - a)
	}
	return w
}

// greatest is the loads' own greatest sag (self-weight is in the baseline).
func (p *predictor) greatest(loads []beam.Load) beam.Extreme {
	b := p.beam
	b.LiftOff = false
	line, err := b.Solve(loads)
	if err != nil {
		return beam.Extreme{}
	}
	return line.Greatest(b.From, b.End())
}

func (p *predictor) warn(code, gauge, format string, args ...any) {
	p.out.Warnings = append(p.out.Warnings, Warning{code, gauge, fmt.Sprintf(format, args...)})
}

// judge holds a step against limits and rules of thumb (stress shares: common
// practice, creep is linear below about 35 % for timber and 25 % else).
func (p *predictor) judge(s *PredictedStep) {
	linear := 0.25
	if p.rig.Specimen.Material == "timber" {
		linear = 0.35
	}
	switch {
	case s.StressShare > 0.55:
		p.warn("stress", "", "step %s reaches %.0f %% of the strength: the beam may break under steady load", s.Step, 100*s.StressShare)
	case s.StressShare > linear:
		p.warn("stress", "", "step %s reaches %.0f %% of the strength: creep may no longer be in proportion to load", s.Step, 100*s.StressShare)
	}
	for _, name := range s.Uplift {
		p.warn("uplift", "", "step %s lifts the beam off support %s", s.Step, name)
	}
	lim := p.rig.Limits
	if lim.CatcherGap != nil && s.WithCreep > 0.8*lim.CatcherGap.Value {
		p.warn("catcher-gap", "", "step %s will sag %.1f\u202fmm with creep, over 80 %% of the catcher's gap of %g\u202fmm", s.Step, s.WithCreep, lim.CatcherGap.Value)
	}
	if lim.Sag != nil && s.WithCreep > lim.Sag.Value {
		p.warn("sag-limit", "", "step %s will sag %.2f\u202fmm with creep, beyond the limit of %g\u202fmm", s.Step, s.WithCreep, lim.Sag.Value)
	}
	if lim.SpanOverSag != nil && s.WithCreep > 0 && span(p.rig)/s.WithCreep < lim.SpanOverSag.Value {
		p.warn("sag-limit", "", "step %s will sag 1/%.0f of the span with creep, beyond the limit of 1/%g", s.Step, span(p.rig)/s.WithCreep, lim.SpanOverSag.Value)
	}
	if s.Greatest.Value > span(p.rig)/50 {
		p.warn("large-deflection", "", "step %s will sag 1/%.0f of the span: straight-beam theory is off by about %.1f %%", s.Step, span(p.rig)/s.Greatest.Value, 100*LargeDeflection(s.Greatest.Value/span(p.rig)))
	}
}
