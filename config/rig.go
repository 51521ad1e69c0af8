package config

// Rig is one rig file, decoded, with every default filled in. Optional
// dimensions that have no default are pointers: nil means not stated.
type Rig struct {
	Title    string     `mapstructure:"title"`
	Test     Test       `mapstructure:"test"`
	Details  []Detail   `mapstructure:"details"` // in the order typed
	Timezone string     `mapstructure:"timezone"`
	Specimen Specimen   `mapstructure:"specimen"`
	Gravity  Gravity    `mapstructure:"gravity"`
	Supports []Support  `mapstructure:"supports"`
	Gauges   []Gauge    `mapstructure:"gauges"`
	Probes   []Probe    `mapstructure:"probes"`
	Frames   []Frame    `mapstructure:"frames"`
	Loads    []Load     `mapstructure:"loads"`
	Plan     []PlanStep `mapstructure:"plan"`
	Record   Record     `mapstructure:"record"`
	Read     Read       `mapstructure:"read"`
	Limits   Limits     `mapstructure:"limits"`
	Alarms   Alarms     `mapstructure:"alarms"`
	Forward  Forward    `mapstructure:"forward"`
	Evaluate []string   `mapstructure:"evaluate"`
	Forecast []Duration `mapstructure:"forecast"`

	// source is the text this rig was decoded from; nil for one made in Go.
	source *source
}

// Test names the test; every field is free text and optional.
type Test struct {
	ID       string `mapstructure:"id"`
	Purpose  string `mapstructure:"purpose"`
	Operator string `mapstructure:"operator"`
}

// Detail is one free entry of the rig file's details, printed as typed.
type Detail struct{ Name, Text string }

// Specimen is the beam under test.
type Specimen struct {
	Name     string  `mapstructure:"name"`
	Material string  `mapstructure:"material"` // timber | plastic | metal | other
	Section  Section `mapstructure:"section"`
	From     Length  `mapstructure:"from"` // where the beam begins; default 0 mm
	Length   Length  `mapstructure:"length"`
	Mass     *Mass   `mapstructure:"mass"`
	Expect   Expect  `mapstructure:"expect"`
}

// Section is the cross-section; depth is along the load.
type Section struct {
	Shape string `mapstructure:"shape"` // rectangle | round | tube | box | general
	// Width and Depth hold the measured places (rectangle, box); the mean
	// counts. A single value is a list of one.
	Width []Length `mapstructure:"width"`
	Depth []Length `mapstructure:"depth"`
	// Diameter is the outer diameter (round, tube); Wall the thickness (tube, box).
	Diameter []Length `mapstructure:"diameter"`
	Wall     []Length `mapstructure:"wall"`
	// U is the standard uncertainty of one measured dimension.
	U *Length `mapstructure:"u"`
	// General section.
	SecondMoment *SecondMoment `mapstructure:"second_moment"`
	Area         *Area         `mapstructure:"area"`
	ShearFactor  *Number       `mapstructure:"shear_factor"`
	UPercent     *Number       `mapstructure:"u_percent"`
}

// Expect holds what is believed of the specimen before the test; predictions
// use it, results never do (but for the shear modulus as a stated prior).
type Expect struct {
	Modulus          *Stress `mapstructure:"modulus"`
	ShearModulus     *Stress `mapstructure:"shear_modulus"`
	Strength         *Stress `mapstructure:"strength"`
	CreepCoefficient *Number `mapstructure:"creep_coefficient"`
}

// Gravity turns masses into forces: a stated value, a place, or standard
// gravity (9.80665 m/s2) where neither is given.
type Gravity struct {
	Value    *Number `mapstructure:"value"`    // m/s2
	Latitude *Number `mapstructure:"latitude"` // degrees
	Height   *Length `mapstructure:"height"`   // mm above sea level
}

// Support holds the beam at one place.
type Support struct {
	Name       string      `mapstructure:"name"`
	At         Length      `mapstructure:"at"`
	Kind       string      `mapstructure:"kind"` // pin (default) | clamp
	Compliance *Compliance `mapstructure:"compliance"`
}

// Gauge is a digital indicator at a place along the beam.
type Gauge struct {
	Name         string       `mapstructure:"name"`
	At           Length       `mapstructure:"at"`
	Sees         string       `mapstructure:"sees"` // beam (default) | seat | reference
	Bar          []Length     `mapstructure:"bar"`  // empty or two places
	Stand        string       `mapstructure:"stand"`
	Port         string       `mapstructure:"port"`
	Frame        string       `mapstructure:"frame"`
	Channel      string       `mapstructure:"channel"`
	Line         *Line        `mapstructure:"line"`  // overrides the frame's line settings
	Sense        string       `mapstructure:"sense"` // down | up
	Resolution   Length       `mapstructure:"resolution"`
	Travel       []Length     `mapstructure:"travel"` // empty or lowest and highest indication
	U            *Length      `mapstructure:"u"`      // nil: from the resolution
	Calibration  *Calibration `mapstructure:"calibration"`
	Contact      *Contact     `mapstructure:"contact"`
	SerialNumber string       `mapstructure:"serial_number"`
	SilentAfter  *Duration    `mapstructure:"silent_after"`
}

// Calibration is a line: indication = offset + gain * true.
type Calibration struct {
	Offset      Length  `mapstructure:"offset"`
	Gain        Number  `mapstructure:"gain"` // default 1
	UOffset     *Length `mapstructure:"u_offset"`
	UGain       *Number `mapstructure:"u_gain"`
	Correlation *Number `mapstructure:"correlation"` // of offset and gain, -1..1
	Date        string  `mapstructure:"date"`        // YYYY-MM-DD
	Due         string  `mapstructure:"due"`         // YYYY-MM-DD
}

// Contact is the plunger on the beam.
type Contact struct {
	Side      string     `mapstructure:"side"` // above | below
	Force     *Force     `mapstructure:"force"`
	Stiffness *Stiffness `mapstructure:"stiffness"`
	// Friction is the greatest force by which the plunger sticks in its sleeve.
	Friction *Force `mapstructure:"friction"`
}

// Probe reads the surroundings.
type Probe struct {
	Name        string    `mapstructure:"name"`
	Port        string    `mapstructure:"port"`
	Frame       string    `mapstructure:"frame"`
	Channel     string    `mapstructure:"channel"`
	Line        *Line     `mapstructure:"line"`
	Temperature string    `mapstructure:"temperature"` // group of the frame's pattern
	Humidity    string    `mapstructure:"humidity"`    // group of the frame's pattern
	SilentAfter *Duration `mapstructure:"silent_after"`
}

// Load is a named weight or force at a place or spread over a stretch.
type Load struct {
	Name  string  `mapstructure:"name"`
	At    *Length `mapstructure:"at"`
	From  *Length `mapstructure:"from"`
	To    *Length `mapstructure:"to"`
	Lever *Number `mapstructure:"lever"` // force on the beam / weight hung; default 1
	Tare  *Mass   `mapstructure:"tare"`  // always hangs with the load once it is not zero
}

// PlanStep is one planned interval between load changes.
type PlanStep struct {
	Step string      `mapstructure:"step"`
	Set  []SetWeight `mapstructure:"set"` // {load: weight, ...} in the file
	Hold Duration    `mapstructure:"hold"`
}

// SetWeight is the value one load gets when a planned step begins.
type SetWeight struct {
	Load   string
	Weight Weight
}

// Record says how readings are kept.
type Record struct {
	Sampling Sampling `mapstructure:"sampling"`
	Sync     Duration `mapstructure:"sync"` // default 10 s
	Roll     Roll     `mapstructure:"roll"`
}

// Sampling chooses which readings are stored. All is the text "all", and the
// default where nothing is stated; Every
// alone is a fixed interval; Dense and its companions are dense around
// changes, then log-spaced. What is stored is always a real reading.
type Sampling struct {
	All       bool      `mapstructure:"-"`
	Every     *Duration `mapstructure:"every"`
	Dense     *Duration `mapstructure:"dense"`
	Around    *Duration `mapstructure:"around"`
	PerDecade *Number   `mapstructure:"per_decade"`
	Longest   *Duration `mapstructure:"longest"`
	DeadBand  *Length   `mapstructure:"dead_band"`
}

// Roll closes a segment by size or by age.
type Roll struct {
	Size Size     `mapstructure:"size"` // default 16 MB
	Age  Duration `mapstructure:"age"`  // default 24 h
}

// Read says which times the result states.
type Read struct {
	InitialAfter Duration   `mapstructure:"initial_after"` // default 60 s
	Times        []Duration `mapstructure:"times"`
	CreepGauge   string     `mapstructure:"creep_gauge"`
}

// Limits are what the test must stay within; nil means no limit.
type Limits struct {
	Sag         *Length       `mapstructure:"sag"`
	SpanOverSag *Number       `mapstructure:"span_over_sag"`
	TravelLeft  *Length       `mapstructure:"travel_left"`
	CatcherGap  *Length       `mapstructure:"catcher_gap"`
	Temperature []Temperature `mapstructure:"temperature"` // empty or lowest and highest
}
