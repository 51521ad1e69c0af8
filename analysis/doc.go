// Package analysis turns a run folder into a Result.
//
// It is a pure function of the folder: the same folder gives the same result,
// byte for byte on one architecture, whatever the number of cores; it never
// reads the clock, and its now is the last reading. Raw files are only read.
// Corrections (calibration, sense, zero, support movement, offsets of
// disturbances, plunger forces, temperature) live here and nowhere else, each
// with its uncertainty and each reported.
//
// The stages are packages of their own, and each is a pure function of the
// one before: history reads the folder in bounded memory, steps finds what
// happened and when, stiffness and creep fit, and this package assembles the
// Result from which the JSON, the terminal text and the report are rendered.
package analysis
