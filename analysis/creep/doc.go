// Package creep finds the law by which a beam under steady load goes on
// sagging, and says how far that law may be trusted.
//
// One law J(t), the sag per newton a time t after loading, holds for the
// whole load history by superposition: sag(t) = sum over load changes of
// change times J(t - its time), ramps, unloading and recovery included; the
// clock is never reset at a step. It is fitted together with whatever else
// moves the gauges (temperature and humidity with a lag, offsets, drift), and
// with the correlation of the residuals in time, without which intervals
// would be several times too small.
//
// It promises: every figure has an uncertainty that counts all of that; what
// cannot be told from the readings is said in a Note and left out, never made
// up; no NaN; the same input gives the same bits.
//
// Times are hours from an origin the caller chooses, sags mm (down positive),
// loads N, laws mm/N, temperatures degree Celsius.
package creep
