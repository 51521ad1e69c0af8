// Package importer makes a run folder of readings that were taken by hand or by
// another program, from comma-separated values.
//
// A column of instants and a column for each gauge are enough; units stand in
// the header or are given. It promises that a row that cannot be placed is
// refused with its number in the file and what to do about it, that values in
// inches are converted exactly, that a typed instant is never taken for that of
// a clock (the segments say that their stamps were given), and that after an
// error nothing is left behind. The same file gives the same bytes.
package importer
