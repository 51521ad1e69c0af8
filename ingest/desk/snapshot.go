package desk

import (
	"time"

	"gaugelog/device"
	"gaugelog/ingest"
	"gaugelog/ingest/alarm"
	"gaugelog/ingest/forward"
	"gaugelog/ingest/rollup"
)

// Snapshot is a look at a run. Nobody changes it any more.
type Snapshot struct {
	At time.Time
	// Status is the recorder's own look; never nil.
	Status *ingest.Status
	// Ports are the ports' counters; empty where they are not known.
	Ports []device.PortStats
	// Queued counts readings between ports and recorder; Missed those that
	// the bins (not the recording) lost because they came too fast.
	Queued int
	Missed int64
	// Forward is how far sending to a server is; nil where the run is sent
	// nowhere, or where that is not known yet.
	Forward *forward.State
	Gauges  []Gauge
	Probes  []ingest.Last
	Loads   Loads
	// Marks are all marks in the order entered; Withdrawn says why one does
	// not count, by id.
	Marks     []ingest.Mark
	Withdrawn map[string]string
	// Outlook is what the analysis says; nil until it first answered.
	// OutlookError is why the last try failed; OutlookTried when it was.
	Outlook      *Outlook
	OutlookError string
	OutlookTried time.Time
	// Alarms are raised, the gravest first; PastAlarms have ended.
	Alarms, PastAlarms []alarm.Alarm
	// Curves are what the plots show, at most ten seconds old.
	Curves *Curves
	// Rebuilding is true while what was recorded earlier is still being read.
	Rebuilding bool
	// Whole is true once what was recorded earlier is read and the analysis,
	// where there is one, has answered: nothing more is on its way.
	Whole bool
	// Onlooking is true where another process records: what is known is what
	// that one has written to disk.
	Onlooking bool
}

// Gauge is one gauge at present. Sag is not corrected but for the gauge's
// sense; down is positive, mm. Pointers are nil where there is nothing to say.
type Gauge struct {
	ingest.Last
	Sees string
	// Sag is the change of the indication since the baseline (or since the
	// first reading, where no load was entered).
	Sag *float64
	// Trend compares two equal intervals; nil where too little is known.
	Trend *Trend
	// Day is the change of sag in the last 24 h; nil for a younger run.
	Day *float64
	// TravelLeft is how far the gauge can still follow the beam downwards, mm;
	// TravelShare its share of the whole travel, 0..1.
	TravelLeft, TravelShare *float64
	// RunsOut is when the travel ends at the present rate; zero where that is
	// not known or more than twenty years away.
	RunsOut time.Time
	// Resolution is the step of its last digit, mm.
	Resolution float64
}

// Trend is the change of sag (mm) in the latest interval and in the one before.
type Trend struct {
	Over         time.Duration
	Last, Before float64
}

// Loads says what hangs at present by the marks.
type Loads struct {
	// Now holds the loads entered, in the rig's order.
	Now []ingest.LoadValue
	// Newton is their sum, as entered: without lever and tare.
	Newton float64
	// Step is the step named last; empty before any.
	Step string
	// Since is the last load change: as found by the analysis where it knows,
	// else as marked. Zero before any.
	Since time.Time
	// Found is true where Since was found in the readings.
	Found bool
	// First is the mark of the first load, before which the baseline lies.
	First time.Time
	// Planned is the number of the planned step going on, -1 for none; Ends is
	// when its holding time is over.
	Planned int
	Ends    time.Time
}

// Curves are copies of the bins, by gauge and then by probe quantity.
type Curves struct {
	Series []Curve
	// Origin is the instant from which Since counts; zero: none.
	Origin time.Time
	// Width is the width of the bins of Whole.
	Width time.Duration
}

// Curve is one channel. Values are indications in mm, degree Celsius or
// percent; Baseline and Sign turn an indication into sag: (v - Baseline) * Sign.
type Curve struct {
	Name     string
	Kind     CurveKind
	Baseline float64
	Sign     float64
	Whole    []rollup.Bin
	Since    []rollup.Bin
}

// CurveKind says what a curve shows.
type CurveKind uint8

// The kinds of curve.
const (
	SagCurve CurveKind = iota
	CelsiusCurve
	HumidityCurve
)
