package config

import (
	"math/big"
	"sort"
	"strings"
)

// unit is one accepted spelling and its exact factor to the internal unit,
// as a quotient of two decimals.
type unit struct {
	name     string
	num, den string
}

// dimension is a kind of quantity: its units, and what to say to a person who
// wrote another one.
type dimension struct {
	article string // "a length"
	name    string // "length"
	example string // "300 mm"
	units   []unit // the internal unit first
	wrong   map[string]string
	// zero is the internal value of the unit's own zero, before the factor
	// (temperatures only): internal = (shown - zero) * num/den.
	zero map[string]string
}

// Pounds and inches are exact: 1 in = 25.4 mm, 1 lb = 0.45359237 kg,
// 1 lbf = 1 lb * 9.80665 m/s2 = 4.4482216152605 N (NIST SP 811, appendix B.8).
const (
	inchInMM   = "25.4"
	inch2InMM2 = "645.16"
	inch4InMM4 = "416231.4256"
	poundInKG  = "0.45359237"
	lbfInN     = "4.4482216152605"
)

// The tables below are read-only.
var (
	lengthDim = &dimension{article: "a length", name: "length", example: "300 mm",
		units: []unit{{"mm", "1", "1"}, {"cm", "10", "1"}, {"m", "1000", "1"}, {"um", "1", "1000"},
			{"in", inchInMM, "1"}, {"ft", "304.8", "1"}},
		wrong: map[string]string{`"`: "in", "''": "in", "inch": "in", "inches": "in", "'": "ft", "foot": "ft",
			"feet": "ft", "metre": "m", "meter": "m"}}
	massDim = &dimension{article: "a mass", name: "mass", example: "12.40 kg",
		units: []unit{{"kg", "1", "1"}, {"g", "1", "1000"}, {"lb", poundInKG, "1"}, {"oz", poundInKG, "16"}},
		wrong: map[string]string{"lbs": "lb", "pounds": "lb", "kgs": "kg", "kilo": "kg", "gr": "g"}}
	forceDim = &dimension{article: "a force", name: "force", example: "98 N",
		units: []unit{{"N", "1", "1"}, {"kN", "1000", "1"}, {"lbf", lbfInN, "1"}},
		wrong: map[string]string{"newton": "N", "lbsf": "lbf"}}
	stressDim = &dimension{article: "a stress", name: "stress", example: "11500 MPa",
		units: []unit{{"MPa", "1", "1"}, {"N/mm2", "1", "1"}, {"GPa", "1000", "1"}, {"kPa", "1", "1000"},
			{"Pa", "1", "1000000"}, {"psi", lbfInN, inch2InMM2}, {"ksi", "4448.2216152605", inch2InMM2}},
		wrong: map[string]string{"N/mm^2": "N/mm2", "lbf/in2": "psi"}}
	durationDim = &dimension{article: "a time", name: "time", example: "10 min",
		units: []unit{{"s", "1", "1"}, {"ms", "1", "1000"}, {"min", "60", "1"}, {"h", "3600", "1"},
			{"d", "86400", "1"}, {"w", "604800", "1"}, {"a", "31557600", "1"}},
		wrong: map[string]string{"sec": "s", "secs": "s", "second": "s", "seconds": "s", "mins": "min", "minute": "min",
			"minutes": "min", "hr": "h", "hrs": "h", "hour": "h", "hours": "h", "day": "d", "days": "d", "week": "w",
			"weeks": "w", "y": "a", "yr": "a", "year": "a", "years": "a"}}
	temperatureDim = &dimension{article: "a temperature", name: "temperature", example: "20 C",
		units: []unit{{"C", "1", "1"}, {"F", "5", "9"}, {"K", "1", "1"}},
		zero:  map[string]string{"F": "32", "K": "273.15"},
		wrong: map[string]string{"celsius": "C", "fahrenheit": "F", "kelvin": "K"}}
	complianceDim = &dimension{article: "a compliance", name: "compliance", example: "0.00005 mm/N",
		units: []unit{{"mm/N", "1", "1"}, {"um/N", "1", "1000"}, {"mm/kN", "1", "1000"}, {"m/N", "1000", "1"},
			{"in/lbf", inchInMM, lbfInN}}}
	stiffnessDim = &dimension{article: "a stiffness", name: "stiffness", example: "0.02 N/mm",
		units: []unit{{"N/mm", "1", "1"}, {"N/m", "1", "1000"}, {"kN/mm", "1000", "1"}, {"kN/m", "1", "1"},
			{"lbf/in", lbfInN, inchInMM}},
		wrong: map[string]string{"lb/in": "lbf/in"}}
	areaDim = &dimension{article: "an area", name: "area", example: "5310 mm2",
		units: []unit{{"mm2", "1", "1"}, {"cm2", "100", "1"}, {"m2", "1000000", "1"}, {"in2", inch2InMM2, "1"}},
		wrong: map[string]string{"mm^2": "mm2", "in^2": "in2", "cm^2": "cm2"}}
	secondMomentDim = &dimension{article: "a second moment of area", name: "second moment of area", example: "6.4e5 mm4",
		units: []unit{{"mm4", "1", "1"}, {"cm4", "10000", "1"}, {"m4", "1000000000000", "1"}, {"in4", inch4InMM4, "1"}},
		wrong: map[string]string{"mm^4": "mm4", "in^4": "in4", "cm^4": "cm4"}}
	sizeDim = &dimension{article: "a size in bytes", name: "size", example: "16 MB",
		units: []unit{{"B", "1", "1"}, {"kB", "1000", "1"}, {"MB", "1000000", "1"}, {"GB", "1000000000", "1"}},
		wrong: map[string]string{"KB": "kB", "k": "kB", "M": "MB", "G": "GB", "mb": "MB"}}
)

// allDimensions is for naming what a unit of the wrong kind belongs to.
func allDimensions() []*dimension {
	return []*dimension{lengthDim, massDim, forceDim, stressDim, durationDim, temperatureDim,
		complianceDim, stiffnessDim, areaDim, secondMomentDim, sizeDim}
}

// plainSigns are what plainUnit puts for the typographic signs in a unit.
var plainSigns = strings.NewReplacer("²", "2", "⁴", "4", "µ", "u", "μ", "u", "°", "")

// plainUnit reduces the typographic spellings of a unit to the plain one.
func plainUnit(s string) string {
	s = plainSigns.Replace(s)
	for _, scale := range []string{"C", "F"} {
		if s == "deg"+scale {
			return scale
		}
	}
	return s
}

func (d *dimension) find(name string) (unit, bool) {
	for _, u := range d.units {
		if u.name == name {
			return u, true
		}
	}
	return unit{}, false
}

// factor returns the unit's exact factor to the internal unit.
func (u unit) factor() *big.Rat {
	num, ok := new(big.Rat).SetString(u.num)
	den, ok2 := new(big.Rat).SetString(u.den)
	if !ok || !ok2 {
		panic("config: unit table: bad factor of " + u.name)
	}
	return num.Quo(num, den)
}

// names lists the accepted units for a message.
func (d *dimension) names() string {
	names := make([]string, len(d.units))
	for i, u := range d.units {
		names[i] = u.name
	}
	if len(names) == 1 {
		return names[0]
	}
	return strings.Join(names[:len(names)-1], ", ") + " or " + names[len(names)-1]
}

// unknown says what is wrong with a unit of this dimension that is not in its
// table, and what to write instead; number is the text before it.
func (d *dimension) unknown(number, written string) Problem {
	plain := plainUnit(written)
	mend := "units of " + d.name + ": " + d.names()
	switch {
	case d == durationDim && plain == "m":
		return Problem{What: quoted(number+" "+written) + " is no time: m is metres",
			Fix: "m is metres; write min for minutes: " + number + " min"}
	case plain == "kgf" || plain == "kp":
		return Problem{What: written + " is not a unit here: a kilogram is a mass, and gravity makes the force of it",
			Fix: "write the mass, " + number + " kg, where a load is set; elsewhere a force in N"}
	case d == forceDim && plain == "lb", d == stiffnessDim && strings.HasPrefix(plain, "lb/"):
		mend = "lb is a mass; write lbf for the force"
	}
	if right, ok := d.wrong[plain]; ok {
		mend = "write " + number + " " + right
	} else if right, ok := d.wrong[strings.ToLower(plain)]; ok {
		mend = "write " + number + " " + right
	} else if right := d.sameLetters(plain); right != "" {
		mend = "capitals count in units: write " + number + " " + right
	} else {
		for _, other := range allDimensions() {
			if _, ok := other.find(plain); ok && other != d {
				return Problem{What: quoted(number+" "+written) + " is " + other.article + "; " + d.article + " is wanted here", Fix: mend}
			}
		}
	}
	return Problem{What: quoted(written) + " is not a unit of " + d.name, Fix: mend}
}

// sameLetters finds the one unit that differs only in capitals; "" if there
// are several or none.
func (d *dimension) sameLetters(name string) string {
	var hits []string
	for _, u := range d.units {
		if strings.EqualFold(u.name, name) {
			hits = append(hits, u.name)
		}
	}
	sort.Strings(hits)
	if len(hits) == 1 {
		return hits[0]
	}
	return ""
}
