package stiffness

import (
	"math"
)

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
	p.out.Dominating = halvings(e.Budget, p.out.RelativeU)
	p.creep(e)
	p.out.Warnings = append(p.out.Warnings, e.Warnings...)
}

// halvings says of the three greatest lines what halving their u would buy.
func halvings(budget []Line, u float64) []Halving {
	var out []Halving
	for _, l := range budget[:min(3, len(budget))] {
		out = append(out, Halving{Input: l.Input, Share: l.Share, RelativeU: u * math.Sqrt(1-0.75*l.Share)})
	}
	return out
}

// creep foretells the creep coefficient's uncertainty at the end of the
// longest loaded step: phi = (end - zero)/(initial - zero) - 1 of one gauge net
// of the supports, so that gain, load and geometry cancel and the three
// indications' errors stay.
func (p *predictor) creep(e *Estimate) {
	g := e.fit.m.creepGauge()
	if g < 0 {
		return
	}
	longest, hold := -1, 0.0
	for i, s := range p.rig.Plan {
		if p.total(p.in.Steps[i].Loads) > 0 && s.Hold.Value > hold {
			longest, hold = i, s.Hold.Value
		}
	}
	if longest < 0 {
		return
	}
	w := 0.0
	for _, pg := range p.out.Steps[longest].Gauges {
		if pg.Gauge == p.rig.Gauges[g].Name {
			w = math.Abs(pg.Sag)
		}
	}
	if w == 0 {
		return
	}
	phi := 0.0
	if c := p.rig.Specimen.Expect.CreepCoefficient; c != nil {
		phi = c.Value
	}
	name, u := p.rig.Gauges[g].Name, p.indicationU(g)
	lines := []Line{
		{Input: "indication of " + name + " at the initial sag", U: u, Sensitivity: (1 + phi) / w},
		{Input: "indication of " + name + " at the end", U: u, Sensitivity: 1 / w},
		{Input: "indication of " + name + " in the baseline", U: u, Sensitivity: phi / w},
	}
	if s := p.seatsU(g); s > 0 {
		lines = append(lines, Line{Input: "gauges at the supports", U: s, Sensitivity: math.Sqrt(1+(1+phi)*(1+phi)+phi*phi) / w})
	}
	for i := range lines {
		lines[i].Type, lines[i].Distribution, lines[i].Unit, lines[i].Source = "B", "normal", "mm", "resolution and the u stated in the rig file"
	}
	q, lines := combine(phi, lines)
	p.out.CreepU, p.out.CreepBudget = q.U, ranked(lines)
	p.out.CreepDominating = halvings(p.out.CreepBudget, q.U)
}

// indicationU is the standard uncertainty of one indication, mm.
func (p *predictor) indicationU(g int) float64 {
	u := p.rig.Gauges[g].Resolution.Value / math.Sqrt(12)
	if own := p.rig.Gauges[g].U; own != nil {
		u = math.Hypot(u, own.Value)
	}
	return u
}

// seatsU is what the gauges at two supports add to one net sag of gauge g, mm;
// 0 where a gauge is missing there, or g hangs on a bar.
func (p *predictor) seatsU(g int) float64 {
	s, x := p.rig.Supports, p.rig.Gauges[g].At.Value
	if len(s) != 2 || len(p.rig.Gauges[g].Bar) == 2 {
		return 0
	}
	sum := 0.0
	for i := range s {
		over := -1
		for k, gauge := range p.rig.Gauges {
			if k != g && sees(gauge) != "reference" && len(gauge.Bar) == 0 && math.Abs(gauge.At.Value-s[i].At.Value) <= math.Max(p.sec.Depth, 0.02*p.rig.Specimen.Length.Value) {
				over = k
			}
		}
		if over < 0 {
			return 0
		}
		other := s[1-i].At.Value
		sum += math.Pow((x-other)/(s[i].At.Value-other)*p.indicationU(over), 2)
	}
	return math.Sqrt(sum)
}
