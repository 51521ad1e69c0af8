// Package lsq fits models to readings by least squares: linear, linear with
// coefficients that must not be negative, separable (linear but for a few
// parameters) and generally nonlinear ones.
//
// It knows nothing of beams or gauges. It promises that every answer carries
// its full covariance and its condition; that a problem whose columns cannot
// be told apart is an error naming them, never a number; that no NaN leaves
// it; and that the same input gives the same bits, whatever the number of
// cores.
//
// Units are the caller's: a parameter has the unit of an observation divided
// by that of its column, a covariance the product of two such units.
package lsq
