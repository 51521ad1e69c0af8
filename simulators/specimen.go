package simulators

import (
	"fmt"
	"math"
	"strings"

	"gaugelog/config"
	"gaugelog/simulators/creep"
)

// law turns the truth's creep into a creep.Law (times in s).
func (c TruthCreep) law() (creep.Law, error) {
	var l creep.Law
	one := []creep.Delayed{{Amplitude: c.Amplitude, Tau: float64(c.Tau)}}
	switch c.Law {
	case "":
	case "power":
		l.Power = []creep.Power{{Amplitude: c.Amplitude, N: c.N}}
	case "log":
		l.Log = one
	case "standard-solid":
		l.Kelvin = one
	case "burgers":
		l.Kelvin, l.Flow = one, c.Flow/3600
	case "kelvin-chain":
		if len(c.Amplitudes) != len(c.Taus) || len(c.Taus) == 0 {
			return l, fmt.Errorf("a kelvin-chain needs as many amplitudes as taus; it has %d and %d", len(c.Amplitudes), len(c.Taus))
		}
		for i, a := range c.Amplitudes {
			l.Kelvin = append(l.Kelvin, creep.Delayed{Amplitude: a, Tau: float64(c.Taus[i])})
		}
	default:
		return l, fmt.Errorf("unknown law %q; known are power, log, standard-solid, burgers, kelvin-chain", c.Law)
	}
	if e := c.Tertiary; e != nil {
		l.Tertiary = creep.Tertiary{Amplitude: e.Amplitude, From: float64(e.From), Growth: float64(e.Growth)}
	}
	return l, nil
}

// stiffness gives EI in N mm2 and the shear stiffness in N (infinite where no
// shear modulus is given). Shear factors are 5/6 for a rectangle, 0.9 for a
// solid round and 1/2 for a thin tube; a box counts its two walls along the
// load (source: practice of the trade, after Cowper 1966 and Roark; from
// memory).
func (t TruthSpecimen) stiffness(s config.Section) (bending, shear float64, err error) {
	second, sheared, err := t.section(s)
	if err != nil {
		return 0, 0, err
	}
	shear = math.Inf(1)
	if t.ShearModulus > 0 {
		shear = float64(t.ShearModulus) * sheared
	}
	bending = float64(t.Modulus) * second
	if !(bending > 0) || !(shear > 0) {
		return 0, 0, fmt.Errorf("the specimen's stiffness comes out as %g N mm2 and %g N: check the section", bending, shear)
	}
	return bending, shear, nil
}

// section gives the second moment in mm4 and the shear factor times the area
// in mm2.
func (t TruthSpecimen) section(s config.Section) (second, sheared float64, err error) {
	width, depth, outer, wall := mean(s.Width), mean(s.Depth), mean(s.Diameter), mean(s.Wall)
	if t.Width > 0 {
		width = float64(t.Width)
	}
	if t.Depth > 0 {
		depth = float64(t.Depth)
	}
	switch s.Shape {
	case "rectangle":
		return width * math.Pow(depth, 3) / 12, width * depth * 5 / 6, nil
	case "round":
		return math.Pi * math.Pow(outer, 4) / 64, math.Pi * outer * outer / 4 * 0.9, nil
	case "tube":
		inner := outer - 2*wall
		return math.Pi * (math.Pow(outer, 4) - math.Pow(inner, 4)) / 64,
			math.Pi * (outer*outer - inner*inner) / 4 / 2, nil
	case "box":
		return (width*math.Pow(depth, 3) - (width-2*wall)*math.Pow(depth-2*wall, 3)) / 12, 2 * wall * depth, nil
	case "general":
		if s.SecondMoment == nil {
			break
		}
		if s.Area == nil {
			return s.SecondMoment.Value, math.Inf(1), nil
		}
		factor := 5.0 / 6
		if s.ShearFactor != nil {
			factor = s.ShearFactor.Value
		}
		return s.SecondMoment.Value, s.Area.Value * factor, nil
	}
	return 0, 0, fmt.Errorf("the simulator knows no section of shape %q with these measures", s.Shape)
}

func mean(places []config.Length) float64 {
	sum := 0.0
	for _, p := range places {
		sum += p.Value
	}
	return sum / math.Max(1, float64(len(places)))
}

// gravity is the truth's own value, or the rig's: a stated value, the
// international gravity formula of 1967 with the free-air term (the
// constants from memory), or standard gravity.
func (t *Truth) gravity(g config.Gravity) float64 {
	switch {
	case t.Gravity > 0:
		return t.Gravity
	case g.Value != nil:
		return g.Value.Value
	case g.Latitude != nil:
		sin := math.Sin(g.Latitude.Value * math.Pi / 180)
		sin2 := math.Sin(2 * g.Latitude.Value * math.Pi / 180)
		height := 0.0
		if g.Height != nil {
			height = g.Height.Value / 1000
		}
		return 9.780327*(1+0.0053024*sin*sin-0.0000058*sin2*sin2) - 3.086e-6*height
	}
	return 9.80665
}

// portName is the name a gauge's or probe's port goes by: the rig file's, or
// sim:NAME where it gives none.
func portName(port, name string) string {
	if p := strings.TrimSpace(port); p != "" {
		return p
	}
	return "sim:" + name
}
