// Package steps finds what happened in a run and when: where each load
// change really began and was complete, what disturbed the gauges, and each
// gauge's sag in each step with its uncertainty.
//
// It is a pure function of a history.History. It promises that a mark is
// believed as to what was done and the readings as to when; that baseline
// and plateau never straddle a change of load; that an offset is a parameter
// with an uncertainty and never an edited reading; that a decision is
// reported with its evidence and can be overruled; and that what cannot be
// decided is called undecided.
//
// Sags are mm, down positive; times are nanoseconds since 1970 UTC; loads
// are newtons. An uncertainty is a standard uncertainty. Those given here
// hold what the readings themselves say (scatter, resolution, drift, baseline
// and offsets); what a certificate says of a gauge is for the fit to add,
// since it is common to all readings of that gauge.
package steps
