// Package metrics gives a recording's counters and ages to a monitoring server
// in the Prometheus text format.
//
// It promises that names and units follow that ecosystem's conventions (base
// units, _total for counters), that every figure is read from the desks'
// snapshots when asked for, so that a scrape never makes the recording wait,
// and that the number of series is bounded by the rig files.
package metrics
