// Package report renders a result for people.
//
// [Build] turns an analysis.Result into a [Document]: sections of paragraphs,
// tables and figures that know no format. Each writer (HTML, plain text)
// renders the same document, so that no format says more or less than
// another.
//
// It promises that the same result gives the same bytes; that a figure the
// result does not hold is said to be missing and never filled in; that every
// number carries its unit and, where known, its uncertainty, with the digits
// the uncertainty allows; and that the cautions about suspended loads stand
// in every output.
package report
