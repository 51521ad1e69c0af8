// Package config owns the rig file: its types, its units, loading it and
// checking it.
//
// A rig file is YAML that says what hangs where: the specimen, its supports,
// the gauges along it, the loads, the plan and what is to be read. Every
// dimension in it carries its unit, and may carry its standard uncertainty.
// The package promises that a value which reaches a caller is in the one
// internal unit of its type (mm, N, MPa, s, degree Celsius, kg), was converted
// exactly, and lies in the range its key allows; that a key nobody knows, a
// bare number for a dimension or a contradiction is an error that names the
// file, the line, the column and the mend; and that nothing it reads is ever
// rewritten, except for the single scalar a caller asks to splice.
//
// LoadRig and Parse read a rig, (*Rig).Check and (*Rig).CheckPorts say what is
// wrong or doubtful in it, LoadAmendments and (*Rig).Apply put in what was
// learned later, Splice writes one value back, and Template is the file that
// gaugelog new writes. What is wrong comes as a Problems list. The readers of
// single quantities (ParseLength, ParseWeight and so on) serve the command line.
//
// It knows nothing of bytes on a line, of beams or of readings, and imports
// nothing else of gaugelog.
package config
