package config

import (
	"fmt"
	"slices"
	"strings"
)

// sectionKeys says which keys each shape needs; u may stand with all measured
// shapes, and general has some of its own.
func sectionKeys(shape string) (needs, may []string) {
	switch shape {
	case "rectangle":
		return []string{"width", "depth"}, []string{"u"}
	case "round":
		return []string{"diameter"}, []string{"u"}
	case "tube":
		return []string{"diameter", "wall"}, []string{"u"}
	case "box":
		return []string{"width", "depth", "wall"}, []string{"u"}
	case "general":
		return []string{"second_moment", "depth"}, []string{"area", "shear_factor", "u_percent"}
	}
	return nil, nil
}

// sectionExample is what to write for a missing key.
func sectionExample(key string) string {
	switch key {
	case "second_moment":
		return "second_moment: 6.4e5 mm4"
	case "wall":
		return "wall: 3.0 mm"
	case "diameter":
		return "diameter: [60.0 mm, 60.1 mm]"
	}
	return key + ": [38.0 mm, 38.1 mm] (the measured places)"
}

func (s *Section) present() map[string]bool {
	return map[string]bool{
		"width": len(s.Width) > 0, "depth": len(s.Depth) > 0, "diameter": len(s.Diameter) > 0, "wall": len(s.Wall) > 0,
		"u": s.U != nil, "second_moment": s.SecondMoment != nil, "area": s.Area != nil,
		"shear_factor": s.ShearFactor != nil, "u_percent": s.UPercent != nil,
	}
}

func (c *checker) section() {
	const path = "specimen.section"
	s := &c.rig.Specimen.Section
	if s.Shape == "" {
		c.fail(path, "section has no shape", "add shape: rectangle, round, tube, box or general")
		return
	}
	needs, may := sectionKeys(s.Shape)
	if needs == nil {
		c.oneOf(path+".shape", "shape of the section", s.Shape, "rectangle", "round", "tube", "box", "general")
		return
	}
	has := s.present()
	for _, key := range needs {
		if !has[key] {
			c.fail(path, "a "+s.Shape+" section needs "+key, "add "+sectionExample(key))
		}
	}
	for _, key := range []string{"width", "depth", "diameter", "wall", "u", "second_moment", "area", "shear_factor", "u_percent"} {
		if has[key] && !slices.Contains(needs, key) && !slices.Contains(may, key) {
			c.fail(path+"."+key, "a "+s.Shape+" section has no "+key,
				"take it out, or change the shape; keys of "+s.Shape+": "+strings.Join(append(needs, may...), ", "))
		}
	}
	c.measured(path+".width", "width", s.Width)
	c.measured(path+".depth", "depth", s.Depth)
	c.measured(path+".diameter", "diameter", s.Diameter)
	c.measured(path+".wall", "wall", s.Wall)
	c.wall(s)
	c.sectionRest(s)
}

// measured checks the measured places of one dimension.
func (c *checker) measured(path, key string, places []Length) {
	smallest, largest := 0.0, 0.0
	for i, l := range places {
		if l.Value <= 0 {
			c.fail(at(path, i), key+" must be greater than zero", "write what was measured, such as 38.0 mm")
			return
		}
		if i == 0 || l.Value < smallest {
			smallest = l.Value
		}
		largest = max(largest, l.Value)
	}
	if len(places) > 1 && largest > 1.1*smallest {
		c.warn(path, fmt.Sprintf("the places measured for %s differ by more than a tenth (%s\u202fmm to %s\u202fmm)", key, mm(smallest), mm(largest)),
			"look for a slip of the pen; the mean counts")
	}
}

func (c *checker) wall(s *Section) {
	wall := mean(s.Wall)
	if wall <= 0 {
		return
	}
	for _, outer := range []struct {
		key    string
		places []Length
	}{{"width", s.Width}, {"depth", s.Depth}, {"diameter", s.Diameter}} {
		if m := mean(outer.places); m > 0 && 2*wall >= m {
			c.fail("specimen.section.wall", fmt.Sprintf("two walls of %s\u202fmm fill the %s of %s\u202fmm", mm(wall), outer.key, mm(m)),
				"correct the wall, or use shape: "+map[bool]string{true: "round", false: "rectangle"}[outer.key == "diameter"]+" for a solid section")
		}
	}
}

func mean(places []Length) float64 {
	sum := 0.0
	for _, l := range places {
		sum += l.Value
	}
	return sum / float64(max(1, len(places)))
}

func (c *checker) sectionRest(s *Section) {
	const path = "specimen.section"
	if s.U != nil && s.U.Value <= 0 {
		c.fail(path+".u", "u of the section must be greater than zero", "write the standard uncertainty of one measured dimension, such as 0.02 mm, or leave it out")
	}
	if s.SecondMoment != nil && s.SecondMoment.Value <= 0 {
		c.fail(path+".second_moment", "second_moment must be greater than zero", "write it as 6.4e5 mm4")
	}
	if s.Area != nil && s.Area.Value <= 0 {
		c.fail(path+".area", "area must be greater than zero", "write it as 5310 mm2")
	}
	if f := s.ShearFactor; f != nil && (f.Value <= 0 || f.Value > 1) {
		c.fail(path+".shear_factor", "shear_factor must be greater than 0 and at most 1", "write the part of the area that carries shear, such as 0.83 for a solid rectangle")
	}
	if u := s.UPercent; u != nil && (u.Value <= 0 || u.Value > 50) {
		c.fail(path+".u_percent", "u_percent must be greater than 0 and at most 50", "write the standard uncertainty of second_moment and area in percent, such as 1")
	}
	if s.SecondMoment != nil && s.Area != nil && len(s.Depth) > 0 {
		if most := s.Area.Value * mean(s.Depth) * mean(s.Depth) / 4; s.SecondMoment.Value > most {
			c.fail(path+".second_moment", fmt.Sprintf("second_moment, area and depth contradict each other: all of %s\u202fmm2 at the edges of %s\u202fmm would make %s\u202fmm4", mm(s.Area.Value), mm(mean(s.Depth)), mm(most)),
				"correct the one that is wrong, and its unit")
		}
	}
	if s.Shape == "general" && (s.Area == nil || s.ShearFactor == nil) {
		c.warn(path, "a general section without area and shear_factor: the sag by shear cannot be told apart",
			"add area: 5310 mm2 and shear_factor: 0.83 (your own figures)")
	}
}
