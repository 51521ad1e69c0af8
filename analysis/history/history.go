// Package history reads a run folder back, in memory bounded by the run's
// duration and its number of steps, not by its number of readings.
//
// It promises exact medians per bin, real readings in the windows asked for,
// marks with withdrawals applied, and the same answer whatever the number of
// cores. It corrects nothing: values are indications in mm as recorded.
//
// An indication is a multiple of its gauge's resolution, so a bin is a table
// of counts and its median is exact however many readings it holds. Where
// readings are no multiples of the stated resolution the gauge falls back to a
// list of values in nanometres (the finest the format writes), which is as exact
// and only takes more time and memory; the note "not-a-multiple" says so.
//
// Readings may stand in any order. Those that a recorder recalled from memory
// stand up to half an hour (or the rig's time around a change and ten minutes)
// behind younger ones by design and go into bins that are still open; bins that
// still older readings belong to are counted again, in a pass of their own. The
// note "out-of-order" tells of the latter, and of any disorder in segments that
// gaugelog did not write.
package history

import (
	"gaugelog/config"
	"gaugelog/ingest/segment"
)

// Sample is one indication: nanoseconds since 1970 UTC (re-timed) and mm.
type Sample struct {
	Time int64
	MM   float64
}

// Bin is the readings of one gauge in [From, To): their number, exact median,
// median absolute deviation about it, standard deviation, extremes, and the mean of their times.
type Bin struct {
	From, To    int64
	Time        int64 // mean instant of its readings
	N           int
	Median, MAD float64
	SD          float64 // standard deviation of its readings, 0 for one
	Min, Max    float64
	First, Last float64
	FirstTime   int64 // instants of First and Last
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
	// From is when it began, for what has a length; 0 where it has none. Time
	// is its end.
	From int64
	N    int64 // how often it happened; 0 where nothing says
}

// Gap is an interval in which a gauge (or, Gauge empty, all of them) left no
// reading though it should have. In a run that gaugelog recorded that is where
// the recording says so, and where readings lie several times farther apart than
// the rig's sampling lets them; elsewhere an interval five times longer than its
// neighbours'. Why says it in words.
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

	// GaugeReadings counts the readings of each gauge of the rig.
	GaugeReadings []int64

	source    Source
	withdrawn map[string]string // id: why
	fetched   bool              // recorded by gaugelog, and read back from a server
	unknown   map[string]int64  // readings of gauges the rig does not name
	damage    []segment.Damage  // of the segments
	close     func() error
}

// Note is a warning found while reading: a code and a text.
type Note struct {
	Code, Gauge, Text string
	Time              int64
}

// Source gives readings by gauge, a gauge being an index in the rig's list.
// The run folder is one; FromSamples makes another from memory.
type Source interface {
	// Bins returns the whole run of one gauge in bins of equal width, at most
	// ten minutes each; bins without a reading are left out. The caller must
	// not change them.
	Bins(gauge int) []Bin
	// Window returns the readings of every gauge in [from, to], thinned beyond
	// WindowMost of one gauge.
	Window(from, to int64) ([][]Sample, error)
	// Fine returns, for every gauge, the bins between successive edges (which
	// must rise); bins without a reading are left out.
	Fine(edges []int64) ([][]Bin, error)
	// Ambient returns a probe's readings, thinned to at most one a minute.
	Ambient(probe int) []AmbientSample
}

// Bins returns one gauge's whole run in bins of equal width (BinWidth), empty
// ones left out. The slice is shared: do not change it.
func (h *History) Bins(gauge int) []Bin { return h.source.Bins(gauge) }

// Window returns the readings in [from, to], by gauge, in order of time: every
// one, or where a gauge has more than twice WindowMost the first of each of
// WindowMost equal parts. Each is a reading as recorded. Where all are to count
// use Fine.
func (h *History) Window(from, to int64) ([][]Sample, error) { return h.source.Window(from, to) }

// Fine returns, by gauge, the bins between successive edges, empty ones left
// out. The edges must rise.
func (h *History) Fine(edges []int64) ([][]Bin, error) { return h.source.Fine(edges) }

// Raw returns the readings of one gauge in [from, to], as Window does.
func (h *History) Raw(gauge int, from, to int64) ([]Sample, error) {
	all, err := h.source.Window(from, to)
	if err != nil {
		return nil, err
	}
	return all[gauge], nil
}

// Ambient returns one probe's readings, thinned to at most one a minute.
func (h *History) Ambient(probe int) []AmbientSample { return h.source.Ambient(probe) }
