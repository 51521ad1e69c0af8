package config

import (
	"fmt"
	"math"
	"slices"
)

// Span returns where the beam begins and ends along it, in mm.
func (s Specimen) Span() (from, to float64) {
	return s.From.Value, s.From.Value + s.Length.Value
}

func (c *checker) specimen() {
	s := &c.rig.Specimen
	c.name("specimen.name", "specimen", s.Name, map[string]string{})
	c.oneOf("specimen.material", "material", s.Material, "timber", "plastic", "metal", "other")
	if c.missing("specimen.length") {
		c.fail("specimen", "specimen has no length", "add the whole length of the beam, overhangs included, such as length: 800 mm")
	} else if s.Length.Value <= 0 {
		c.fail("specimen.length", "specimen length must be greater than zero", "write the whole length of the beam, overhangs included")
	}
	if s.Mass != nil && s.Mass.Value <= 0 {
		c.fail("specimen.mass", "specimen mass must be greater than zero", "write what the beam weighs, or leave the line out")
	}
	c.section()
	e := s.Expect
	c.positiveStress("specimen.expect.modulus", e.Modulus)
	c.positiveStress("specimen.expect.shear_modulus", e.ShearModulus)
	c.positiveStress("specimen.expect.strength", e.Strength)
	if e.CreepCoefficient != nil && e.CreepCoefficient.Value < 0 {
		c.fail("specimen.expect.creep_coefficient", "creep_coefficient must not be negative", "write creep sag / initial sag, such as 0.8")
	}
	g := c.rig.Gravity
	if g.Value != nil && (g.Value.Value < 9.7 || g.Value.Value > 9.9) {
		c.fail("gravity.value", "gravity on earth lies between 9.7 and 9.9 m/s2", "write m/s2, such as 9.8156, or give latitude and height")
	}
	if g.Latitude != nil && math.Abs(g.Latitude.Value) > 90 {
		c.fail("gravity.latitude", "latitude must lie between -90 and 90 degrees", "write degrees, such as 55.9")
	}
	if g.Value != nil && (g.Latitude != nil || g.Height != nil) {
		c.fail("gravity", "gravity is stated twice: as a value and as a place", "keep value, or latitude and height")
	}
	if g.Height != nil && g.Latitude == nil {
		c.fail("gravity.height", "gravity has a height but no latitude", "add latitude in degrees, or leave gravity out for the standard 9.80665 m/s2")
	}
}

func (c *checker) positiveStress(path string, s *Stress) {
	if s != nil && s.Value <= 0 {
		c.fail(path, path[len("specimen.expect."):]+" must be greater than zero", "write a stress, such as 11500 MPa, or leave the line out")
	}
}

// inside reports a place that is not on the beam.
func (c *checker) inside(path, what string, place float64) {
	from, to := c.rig.Specimen.Span()
	if c.rig.Specimen.Length.Value <= 0 {
		return // reported already
	}
	if place < from || place > to {
		c.fail(path, fmt.Sprintf("%s at %s\u202fmm is not on the beam, which lies from %s\u202fmm to %s\u202fmm", what, mm(place), mm(from), mm(to)),
			"correct at, or the beam's from and length")
	}
}

func mm(x float64) string { return fmt.Sprintf("%.10g", x) }

// onePlace is how near each other two supports no longer make a span, mm.
const onePlace = 1

func (c *checker) supports() {
	seen := map[string]string{}
	var before []Support
	pins, clamps := 0, 0
	for i, s := range c.rig.Supports {
		p := at("supports", i)
		c.name(p+".name", "support", s.Name, seen)
		c.oneOf(p+".kind", "kind of support", s.Kind, "pin", "clamp")
		if c.missing(p + ".at") {
			c.fail(p, "support "+s.Name+" has no place", "add at: and its place along the beam, such as at: 0 mm")
			continue
		}
		if s.Kind == "clamp" {
			clamps++
		} else {
			pins++
		}
		c.inside(p+".at", "support "+s.Name, s.At.Value)
		if i := slices.IndexFunc(before, func(o Support) bool { return math.Abs(o.At.Value-s.At.Value) < onePlace }); i >= 0 {
			c.fail(p+".at", "supports "+before[i].Name+" and "+s.Name+" stand at one place", "correct one of the two, or take it out")
			continue
		}
		before = append(before, s)
		if s.Compliance != nil && s.Compliance.Value < 0 {
			c.fail(p+".compliance", "compliance must not be negative", "write how far the support yields per newton, such as 0.00005 mm/N")
		}
	}
	if clamps == 0 && pins < 2 {
		c.fail("supports", fmt.Sprintf("the beam would fall: %d of the two pins it needs, and no clamp", pins),
			"add a support with its at, or kind: clamp where the beam is built in")
	}
}
