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
	// of the longest loaded step, from the reading errors of the creep gauge
	// and of those over the supports alone (no drift, no temperature); 0 where
	// no gauge or creep step allows it. CreepBudget are its parts, greatest
	// first, and CreepDominating the three greatest.
	CreepU          float64
	CreepBudget     []Line
	CreepDominating []Halving
	ShearFrom       string
	Warnings        []Warning
}

// Halving is one input of an uncertainty and what half of its own uncertainty
// would make of the whole: of RelativeU for the modulus, of CreepU for the
// creep coefficient.
type Halving struct {
	Input     string
	Share     float64 // of the variance, 0..1
	RelativeU float64 // with this input's u halved
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
