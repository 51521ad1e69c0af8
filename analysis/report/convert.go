package report

import (
	"gaugelog/analysis"
	"gaugelog/analysis/unitsystem"
)

// Units are the names that --units takes.
var Units = unitsystem.Names

// Convert gives, for one of Units and a unit of the result ("mm", "MPa", "N",
// "mm/N", ...), the factor by which a figure is multiplied and the name of the
// unit in which it is then shown; a unit it does not know stays as it is.
func Convert(units, unit string) (factor float64, name string) {
	return unitsOf(units).convert(unit)
}

// Words shows a quantity as reports do, in the given units: its digits by two
// of its uncertainty, which stands behind it.
func Words(units string, q *analysis.Q) string {
	b := &builder{u: unitsOf(units)}
	return b.with(q)
}

// Rounded shows a value and its standard uncertainty, in one unit, with two
// digits of the latter.
func Rounded(value, u float64) (shown, shownU string) {
	d := decimalsFor(u)
	return fixed(value, d), fixed(u, d)
}

// Digits is the number of decimals that shows an uncertainty with two digits.
func Digits(u float64) int { return max(0, decimalsFor(u)) }
