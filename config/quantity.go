package config

// Quantity is a value with its standard uncertainty, both in the internal
// unit of the type that embeds it.
type Quantity struct {
	// Value is the value in the internal unit.
	Value float64
	// U is the standard uncertainty in the internal unit; 0 means none was
	// stated (a stated uncertainty is greater than zero).
	U float64
	// Shown is the text as it stands in the rig file, for reports; empty for
	// a default.
	Shown string
}

// The dimensions of a rig file. Each type fixes the internal unit of the
// Quantity it embeds.
type (
	// Length is in millimetres.
	Length struct{ Quantity }
	// Mass is in kilograms.
	Mass struct{ Quantity }
	// Force is in newtons.
	Force struct{ Quantity }
	// Stress is in megapascals (N/mm2).
	Stress struct{ Quantity }
	// Duration is in seconds; a year is 365.25 days.
	Duration struct{ Quantity }
	// Temperature is in degrees Celsius.
	Temperature struct{ Quantity }
	// Compliance is in mm/N.
	Compliance struct{ Quantity }
	// Stiffness is in N/mm.
	Stiffness struct{ Quantity }
	// Area is in mm2.
	Area struct{ Quantity }
	// SecondMoment is in mm4.
	SecondMoment struct{ Quantity }
	// Size is a number of bytes (kB, MB, GB are powers of 1000).
	Size struct{ Quantity }
	// Angle is a latitude in degrees, a plain number in the file.
	Angle struct{ Quantity }
	// Number is a plain number, such as a gain, a lever ratio or a percentage.
	Number struct{ Quantity }
)

// Never is the Duration of silent_after: none, for an instrument that may be
// silent for ever.
var Never = Duration{Quantity{Value: -1, Shown: "none"}}

// Weight is what a load is set to: a mass, which gravity turns into a force,
// or a force stated as such. Exactly one of the two is set.
type Weight struct {
	Mass  *Mass
	Force *Force
	Shown string
}
