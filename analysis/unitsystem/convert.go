// Package unitsystem shows figures and sentences in the reader's units.
//
// The result is SI throughout. A figure is converted where it is printed
// (Convert). A sentence that was put together far from the reader, in an
// analysis, a check or an error, carries its quantities in one written form: a
// number, the narrow no-break space U+202F, a unit of the table, such as
// "up to 0.433\u202fmm". Whoever shows the sentence passes it through Text,
// which turns exactly those into the reader's units and puts a plain blank in;
// what a person typed has no such space and stays as it was typed. Typed makes
// the form of a quantity out of a rig file or a mark.
//
// It promises that a converted figure keeps its meaning: as many digits as the
// written one is worth, never fewer than two where it had two; factors exact
// by definition; and that text without the form comes back unchanged.
package unitsystem

// Names are the systems of units: the internal one, and inch and pound.
var Names = []string{"si", "us"}

// Of is the name as Names has it; "si" for "".
func Of(name string) string {
	if name == "us" {
		return name
	}
	return "si"
}

// conversion turns a figure into another unit: factor * value + offset.
type conversion struct {
	factor float64
	unit   string
	offset float64
}

// Exact by definition (NIST SP 811): 1 in = 25.4 mm, 1 lbf = 4.4482216152605 N,
// 1 lb = 0.45359237 kg.
const (
	inch      = 25.4
	pound     = 4.4482216152605
	poundMass = 0.45359237
	foot      = 0.3048
	psi       = pound / (inch * inch) // MPa
)

var us = map[string]conversion{
	"mm":    {1 / inch, "in", 0},
	"m":     {1 / foot, "ft", 0},
	"mm2":   {1 / (inch * inch), "in2", 0},
	"mm3":   {1 / (inch * inch * inch), "in3", 0},
	"mm4":   {1 / (inch * inch * inch * inch), "in4", 0},
	"N":     {1 / pound, "lbf", 0},
	"kN":    {1000 / pound, "lbf", 0},
	"kg":    {1 / poundMass, "lb", 0},
	"Pa":    {1e-6 / psi, "psi", 0},
	"kPa":   {1e-3 / psi, "psi", 0},
	"MPa":   {1 / psi, "psi", 0},
	"GPa":   {1 / psi, "ksi", 0}, // 1000 MPa in thousands of psi
	"N.mm2": {1 / (pound * inch * inch), "lb-in2", 0},
	"mm/N":  {pound / inch, "in/lbf", 0},
	"N/mm":  {inch / pound, "lbf/in", 0},

	// The laws' parameters.
	"mm/(N.h)":   {pound / inch, "in/(lbf.h)", 0},
	"mm/(N.h^n)": {pound / inch, "in/(lbf.h^n)", 0},

	"mm/d":  {1 / inch, "in/d", 0},
	"mm/K":  {1 / (inch * 1.8), "in/°F", 0},
	"K":     {1.8, "°F", 0},
	"m/s2":  {1 / foot, "ft/s2", 0},
	"1/MPa": {psi, "1/psi", 0},
	"C":     {1.8, "°F", 32},
	"°C":    {1.8, "°F", 32},
}

// si turns what was typed in inches and pounds into the internal units.
var si = map[string]conversion{
	"in":     {inch, "mm", 0},
	"ft":     {inch * 12, "mm", 0},
	"in2":    {inch * inch, "mm2", 0},
	"in3":    {inch * inch * inch, "mm3", 0},
	"in4":    {inch * inch * inch * inch, "mm4", 0},
	"lbf":    {pound, "N", 0},
	"lb":     {poundMass, "kg", 0},
	"oz":     {poundMass / 16, "kg", 0},
	"psi":    {psi, "MPa", 0},
	"ksi":    {1000 * psi, "MPa", 0},
	"in/lbf": {inch / pound, "mm/N", 0},
	"lbf/in": {pound / inch, "N/mm", 0},
}

// Convert gives, for one of Names and a unit of the result ("mm", "MPa", "N",
// "mm/N", ...), the factor by which a figure is multiplied and the name of the
// unit in which it is then shown; a unit it does not know stays as it is. The
// offset of a temperature is not in it.
func Convert(system, unit string) (factor float64, name string) {
	if c, ok := us[unit]; ok && Of(system) == "us" {
		return c.factor, c.unit
	}
	switch unit {
	case "1":
		return 1, ""
	case "N.mm2":
		return 1e-6, "N·m2" // 1 N.m2 = 1e6 N.mm2
	}
	return 1, unit
}
