// Package history reads a run folder back, in memory bounded by the run's
// duration and its number of steps, not by its number of readings.
//
// It promises exact medians per bin, real readings in the windows asked for,
// marks with withdrawals applied and loads as a timeline, and the same answer
// whatever the number of cores. It corrects nothing: values are indications
// in mm as recorded.
package history

import (
	"gaugelog/config"
)

// Sample is one indication: nanoseconds since 1970 UTC (re-timed) and mm.
type Sample struct {
	Time int64
	MM   float64
}

// Bin is the readings of one gauge in [From, To): their number, exact median,
// median absolute deviation about it, extremes, and the mean of their times.
type Bin struct {
	From, To    int64
	Time        int64 // mean instant of its readings
	N           int
	Median, MAD float64
	Min, Max    float64
	First, Last float64
	LastTime    int64
}

// AmbientSample is one bin's mean surroundings of a probe; NaN where it does
// not read that quantity.
type AmbientSample struct {
	Time                     int64
	Celsius, HumidityPercent float64
}

// Mark is one operator's entry, withdrawals applied.
type Mark struct {
	ID, Kind string // Kind: load | touch | note | step
	Time     int64
	Load     string  // load: its name
	Newton   float64 // load: value from Time on, gravity and lever and tare not yet applied where Kilogram is set
	Kilogram *float64
	Shown    string
	Step     string
	Gauge    string // touch
	Act      string // touch: zeroed | moved | replaced | lifted | set-down
	Text, By string
}

// Event is something that happened to the recording.
type Event struct {
	Kind, Gauge string
	Time        int64
	Detail      string
}

// Gap is an interval in which a gauge (or, Gauge empty, all of them) left no
// reading though it should have.
type Gap struct {
	Gauge    string
	From, To int64
	Why      string
}

// History is one run, read back.
type History struct {
	Rig        *config.Rig
	RigSHA256  string
	Amendments []config.Amendment
	Marks      []Mark // in order of time
	Events     []Event
	Gaps       []Gap
	// First and Last are the first and last reading's instants.
	First, Last int64
	Readings    int64
	Damaged     []string // blocks left out, in words
	Notes       []Note

	source Source
}

// Note is a warning found while reading: a code and a text.
type Note struct {
	Code, Gauge, Text string
	Time              int64
}

// Source gives readings by gauge. The run folder is one; tests make others
// from samples in memory.
type Source interface {
	// Bins returns the whole run of one gauge (index in the rig's list) in
	// bins: fine (down to single readings) near marks and jumps, wider with
	// time since, at most ten minutes.
	Bins(gauge int) []Bin
	// Raw returns every reading of one gauge in [from, to].
	Raw(gauge int, from, to int64) ([]Sample, error)
	// Ambient returns a probe's readings, thinned to at most one a minute.
	Ambient(probe int) []AmbientSample
}
