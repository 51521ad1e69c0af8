package stiffness

import (
	"fmt"
	"math"
	"sort"

	"gaugelog/config"
)

// cause is one shared input with its error.
type cause struct {
	name, kind, unit, source string
	u, dof                   float64
	rectangular              bool
	// oneSided marks a cause that must not go below the value it has.
	oneSided bool
	shear    bool // the shear's prior
	move     func(*state, float64)
}

// priors are the assumed ratios E/G: timber 16 within 30 %, all else 2.6
// within 20 %; a stated shear modulus is trusted within 10 % where it states
// no uncertainty of its own.
const (
	timberRatio, timberSpread = 16, 0.30
	otherRatio, otherSpread   = 2.6, 0.20
	statedSpread              = 0.10
)

// softestSupport bounds how much a support of which nothing is known yields,
// mm/N: wood and plastic on rollers, packing and stands of steel lie between a
// tenth of it and this (common practice). The mean square of what lies evenly
// between nothing and it is a third of its square.
const softestSupport = 1e-3

// causes lists every stated error of the rig and the loads, in a fixed order.
func causes(in *Input, m *model, gravity Value, gravitySource string) []cause {
	var out []cause
	add := func(name, kind, unit, source string, u float64, move func(*state, float64)) {
		if u > 0 {
			out = append(out, cause{name: name, kind: kind, unit: unit, source: source, u: u, move: move})
		}
	}
	for _, d := range m.sec.causes {
		out = append(out, cause{name: d.name, kind: d.kind, unit: d.unit, source: d.source, u: d.u, dof: d.dof,
			move: func(s *state, v float64) { d.move(&s.dims, v) }})
	}
	if m.weighed() {
		add("gravity", "B", "m/s2", gravitySource, gravity.U, func(s *state, v float64) { s.gravity += v / gravity.Value })
	}
	loadCauses(in, m, add)
	for i, s := range in.Rig.Supports {
		add("place of support "+s.Name, "B", "mm", "stated in the rig file", s.At.U, func(st *state, v float64) { st.support[i] += v })
		switch {
		case m.fitted(i):
		case s.Compliance == nil && s.Kind != "clamp":
			out = append(out, cause{name: "yielding of support " + s.Name, kind: "B", unit: "mm/N", rectangular: true, oneSided: true, u: softestSupport / math.Sqrt(3),
				source: fmt.Sprintf("neither measured nor stated: none taken off, and anything to %g\u202fmm/N allowed for", softestSupport),
				move: func(st *state, v float64) {
					if !m.determinate {
						v = max(v, 0) // only statics allows a support that pushes back
					}
					st.given[i] += v
				}})
		case s.Compliance != nil:
			add("compliance of support "+s.Name, "B", "mm/N", "stated in the rig file", s.Compliance.U, func(st *state, v float64) { st.given[i] += v })
		}
	}
	gaugeCauses(in, m, add)
	for k, step := range in.Steps {
		if m.carries(k) {
			out = append(out, cause{name: "creep carried into step " + step.Name, kind: "B", unit: "1", u: 1, rectangular: true,
				source: "what another curve through the trend before would have said, in units of its u", move: func(s *state, v float64) { s.carried(k, v) }})
		}
	}
	out = append(out, m.twistCauses(in)...)
	if c, has := m.shearPrior(); has {
		out = append(out, c)
	}
	for i := range out {
		// Friction and gravity somewhere on the globe are known as ranges only.
		out[i].rectangular = out[i].rectangular || out[i].unit == "N" || (out[i].name == "gravity" && gravity.U == unplacedGravity)
	}
	return out
}

// shearPrior is the assumed E/G or the stated shear modulus as a cause.
func (m *model) shearPrior() (cause, bool) {
	switch m.mode {
	case shearRatio:
		ratio, spread := assumedRatio(m.rig)
		return cause{name: "E/G", kind: "B", unit: "1", source: "assumed: " + m.ratioWords(), u: ratio * spread, shear: true,
			move: func(s *state, v float64) { s.ratio += v }}, true
	case shearGiven:
		g := m.rig.Specimen.Expect.ShearModulus
		u, source := g.U, "stated in the rig file"
		if u == 0 {
			u, source = statedSpread*g.Value, "expect.shear_modulus, taken within 10 %"
		}
		return cause{name: "shear modulus", kind: "B", unit: "MPa", source: source, u: u, shear: true,
			move: func(s *state, v float64) { s.shear += v }}, true
	}
	return cause{}, false
}

func (m *model) ratioWords() string {
	ratio, spread := assumedRatio(m.rig)
	return fmt.Sprintf("%g within %g %%", ratio, spread*100)
}

func assumedRatio(rig *config.Rig) (ratio, spread float64) {
	if rig.Specimen.Material == "timber" {
		return timberRatio, timberSpread
	}
	return otherRatio, otherSpread
}

type adder func(name, kind, unit, source string, u float64, move func(*state, float64))

func loadCauses(in *Input, m *model, add adder) {
	rel := relativeWeights(in)
	for i, l := range in.Rig.Loads {
		if !m.hangs(i) {
			continue
		}
		add("weight of load "+l.Name, "B", "1", "stated with the load, relative, common to its steps", rel[l.Name], func(s *state, v float64) { s.weight[i] += v })
		if l.Lever != nil && l.Lever.Value != 0 {
			add("lever of load "+l.Name, "B", "1", "stated in the rig file", l.Lever.U, func(s *state, v float64) { s.weight[i] *= 1 + v/l.Lever.Value })
		}
		if l.At != nil {
			add("place of load "+l.Name, "B", "mm", "stated in the rig file", l.At.U, func(s *state, v float64) { s.loadFrom[i] += v; s.loadTo[i] += v })
			continue
		}
		add("beginning of load "+l.Name, "B", "mm", "stated in the rig file", l.From.U, func(s *state, v float64) { s.loadFrom[i] += v })
		add("end of load "+l.Name, "B", "mm", "stated in the rig file", l.To.U, func(s *state, v float64) { s.loadTo[i] += v })
	}
}

// relativeWeights is each load's greatest relative uncertainty over the steps.
func relativeWeights(in *Input) map[string]float64 {
	rel := map[string]float64{}
	for _, s := range in.Steps {
		for _, l := range s.Loads {
			if l.N != 0 {
				rel[l.Load] = math.Max(rel[l.Load], l.U/math.Abs(l.N))
			}
		}
	}
	return rel
}

func gaugeCauses(in *Input, m *model, add adder) {
	for i, g := range in.Rig.Gauges {
		if !m.reads(i) {
			continue
		}
		if sees(g) == "beam" {
			add("place of gauge "+g.Name, "B", "mm", "stated in the rig file", g.At.U, func(s *state, v float64) { s.gauge[i] += v })
		}
		for e := range g.Bar {
			add(fmt.Sprintf("foot %d of gauge %s's bar", e+1, g.Name), "B", "mm", "stated in the rig file", g.Bar[e].U, func(s *state, v float64) { s.bar[i][e] += v })
		}
		if c := g.Calibration; c != nil && c.UGain != nil {
			gain := c.Gain.Value
			if gain == 0 {
				gain = 1
			}
			add("gain of gauge "+g.Name, "B", "1", "its calibration", c.UGain.Value/gain, func(s *state, v float64) { s.gain[i] += v })
		}
		if g.Contact != nil && g.Contact.Stiffness != nil && sees(g) == "beam" {
			add("plunger stiffness of gauge "+g.Name, "B", "N/mm", "stated in the rig file", g.Contact.Stiffness.U, func(s *state, v float64) { s.contact[i] += v })
		}
		if g.Contact != nil && g.Contact.Friction != nil && sees(g) == "beam" && len(g.Bar) == 0 {
			add("friction of gauge "+g.Name+"'s plunger", "B", "N", "stated in the rig file: its half-width over sqrt(3)", g.Contact.Friction.Value/math.Sqrt(3), func(s *state, v float64) { s.stuck[i] += v })
		}
	}
	var stands []string
	for name := range in.StandU {
		stands = append(stands, name)
	}
	sort.Strings(stands)
	for _, name := range stands {
		for k, step := range in.Steps {
			add("movement of stand "+name+" in step "+step.Name, "A", "mm", "what its reference gauges show beyond their own errors", in.StandU[name], func(s *state, v float64) { s.nudge(name, k, v) })
		}
	}
}

func (m *model) hangs(load int) bool {
	for _, k := range m.changes {
		for _, c := range k {
			if c.load == load && c.n != 0 {
				return true
			}
		}
	}
	return false
}

func (m *model) weighed() bool {
	for _, k := range m.changes {
		for _, c := range k {
			if c.weighed && c.n != 0 {
				return true
			}
		}
	}
	return false
}

// carries reports whether a trend was carried forward into step k.
func (m *model) carries(k int) bool {
	for _, r := range m.rows {
		if r.step == k && r.carried != 0 {
			return true
		}
	}
	return false
}

func (s *state) carried(k int, v float64) {
	for len(s.carry) <= k {
		s.carry = append(s.carry, 0)
	}
	s.carry[k] += v
}

func (m *model) reads(gauge int) bool {
	for _, r := range m.rows {
		if r.gauge == gauge {
			return true
		}
	}
	return false
}

func (m *model) fitted(support int) bool {
	for _, s := range m.yields {
		if s == support {
			return true
		}
	}
	return false
}
