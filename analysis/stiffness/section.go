package stiffness

import (
	"fmt"
	"math"

	"gaugelog/config"
)

// Section is what a cross-section does in bending about the axis across the
// load.
type Section struct {
	SecondMoment Value   // mm4
	Area         Value   // mm2; zero where a general section states none
	ShearFactor  float64 // kappa; shear area = kappa * area
	Depth        float64 // mm along the load; 0 if unknown
	Breadth      float64 // mm across the load; 0 if unknown
	Torsion      float64 // mm4, Saint-Venant's constant; 0 if unknown
	Modulus      float64 // mm3, second moment over the outermost fibre's distance; 0 if unknown
	// Taper is the greatest range over mean of a dimension measured at
	// several places, and TaperOf that dimension.
	Taper   float64
	TaperOf string
	// Causes are the dimensions with their uncertainties.
	causes []dimension
	base   dims
	shape  func(dims) (i, a, kappa float64)
	stated bool // whether any uncertainty is known
}

// Value is a value with its standard uncertainty, in the same unit; U is 0
// where unknown.
type Value struct{ Value, U float64 }

// dims are a section's measured means.
type dims struct{ width, depth, diameter, wall, scale float64 }

// dimension is one independent error of a dimension.
type dimension struct {
	name, kind, source string
	u, dof             float64
	unit               string
	move               func(*dims, float64)
}

// SectionOf works out a section from the mean of its measured places. Round:
// kappa 0.9; tube 0.5 and box (both walls along the load over the area) by
// common practice; rectangle 5/6. The instrument's u is taken as one error
// common to all places; their scatter over sqrt(n) comes beside it. The error
// says which dimension is missing, zero or contradictory.
func SectionOf(c config.Section) (*Section, error) {
	s := &Section{base: dims{scale: 1}}
	if err := s.measure(c); err != nil {
		return nil, err
	}
	i, a, kappa := s.shape(s.base)
	if !(i > 0) || math.IsInf(i, 0) || a < 0 || math.IsNaN(a) {
		return nil, fmt.Errorf("section: the dimensions leave a second moment of %g\u202fmm4 and an area of %g\u202fmm2; mend: correct width, depth, diameter or wall (twice the wall must be less than the outside)", i, a)
	}
	s.SecondMoment.Value, s.Area.Value, s.ShearFactor = i, a, kappa
	if s.Depth > 0 {
		s.Modulus = i / (s.Depth / 2)
	}
	s.Breadth, s.Torsion = torsion(c.Shape, s.base, i)
	for _, d := range s.causes {
		up, down := s.base, s.base
		d.move(&up, d.u)
		d.move(&down, -d.u)
		iu, au, _ := s.shape(up)
		il, al, _ := s.shape(down)
		s.SecondMoment.U = math.Hypot(s.SecondMoment.U, (iu-il)/2)
		s.Area.U = math.Hypot(s.Area.U, (au-al)/2)
		s.stated = true
	}
	return s, nil
}

// torsion is a shape's breadth across the load (mm) and Saint-Venant's torsion
// constant (mm4): a rectangle's by the usual fit to its series (from memory,
// within 0.5 %), a closed thin box's by Bredt, twice the second moment for what
// is round; 0 where the shape does not tell.
func torsion(shape string, d dims, second float64) (breadth, constant float64) {
	switch shape {
	case "rectangle":
		long, short := math.Max(d.width, d.depth), math.Min(d.width, d.depth)
		r := short / long
		return d.width, long * short * short * short * (1.0/3 - 0.21*r*(1-r*r*r*r/12))
	case "round", "tube":
		return d.diameter, 2 * second
	case "box":
		b, h := d.width-d.wall, d.depth-d.wall
		return d.width, 2 * d.wall * b * b * h * h / (b + h)
	}
	return 0, 0
}

func (s *Section) measure(c config.Section) error {
	switch c.Shape {
	case "rectangle":
		s.shape = func(d dims) (float64, float64, float64) {
			return d.width * d.depth * d.depth * d.depth / 12, d.width * d.depth, 5.0 / 6
		}
		return s.take(c, "width", "depth")
	case "round":
		s.shape = func(d dims) (float64, float64, float64) {
			return math.Pi * math.Pow(d.diameter, 4) / 64, math.Pi * d.diameter * d.diameter / 4, 0.9
		}
		return s.take(c, "diameter")
	case "tube":
		s.shape = func(d dims) (float64, float64, float64) {
			in := d.diameter - 2*d.wall
			if in < 0 {
				return math.NaN(), math.NaN(), 0
			}
			return math.Pi * (math.Pow(d.diameter, 4) - math.Pow(in, 4)) / 64, math.Pi * (d.diameter*d.diameter - in*in) / 4, 0.5
		}
		return s.take(c, "diameter", "wall")
	case "box":
		s.shape = func(d dims) (float64, float64, float64) {
			b, h := d.width-2*d.wall, d.depth-2*d.wall
			if b < 0 || h < 0 {
				return math.NaN(), math.NaN(), 0
			}
			a := d.width*d.depth - b*h
			return (d.width*math.Pow(d.depth, 3) - b*h*h*h) / 12, a, 2 * d.wall * d.depth / a
		}
		return s.take(c, "width", "depth", "wall")
	case "general":
		return s.general(c)
	}
	return fmt.Errorf("section: shape %q is not known; mend: rectangle, round, tube, box or general", c.Shape)
}

func (s *Section) general(c config.Section) error {
	if c.SecondMoment == nil || !(c.SecondMoment.Value > 0) {
		return fmt.Errorf("section: a general section needs its second_moment; mend: state it, such as 6.4e5 mm4")
	}
	i, a, kappa := c.SecondMoment.Value, 0.0, 5.0/6
	if c.Area != nil {
		a = c.Area.Value
	}
	if c.ShearFactor != nil {
		kappa = c.ShearFactor.Value
	}
	s.shape = func(d dims) (float64, float64, float64) { return i * d.scale, a, kappa }
	if len(c.Depth) > 0 {
		s.Depth = mean(c.Depth)
	}
	u := c.SecondMoment.U / i
	source := "stated with the second moment"
	if c.UPercent != nil && u == 0 {
		u, source = c.UPercent.Value/100, "u_percent of the section"
	}
	if u > 0 {
		s.causes = append(s.causes, dimension{"second moment", "B", source, u, 0, "1", func(d *dims, v float64) { d.scale += v }})
	}
	return nil
}

// take reads the named dimensions' places.
func (s *Section) take(c config.Section, names ...string) error {
	for _, name := range names {
		var places []config.Length
		var move func(*dims, float64)
		switch name {
		case "width":
			places, move = c.Width, func(d *dims, v float64) { d.width += v }
		case "depth":
			places, move = c.Depth, func(d *dims, v float64) { d.depth += v }
		case "diameter":
			places, move = c.Diameter, func(d *dims, v float64) { d.diameter += v }
		case "wall":
			places, move = c.Wall, func(d *dims, v float64) { d.wall += v }
		}
		if len(places) == 0 {
			return fmt.Errorf("section: a %s needs its %s; mend: measure and state it in mm or in", c.Shape, name)
		}
		for _, p := range places {
			if !(p.Value > 0) || math.IsInf(p.Value, 0) {
				return fmt.Errorf("section: a %s of %g\u202fmm; mend: state the measured %s, greater than 0", name, p.Value, name)
			}
		}
		m := mean(places)
		move(&s.base, m)
		if name == "depth" || name == "diameter" {
			s.Depth = m
		}
		s.errors(c, name, places, move)
	}
	return nil
}

// errors notes a dimension's instrument error, the scatter of its places and
// its taper.
func (s *Section) errors(c config.Section, name string, places []config.Length, move func(*dims, float64)) {
	u := 0.0
	if c.U != nil {
		u = c.U.Value
	}
	lo, hi, m := math.Inf(1), math.Inf(-1), mean(places)
	var ss float64
	for _, p := range places {
		u = math.Max(u, p.U)
		lo, hi = math.Min(lo, p.Value), math.Max(hi, p.Value)
		ss += (p.Value - m) * (p.Value - m)
	}
	if u > 0 {
		s.causes = append(s.causes, dimension{name, "B", "instrument's uncertainty as stated in the rig file", u, 0, "mm", move})
	}
	if n := float64(len(places)); n > 1 && ss > 0 {
		s.causes = append(s.causes, dimension{name + ", its places", "A", fmt.Sprintf("scatter of %d measured places over sqrt(n)", len(places)), math.Sqrt(ss / (n - 1) / n), n - 1, "mm", move})
	}
	if t := (hi - lo) / m; t > s.Taper {
		s.Taper, s.TaperOf = t, name
	}
}

func mean(places []config.Length) float64 {
	sum := 0.0
	for _, p := range places {
		sum += p.Value
	}
	return sum / float64(len(places))
}
