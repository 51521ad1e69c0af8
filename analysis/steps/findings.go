package steps

import "gaugelog/analysis/history"

// Options are what Find needs beside the run.
type Options struct {
	// Gravity turns masses into forces, m/s2; 0 means standard gravity, 9.80665.
	Gravity float64
	// Influence is the sag at each gauge (rig's order) per newton of each load
	// (rig's order), mm/N; only its proportions count. Nil: gauges between the
	// supports are expected to go down and nothing is expected of others,
	// until found steps tell the proportions.
	Influence [][]float64
}

// Value is a sag or an offset with its standard uncertainty, mm.
type Value struct{ MM, U float64 }

// SagAt is a sag some time after full load.
type SagAt struct {
	AfterS float64
	Value  Value
	// First marks the first reading of a step that came too late for the time
	// asked for; AfterS is then its own time.
	First bool
}

// Figures are one gauge's sag in one step. A nil pointer could not be
// measured.
type Figures struct {
	// Initial is the sag the rig's initial_after behind full load.
	Initial *Value
	// Increment is Initial less the former step's trend carried to that instant.
	Increment *Value
	// Carried is the part of Increment's uncertainty, mm, that comes from the
	// choice of the curve by which the trend was carried forward. It has a sign:
	// all gauges of a step err by it together, one way or the other.
	Carried float64
	// Final is the sag at the step's end.
	Final *Value
	// SagAt holds the rig's read.times that lie within the step, or the first
	// reading where it came later than initial_after.
	SagAt []SagAt
}

// GaugeFigures are one gauge's figures in one step: Gross before and Net
// after the correction for support movement.
type GaugeFigures struct{ Gross, Net Figures }

// Step is an interval between load changes. Steps tile the run.
type Step struct {
	Name     string
	From, To int64 // found (or marked) start; the next step's start or the last reading
	// Loads is the force on the beam by load of the rig, N, without the loads of
	// which nothing is known after an unmarked change; Kilogram the masses set
	// where masses were given (without tare, lever or gravity).
	Loads    map[string]float64
	Kilogram map[string]float64
	// Marked, Found and Full are the mark's instant, the first movement and
	// the instant of full load; 0 where there is none.
	Marked, Found, Full int64
	// OffsetS is marked less found, s; StartU the standard uncertainty of
	// Found, s. Both 0 unless both instants are known.
	OffsetS, StartU float64
	// Response says whether the gauges answered the mark; nil in the zero step.
	Response *bool
	// RampS is the time from first movement to full load, RingingS how long
	// the gauges swung after it, RingingMM the greatest swing; s, s, mm.
	RampS, RingingS, RingingMM float64
	// Unmarked is true of a step that no mark announced.
	Unmarked bool
	// LoadsKnown says that Loads holds nothing but marked values: false from an
	// unmarked change until every load it moved has been marked again.
	// DeltaKnown says the same of what the step changed: false of an unmarked
	// step and of the next change of its load. Only a step with DeltaKnown tells
	// of stiffness.
	LoadsKnown, DeltaKnown bool
	Gauges                 []GaugeFigures // by gauge of the rig; the zero step has Final only
}

// LoadChange is one change of load, for the creep fit.
type LoadChange struct {
	Step  int     // index of the step it begins
	Full  int64   // instant of full load
	RampS float64 // from first movement to full load, s
	// Delta is the change of each load of the rig (rig's order), N.
	Delta []float64
}

// Kind is what disturbed the gauges, as in the result.
type Kind string

// The kinds of disturbance.
const (
	BenchKnock   Kind = "bench-knock"
	GaugeKnock   Kind = "gauge-knock"
	ZeroPressed  Kind = "zero-pressed"
	Spike        Kind = "spike"
	LoadChanged  Kind = "load-change"
	SupportShift Kind = "support-shift"
	UnitKey      Kind = "unit-key"
	Frozen       Kind = "frozen"
	EndOfTravel  Kind = "end-of-travel"
	GapKind      Kind = "gap"
	Undecided    Kind = "undecided"
)

// Disturbance is something that moved the gauges, or kept them from moving,
// and was neither planned load nor creep.
type Disturbance struct {
	Kind   Kind
	Gauges []int // indices in the rig's list
	From   int64
	To     int64 // 0 where it has no end
	// Size is its effect on the apparent sag of the gauge it moved most.
	Size *Value
	// By holds the size for each of Gauges, same order; nil where none.
	By []Value
	// Load is the estimated change of Which load, N, for a load-change.
	Load  *Value
	Which string
	// Treated says in words what was done about it.
	Treated string
	// Candidates are the kinds an undecided one may be.
	Candidates []Kind
	Evidence   string
	// Marked is true where an operator's entry told of it.
	Marked bool
}

// Offset is a lasting shift of one gauge that the track has had removed: a
// column of the final fit, 0 before Time and 1 after.
type Offset struct {
	Time  int64
	Value Value
	Kind  Kind
}

// Span is an interval left out of a gauge's figures.
type Span struct {
	Gauge    int // -1: every gauge
	From, To int64
	Why      string
}

// Point is one cell of a gauge's track.
type Point struct {
	Time int64
	// Raw is the indication; Gross the sag with calibration, sense, baseline
	// and offsets applied; Net that less support movement. mm.
	Raw, Gross, Net float64
	// U is the standard uncertainty of Gross from scatter and resolution, NetU
	// that of Net, without baseline and offsets, which are common to many.
	U, NetU float64
	N       int // readings
	Step    int // index of the step it lies in
}

// Track is one gauge's corrected history, thinned: log-spaced after each
// change of load, at most some 2,000 points.
type Track struct {
	Gauge    int
	Points   []Point
	Baseline Value // corrected indication at the baseline, mm, and its u
	Offsets  []Offset
	// Noise is the standard deviation of one reading, at least the resolution's
	// floor, mm.
	Noise float64
}

// Chord says which correction for support movement was used.
type Chord struct {
	// How: "both" supports measured, "one-sided", "none", or "not-applicable".
	How string
	// Left and Right are the gauges over the supports, -1 where none.
	Left, Right int
	Text        string
}

// Settlement is how far a support went down from the baseline to the end.
type Settlement struct {
	Support  int // index in the rig's list
	Value    *Value
	Measured bool
	Gauge    int // -1 where not measured
}

// Warning is something a reader must know.
type Warning struct {
	Code, Text string
	Gauge      int // -1: none in particular
	Time       int64
}

// Decision is what a person overruled.
type Decision struct{ Path, Value, Why, By, Since string }

// Findings is everything Find says of a run.
type Findings struct {
	Steps []Step
	// Baseline is the index of the step whose loads are the baseline, and
	// BaselineFrom..BaselineTo the interval its readings were taken from.
	Baseline                 int
	BaselineFrom, BaselineTo int64
	Tracks                   []Track // by gauge of the rig
	Loads                    []LoadChange
	Disturbances             []Disturbance
	Excluded                 []Span
	Supports                 []Settlement // by support of the rig
	Chord                    Chord
	Decisions                []Decision
	Warnings                 []Warning
	// TooFew is true where no gauge left more than one reading: nothing can be
	// said then, and Warnings holds that one alone.
	TooFew bool
}

// pendingOffset is an offset of one gauge, to be put on its track.
type pendingOffset struct {
	gauge  int
	offset Offset
}

// unmarkedStep is a lasting change of load that no mark announced.
type unmarkedStep struct {
	event  *cluster
	at     timing
	fit    fitted
	newton *Value // estimate, N; nil where nothing tells the scale
	told   int    // index of the disturbance that tells of it
}

// run is the state of one Find.
type run struct {
	h       *history.History
	opt     Options
	gauges  []gauge
	changes []change
	hot     []interval
	events  []cluster
	matched matching
	// doubtful says of each change that its delta is not what its marks say,
	// one of its loads having been changed unmarked before.
	doubtful []bool
	// before is what hung before the first reading, as marked.
	before change
	rules  []rule // decisions of a person
	// parts are what the steps were built from, by step; the zero step's is empty.
	parts     []part
	stuckRuns []stuck
	keys      []key
	pending   []pendingOffset
	shifts    []*cluster // sudden movements of a support
	unmarked  []unmarkedStep
	former    []unmarkedStep // those of the classification before
	// kappa scales the given influence to the sags seen; 0 where unknown.
	kappa float64
	out   *Findings
}
