// Package evaluate holds a run against rules: clauses of standards, limits of
// a rig file, and rules a user wrote. RULES.md says how a rule is written.
//
// A rule is a data file. It names its standard, its numbers and its clauses,
// and of every number and every clause where it comes from: read in a public
// text, remembered (with high, medium or low confidence), confirmed by the
// user against a copy, or chosen by whoever wrote the file. What is only
// remembered is marked "confirm against your copy" wherever it shows.
//
// The package promises:
//
//   - Missing data is "cannot evaluate" (Pass nil), never a pass.
//   - A clause that rests on a number remembered with low confidence is
//     measured and compared, but not decided: Pass is nil.
//   - A figure that a standard only asks to be determined has Pass nil and
//     says so.
//   - Where the expanded uncertainty U95 of the margin reaches over the limit,
//     Why says so; Pass then follows the measured value alone.
//   - Every outcome ends with Informative.
//   - A rule file is decoded strictly: unknown and repeated keys, unknown
//     names, formulas that do not parse and units that do not fit are errors
//     with file, line and column.
//
// It imports neither the analysis nor the run folder: the caller fills Facts.
package evaluate

// Informative ends every outcome's Why.
const Informative = "informative; the standard's text and edition and a licensed engineer decide"
