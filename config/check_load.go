package config

import (
	"fmt"
	"slices"
)

func (c *checker) loads() {
	if len(c.rig.Loads) == 0 {
		c.fail("loads", "the rig has no load", "add loads: with at least one entry, such as - {name: pan, at: 300 mm}")
	}
	seen := map[string]string{}
	for i := range c.rig.Loads {
		l, p := &c.rig.Loads[i], at("loads", i)
		c.name(p+".name", "load", l.Name, seen)
		c.loadPlace(p, l)
		if l.Lever != nil && l.Lever.Value <= 0 {
			c.fail(p+".lever", "lever of load "+l.Name+" must be greater than zero", "write force on the beam / weight hung, such as 10.02(2); 1 without a lever")
		}
		if l.Tare != nil && l.Tare.Value < 0 {
			c.fail(p+".tare", "tare of load "+l.Name+" must not be negative", "write what always hangs with the load: pan, hooks, chain")
		}
	}
}

func (c *checker) loadPlace(p string, l *Load) {
	spread := l.From != nil || l.To != nil
	switch {
	case l.At != nil && spread:
		c.fail(p, "load "+l.Name+" is both at one place and spread", "keep at, or from and to")
	case l.At != nil:
		c.inside(p+".at", "load "+l.Name, l.At.Value)
	case !spread:
		c.fail(p, "load "+l.Name+" has no place", "add at: 300 mm, or from: and to: where it is spread evenly")
	case l.From == nil || l.To == nil:
		c.fail(p, "load "+l.Name+" is spread, but has only one end", "give both from: and to:")
	case l.From.Value >= l.To.Value:
		c.fail(p+".to", "load "+l.Name+" ends where it begins or before", "write the smaller place as from:, the larger as to:")
	default:
		c.inside(p+".from", "load "+l.Name, l.From.Value)
		c.inside(p+".to", "load "+l.Name, l.To.Value)
	}
}

func (c *checker) plan() {
	known := make([]string, len(c.rig.Loads))
	for i, l := range c.rig.Loads {
		known[i] = l.Name
	}
	seen := map[string]string{}
	for i := range c.rig.Plan {
		s, p := &c.rig.Plan[i], at("plan", i)
		c.stepName(p, s, seen)
		if c.missing(p + ".hold") {
			c.fail(p, "step "+s.Step+" of the plan has no hold", "add how long the load stays, such as hold: 24 h")
		} else if s.Hold.Value <= 0 {
			c.fail(p+".hold", "hold of step "+s.Step+" must be greater than zero", "write how long the load stays, such as 24 h")
		}
		for _, set := range s.Set {
			if !slices.Contains(known, set.Load) {
				c.fail(p+".set."+set.Load, "step "+s.Step+" sets load "+quoted(set.Load)+", which is not in loads", nearestMend(set.Load, known))
			}
		}
	}
	if len(c.rig.Plan) > 0 {
		for _, set := range c.rig.Plan[0].Set {
			if set.Weight.heavy() {
				c.warn("plan[0]", "the plan begins with a load: nothing can be taken as the zero",
					"begin with a step without load, such as - {step: zero, hold: 30 min}")
				break
			}
		}
	}
}

// heavy reports whether the weight is more than nothing.
func (w Weight) heavy() bool {
	return w.Mass != nil && w.Mass.Value > 0 || w.Force != nil && w.Force.Value > 0
}

func (c *checker) stepName(p string, s *PlanStep, seen map[string]string) {
	before, twice := seen[s.Step]
	switch {
	case s.Step == "":
		c.fail(p, "a step of the plan has no name", "add step: and a name, such as step: l1")
	case !nameText.MatchString(s.Step):
		c.fail(p+".step", "step name "+quoted(s.Step)+" is not of small letters, digits, - and _", "begin with a letter or digit, and use no blanks or capitals")
	case twice:
		c.fail(p+".step", fmt.Sprintf("two steps of the plan are called %s%s", s.Step, c.first(before)), "give each its own name")
	default:
		seen[s.Step] = p
	}
}
