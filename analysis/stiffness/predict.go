package stiffness

import (
	"errors"
	"fmt"
	"math"

	"gaugelog/analysis/beam"
	"gaugelog/config"
)

// Prediction is what a rig and its plan will show, before a load is touched.
type Prediction struct {
	Steps []PredictedStep
	// RelativeU is the standard uncertainty of the modulus the plan can
	// reach, as a share of it, and RelativeU95 the expanded one; 0 where
	// Unreachable says why it could not be worked out. Scatter of the
	// readings beyond resolution and the gauges' stated u, and drift, come on
	// top.
	RelativeU, RelativeU95 float64
	Unreachable            string
	// Dominating are the three inputs with the greatest share, greatest first.
	Dominating []Halving
	Budget     []Line
	// CreepU is the standard uncertainty of the creep coefficient at the end
	// of the longest loaded step, from the creep gauge's reading errors alone
	// (no drift, no temperature); 0 where no gauge or creep step allows it.
	CreepU    float64
	ShearFrom string
	Warnings  []Warning
}

// Halving is one input of the modulus's uncertainty and what half of its own
// uncertainty would make of the whole.
type Halving struct {
	Input     string
	Share     float64 // of the variance, 0..1
	RelativeU float64 // of the modulus, with this input's u halved
}

// PredictedStep is one step of the plan.
type PredictedStep struct {
	Step   string
	Loads  map[string]float64 // N by load
	Gauges []PredictedGauge
	// Greatest sag of the beam from the baseline, net of nothing, and where;
	// WithCreep is that sag times one plus the expected creep coefficient.
	Greatest  beam.Extreme
	WithCreep float64
	// Moment is the greatest bending moment, self-weight included (N.mm).
	Moment beam.Extreme
	Stress float64 // MPa; 0 where the depth is unknown
	// StressShare is Stress over the expected strength; 0 where none is stated.
	StressShare float64
	Uplift      []string // supports the beam lifts off
}

// PredictedGauge is what one gauge will show.
type PredictedGauge struct {
	Gauge string
	AtMM  float64
	// Sag from the baseline in mm, plungers pushing, and with the expected
	// creep coefficient.
	Sag, WithCreep float64
	Slope          float64 // mm/mm, where the plunger stands
	// TravelUsed is WithCreep over the gauge's travel, 0..; 0 where no travel
	// is stated.
	TravelUsed float64
}

// Predict works out a rig's plan with the expected modulus. It needs
// specimen.expect.modulus and a plan; the error says which is missing or
// wrong. A beam that lifts off or tips shows as such.
func Predict(rig *config.Rig) (*Prediction, error) {
	exp := rig.Specimen.Expect
	if exp.Modulus == nil || !(exp.Modulus.Value > 0) {
		return nil, errors.New("no sag can be foretold without specimen.expect.modulus; mend: state what is believed of the material, such as 11000 MPa")
	}
	if len(rig.Plan) == 0 {
		return nil, errors.New("no sag can be foretold without a plan; mend: list the steps under plan")
	}
	sec, err := SectionOf(rig.Specimen.Section)
	if err != nil {
		return nil, err
	}
	g, _, err := GravityOf(rig.Gravity)
	if err != nil {
		return nil, err
	}
	p := &predictor{rig: rig, sec: sec, g: g.Value, out: &Prediction{}, hung: map[string]config.Weight{}}
	p.build()
	if err := p.steps(); err != nil {
		return nil, err
	}
	p.reach()
	return p.out, nil
}

type predictor struct {
	rig  *config.Rig
	sec  *Section
	g    float64
	beam beam.Beam
	self []beam.Load
	out  *Prediction
	hung map[string]config.Weight
	in   Input
	zero *beam.Solution
}

// build makes the beam as expected, plungers as springs.
func (p *predictor) build() {
	exp := p.rig.Specimen.Expect
	p.beam = beam.Beam{From: p.rig.Specimen.From.Value, Length: p.rig.Specimen.Length.Value,
		EI: exp.Modulus.Value * p.sec.SecondMoment.Value, S: math.Inf(1), LiftOff: true}
	if p.sec.Area.Value > 0 {
		ratio, _ := assumedRatio(p.rig)
		shear := exp.Modulus.Value / ratio
		if exp.ShearModulus != nil {
			shear = exp.ShearModulus.Value
		}
		p.beam.S = shear * p.sec.ShearFactor * p.sec.Area.Value
	}
	for _, s := range p.rig.Supports {
		sup := beam.Support{Name: s.Name, At: s.At.Value, Clamp: s.Kind == "clamp"}
		if s.Compliance != nil {
			sup.Compliance = s.Compliance.Value
		}
		p.beam.Supports = append(p.beam.Supports, sup)
	}
	for _, g := range p.rig.Gauges {
		if g.Contact != nil && g.Contact.Stiffness != nil && sees(g) == "beam" && len(g.Bar) == 0 {
			p.beam.Springs = append(p.beam.Springs, beam.Spring{Name: g.Name, At: g.At.Value, Stiffness: g.Contact.Stiffness.Value})
		}
	}
	if m := p.rig.Specimen.Mass; m != nil {
		p.self = []beam.Load{p.beam.SelfWeight(m.Value * p.g)}
	}
}

// hang returns the loads that hang now.
func (p *predictor) hang() (forces []StepLoad, loads []beam.Load) {
	for _, l := range p.rig.Loads {
		from, to := loadPlaces(l)
		for _, f := range StepLoads(l, p.hung[l.Name], p.g) {
			forces = append(forces, f)
			loads = append(loads, beam.Load{Name: l.Name, From: from, To: to, Force: f.N})
		}
	}
	return forces, loads
}

func (p *predictor) steps() error {
	var last []float64
	for i, s := range p.rig.Plan {
		for _, set := range s.Set {
			p.hung[set.Load] = set.Weight
		}
		forces, loads := p.hang()
		line, err := p.beam.Solve(append(append([]beam.Load(nil), p.self...), loads...))
		if err != nil {
			return fmt.Errorf("step %s: %w", s.Step, err)
		}
		if i == 0 && len(forces) == 0 || p.zero == nil {
			if p.zero, err = p.baseline(i, line); err != nil {
				return err
			}
		}
		step, sags := p.step(s.Step, forces, loads, line)
		p.out.Steps = append(p.out.Steps, step)
		p.observe(s.Step, forces, sags, last)
		last = sags
	}
	return nil
}

// baseline is the line the sags count from: the first step, if its plan sets
// nothing it is the bare beam.
func (p *predictor) baseline(i int, first *beam.Solution) (*beam.Solution, error) {
	if len(p.rig.Plan[i].Set) == 0 {
		return first, nil
	}
	return p.beam.Solve(p.self)
}

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
		out.Stress = math.Abs(out.Moment.Value) / p.sec.Modulus
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
		p.warn("catcher-gap", "", "step %s will sag %.1f mm with creep, over 80 %% of the catcher's gap of %g mm", s.Step, s.WithCreep, lim.CatcherGap.Value)
	}
	if lim.Sag != nil && s.WithCreep > lim.Sag.Value {
		p.warn("sag-limit", "", "step %s will sag %.2f mm with creep, beyond the limit of %g mm", s.Step, s.WithCreep, lim.Sag.Value)
	}
	if lim.SpanOverSag != nil && s.WithCreep > 0 && span(p.rig)/s.WithCreep < lim.SpanOverSag.Value {
		p.warn("sag-limit", "", "step %s will sag 1/%.0f of the span with creep, beyond the limit of 1/%g", s.Step, span(p.rig)/s.WithCreep, lim.SpanOverSag.Value)
	}
	if s.Greatest.Value > span(p.rig)/50 {
		p.warn("large-deflection", "", "step %s will sag 1/%.0f of the span: straight-beam theory is off by about %.1f %%", s.Step, span(p.rig)/s.Greatest.Value, 100*LargeDeflection(s.Greatest.Value/span(p.rig)))
	}
}

// observe turns a step into the readings the estimate would be made from. A
// step that takes load off counts in the differences, not as a reading.
func (p *predictor) observe(name string, forces []StepLoad, sags, last []float64) {
	step := StepObs{Name: name, Loads: forces}
	rise := p.total(forces) > p.totalBefore()
	for i, g := range p.rig.Gauges {
		before := 0.0
		if last != nil {
			before = last[i]
		}
		if rise && sees(g) != "reference" {
			step.Gauges = append(step.Gauges, Obs{Gauge: i, MM: sags[i] - before})
		}
	}
	p.in.Steps = append(p.in.Steps, step)
}

func (p *predictor) total(loads []StepLoad) float64 {
	sum := 0.0
	for _, l := range loads {
		sum += l.N
	}
	return sum
}

func (p *predictor) totalBefore() float64 {
	if n := len(p.in.Steps); n > 0 {
		return p.total(p.in.Steps[n-1].Loads)
	}
	return 0
}

// reach runs the estimate on the predicted readings.
func (p *predictor) reach() {
	p.in.Rig, p.in.InitialAfterS = p.rig, p.rig.Read.InitialAfter.Value
	e, err := Compute(p.in)
	if err != nil {
		p.out.Unreachable = err.Error()
		return
	}
	p.out.RelativeU, p.out.RelativeU95 = e.Modulus.U/e.Modulus.Value, e.Modulus.U95/e.Modulus.Value
	p.out.Budget, p.out.ShearFrom = e.Budget, e.ShearFrom
	for _, l := range e.Budget[:min(3, len(e.Budget))] {
		p.out.Dominating = append(p.out.Dominating, Halving{Input: l.Input, Share: l.Share, RelativeU: p.out.RelativeU * math.Sqrt(1-0.75*l.Share)})
	}
	p.out.CreepU = p.creepU(e)
	p.out.Warnings = append(p.out.Warnings, e.Warnings...)
}

// creepU is the uncertainty of (w_end - w_initial)/w_initial from two
// readings' errors; gain, load and geometry cancel.
func (p *predictor) creepU(e *Estimate) float64 {
	g := e.fit.m.creepGauge()
	if g < 0 {
		return 0
	}
	longest, hold := -1, 0.0
	for i, s := range p.rig.Plan {
		if p.total(p.in.Steps[i].Loads) > 0 && s.Hold.Value > hold {
			longest, hold = i, s.Hold.Value
		}
	}
	if longest < 0 {
		return 0
	}
	u, w := p.rig.Gauges[g].Resolution.Value/math.Sqrt(12), 0.0
	if own := p.rig.Gauges[g].U; own != nil {
		u = math.Hypot(u, own.Value)
	}
	for _, pg := range p.out.Steps[longest].Gauges {
		if pg.Gauge == p.rig.Gauges[g].Name {
			w = math.Abs(pg.Sag)
		}
	}
	if w == 0 {
		return 0
	}
	phi := 0.0
	if c := p.rig.Specimen.Expect.CreepCoefficient; c != nil {
		phi = c.Value
	}
	// End, initial and baseline readings each err by u: d(phi) = (end - zero
	// - (1+phi)(initial - zero))/w.
	return u / w * math.Sqrt(1+(1+phi)*(1+phi)+phi*phi)
}
