// Package export writes a run as comma-separated values.
//
// The text is UTF-8 by RFC 4180 (CR LF, quotes doubled), with a header whose
// names carry the units. Instants stand twice: as ISO 8601 in UTC with nine
// decimals, and as seconds since the first reading of the run, exact to the
// nanosecond. Indications are mm as recorded; corrected sags come from the
// analysis and say so in their names.
//
// It promises that every reading of the folder stands in the raw tables exactly
// once, as long as no block is damaged, and that its memory does not grow with
// the number of readings.
package export
