// Package compare sets several runs side by side: specimens with their
// differences and statistics of the sample, or one specimen at several spans,
// from which modulus and shear modulus follow together.
//
// It promises that a difference counts a cause common to both runs once, by
// what the two share in fact (the same gauge with the same calibration, the
// same place's gravity, the same masses), and shows what it would be without;
// that a figure a run does not have is left out and said; that what cannot be
// worked out is an error with its mend; and that no NaN leaves it.
package compare
