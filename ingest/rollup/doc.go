// Package rollup keeps a run's readings as bins of bounded number, so that a
// page about a hundred million readings is drawn from a few thousand figures.
//
// Each channel (a gauge's indication, a probe's temperature or humidity) has
// four sets of bins: the last twenty minutes by the second, the last eight days
// by ten minutes, the whole run in at most 512 bins whose width doubles as the
// run grows, and the time since a load change in bins of equal width in the
// logarithm of that time.
//
// It promises that memory does not grow with the number of readings, that
// adding one allocates nothing once a set has its size, and that readings may
// be added in any order and books be merged: the bins are the same but for
// rounding of sums. Bins are for looking at; the analysis never uses them.
package rollup
