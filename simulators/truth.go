package simulators

// Truth is what the simulated rig really is. Everything optional is nothing
// when left out: no creep, rigid supports, perfect gauges, a room that stands
// still. Lengths along the beam, sections and travel come from the rig file
// unless the truth says otherwise.
type Truth struct {
	// Start is the wall clock at the first instant, RFC 3339; default
	// 2026-03-02T08:00:00Z. The real-time simulation uses the present.
	Start string `yaml:"start"`
	// Gravity in m/s2; default from the rig's gravity.
	Gravity  float64        `yaml:"gravity"`
	Specimen TruthSpecimen  `yaml:"specimen"`
	Creep    TruthCreep     `yaml:"creep"`
	Supports []TruthSupport `yaml:"supports"`
	Stands   []TruthStand   `yaml:"stands"`
	// Every holds for each gauge that has no entry of its own in Gauges, and
	// is where their entries start from.
	Every  TruthGauge   `yaml:"every_gauge"`
	Gauges []TruthGauge `yaml:"gauges"`
	Room   TruthRoom    `yaml:"room"`
	Loads  []TruthLoad  `yaml:"loads"`
	Place  TruthPlace   `yaml:"placing"`
	Steps  []TruthStep  `yaml:"steps"`
	Pace   []TruthPace  `yaml:"pace"`
	Lines  TruthLines   `yaml:"lines"`
	Breaks *TruthBreak  `yaml:"breaks"`
	name   string       // the file, for messages
}

// TruthSpecimen is the beam's real stiffness: bending = modulus times the
// second moment of the section, shear = shear modulus times shear factor times
// area. Modulus is required.
type TruthSpecimen struct {
	Modulus      MPa `yaml:"modulus"`
	ShearModulus MPa `yaml:"shear_modulus"` // left out: rigid in shear
	// Width and Depth replace those of a rectangular section in the rig file.
	Width MM `yaml:"width"`
	Depth MM `yaml:"depth"`
}

// TruthCreep is the creep law, the same for bending and shear. Law names it:
// power (amplitude, n; time in hours), log (amplitude, tau), standard-solid
// (amplitude, tau), burgers (amplitude, tau, flow per hour), kelvin-chain
// (amplitudes, taus); empty for none. Amplitudes are shares of the sag at
// once.
type TruthCreep struct {
	Law        string         `yaml:"law"`
	Amplitude  float64        `yaml:"amplitude"`
	N          float64        `yaml:"n"`
	Tau        Seconds        `yaml:"tau"`
	Flow       float64        `yaml:"flow"` // share per hour
	Amplitudes []float64      `yaml:"amplitudes"`
	Taus       []Seconds      `yaml:"taus"`
	Tertiary   *TruthTertiary `yaml:"tertiary"`
}

// TruthTertiary is an accelerating end: from the given time after a load came
// its share grows by amplitude * (exp(t/growth) - 1).
type TruthTertiary struct {
	Amplitude float64 `yaml:"amplitude"`
	From      Seconds `yaml:"from"`
	Growth    Seconds `yaml:"growth"`
}

// TruthBreak is the beam's failure: at At it falls out of every gauge's reach.
type TruthBreak struct {
	At    Seconds `yaml:"at"`
	After string  `yaml:"after"` // a step, from whose full load At counts
}

// TruthSupport is how a support gives way: at once by Compliance; the wood
// crushed over it by Crushing, which creeps as the beam does and which a gauge
// on the seat does not see; and by itself (Settlement).
type TruthSupport struct {
	Name       string            `yaml:"name"`
	Compliance MMPerN            `yaml:"compliance"`
	Crushing   MMPerN            `yaml:"crushing"`
	Settlement []TruthSettlement `yaml:"settlement"`
}

// TruthSettlement is one movement of a support, down positive.
type TruthSettlement struct {
	At    Seconds `yaml:"at"`
	After string  `yaml:"after"` // a step; empty: the start
	By    MM      `yaml:"by"`
	Over  Seconds `yaml:"over"` // how long it takes; default 1 s
}

// TruthStand is what its surroundings do to a stand; the gauges on it show it
// as sag (down positive), filtered by a first-order lag.
type TruthStand struct {
	Name        string     `yaml:"name"`
	Temperature PerKelvin  `yaml:"temperature"`
	Lag         Seconds    `yaml:"lag"`
	Humidity    PerPercent `yaml:"humidity"`
	HumidityLag Seconds    `yaml:"humidity_lag"`
}

// TruthGauge is what a gauge really does. Its indication is
// offset + gain * (preset + sense * movement) + noise, rounded to the
// resolution and held within its travel.
type TruthGauge struct {
	Name        string     `yaml:"name"`
	Preset      MM         `yaml:"preset"` // the true plunger position before anything moves
	Offset      MM         `yaml:"offset"`
	Gain        *float64   `yaml:"gain"`  // default 1
	Noise       *MM        `yaml:"noise"` // standard deviation of one indication
	Drift       PerDay     `yaml:"drift"` // in apparent sag, down positive
	Stiffness   *NPerMM    `yaml:"stiffness"`
	Force       *Newtons   `yaml:"force"` // at the baseline; carried by the beam before the test, so it moves nothing
	Stiction    *Newtons   `yaml:"stiction"`
	Temperature PerKelvin  `yaml:"temperature"` // of the gauge itself, without lag
	Humidity    PerPercent `yaml:"humidity"`
	// InchResolution is the resolution in inches after the unit key was
	// pressed; default the mm resolution / 25.4 rounded up to 1, 2 or 5 times
	// a power of ten.
	InchResolution MM `yaml:"inch_resolution"`
	// Unit is what the gauge shows from the start: mm (default) or in.
	Unit string `yaml:"unit"`
}

// TruthRoom is the air around the rig.
type TruthRoom struct {
	Temperature TruthSwing `yaml:"temperature"` // degree Celsius
	Humidity    TruthSwing `yaml:"humidity"`    // percent
	// NoiseTemperature and NoiseHumidity are the probe's standard deviations.
	NoiseTemperature float64 `yaml:"noise_temperature"`
	NoiseHumidity    float64 `yaml:"noise_humidity"`
}

// TruthSwing is mean + swing * cos(2 pi (t - peak)/period) + trend * days, t
// from the simulation's start; plain numbers in the room's units.
type TruthSwing struct {
	Mean   float64 `yaml:"mean"`
	Swing  float64 `yaml:"swing"`
	Period Seconds `yaml:"period"` // default 24 h
	Peak   Seconds `yaml:"peak"`
	Trend  float64 `yaml:"trend"` // per day
}

// TruthLoad is how a load differs from what the rig file says of it.
type TruthLoad struct {
	Name   string   `yaml:"name"`
	Factor *float64 `yaml:"factor"` // real force / stated force; default 1
	Off    MM       `yaml:"off"`    // how far it hangs off its stated place
}

// TruthPlace is how loads are placed: how long a change takes, and the
// ringing behind it, Share * change * exp(-t/Decay) * cos(2 pi Hertz t).
type TruthPlace struct {
	Takes Seconds `yaml:"takes"` // default 2 s, at least 0.05 s
	Share float64 `yaml:"ringing"`
	Hertz float64 `yaml:"hertz"`
	Decay Seconds `yaml:"decay"`
}

// TruthStep says when a planned step really happened.
type TruthStep struct {
	Step string `yaml:"step"`
	// Late is how long after its planned instant the change began.
	Late Seconds `yaml:"late"`
	// MarkLate is how long after the change was complete the operator typed
	// the mark; negative before.
	MarkLate Seconds `yaml:"mark_late"`
	// Unmarked: the operator forgot.
	Unmarked bool `yaml:"unmarked"`
	// Takes replaces the placing time.
	Takes Seconds `yaml:"takes"`
}

// TruthPace is how often the gauges send from an instant on; it never makes a
// gauge that is asked faster than its frame's interval.
type TruthPace struct {
	At    Seconds `yaml:"at"`
	After string  `yaml:"after"` // a step; empty: the start
	Every Seconds `yaml:"every"`
}

// TruthLines is what the serial lines do when all is well.
type TruthLines struct {
	Jitter Seconds `yaml:"jitter"`    // greatest delay of a frame; default 2 ms
	Clocks float64 `yaml:"clocks"`    // how far the gauges' clocks differ, in parts per million; default 30
	Delay  Seconds `yaml:"turn_time"` // how long an asked gauge takes to answer; default 5 ms
}
