// Package beam computes straight beams of constant section: deflection,
// slope, moment, shear and reactions under point loads, evenly spread loads,
// yielding supports and springs, by Euler-Bernoulli theory or, where the
// shear stiffness is finite, by Timoshenko's.
//
// Units are mm, N, N.mm2 (EI), N (S = kappa G A), mm/N, N/mm. Places run
// along the beam's axis in any datum the caller likes. Loads and deflections
// are positive downward, reactions positive upward, moments positive when
// they make the beam sag.
//
// The elastic line is held in its closed form, the double integral of the
// load by Macaulay's brackets,
//
//	w(x) = a + b x + sum F_k (<x-x_k>^3/(6 EI) - <x-x_k>/S) + ...
//
// whose unknowns (a, b, the forces at supports and springs, the moments at
// clamps) follow from one small dense system: the support conditions and the
// two equations of equilibrium. It is exact everywhere, not only at nodes. A
// stiffness matrix assembled from elements gives the same line but loses
// about (L/l)^3 of the 16 digits where one element of length l is short,
// such as a gauge or a load a millimetre beside a support; here short
// distances cost nothing. The package's tests hold the two methods against
// each other.
//
// It promises linearity, reciprocity and equilibrium to rounding; errors
// (of type *LayoutError) for layouts that do not stand, for loads off the
// beam and for numbers that are not finite, never a panic and never NaN. It
// imports nothing else of gaugelog and holds no state: everything in it is
// safe for use by several goroutines at once.
package beam
