package simulators

// Faults is a schedule of what goes wrong.
type Faults struct {
	// Seed chooses which bytes suffer; the simulation's own where left out.
	Seed   *uint64 `yaml:"seed"`
	Faults []Fault `yaml:"faults"`
	name   string
}

// Fault is one thing that goes wrong, from an instant on and, where For is
// given, for a time. Which keys it needs follows from Kind.
type Fault struct {
	Kind  string  `yaml:"kind"`
	At    Seconds `yaml:"at"`
	After string  `yaml:"after"` // a step, from whose full load At counts; empty: the start
	For   Seconds `yaml:"for"`
	// What it happens to: a gauge's (or, for line faults, a probe's) name, a
	// stand, a port, a load or a support.
	Gauge   string `yaml:"gauge"`
	Stand   string `yaml:"stand"`
	Port    string `yaml:"port"`
	Load    string `yaml:"load"`
	Support string `yaml:"support"`
	// Size is the effect on the apparent sag in mm, down positive.
	Size MM `yaml:"size"`
	// By is a change of load.
	By Weight `yaml:"by"`
	// Share is how many of the frames suffer, 0..1; default 1.
	Share *float64 `yaml:"share"`
	// Limit is the indication beyond which an obstructed plunger cannot go.
	Limit *MM `yaml:"limit"`
	// Delay is how late a reply comes.
	Delay Seconds `yaml:"delay"`
	// Name is the device name a port comes back under; default its own.
	Name string `yaml:"name"`
	// Status is the word a gauge's status says: hold, battery-low,
	// over-range, under-range, high-limit, low-limit or error.
	Status string `yaml:"status"`
	// Every repeats a press of the button until For is over.
	Every Seconds `yaml:"every"`
}

// The kinds of Fault.
const (
	Spike       = "spike"         // a gauge shows Size more, for a time
	GaugeKnock  = "gauge-knock"   // a gauge shows Size more from then on
	StandKnock  = "stand-knock"   // all gauges of a stand do
	PowerOff    = "power-cut"     // the recorder is off for a time
	ZeroPressed = "zero-pressed"  // a gauge shows 0 there and counts from it
	UnitKey     = "unit-key"      // a gauge changes between mm and in, back after For
	Freeze      = "freeze"        // a gauge repeats its last indication for a time
	EndOfTravel = "end-of-travel" // a gauge's plunger strikes something at Limit
	LoadChange  = "load-change"   // a load changes by By, back after For
	SupportMove = "support-shift" // a support sinks by Size
	Garble      = "garble"        // bytes are changed
	DropBytes   = "drop-bytes"    // bytes are lost
	Stall       = "stall"         // the line is silent for a time
	Unplug      = "unplug"        // the port goes, and comes back after For
	Echo        = "echo"          // requests come back before the answer
	BatteryLow  = "battery-low"   // the frame says so, where it can
	LateReply   = "late-reply"    // answers come Delay late
	OverRange   = "over-range"    // the gauge sends its text for no reading
	Hold        = "hold"          // a gauge keeps its indication and says so
	ShowStatus  = "status"        // a gauge's status says Status for a time
	Press       = "press"         // the button of a gauge that waits for it
	Noise       = "noise"         // bytes of no meaning before the frames
	Endless     = "endless"       // a stream without terminator instead of frames
)

// faultNeeds says which keys a kind needs: g gauge, s stand, p a gauge or a
// port, l load, u support, f for, z size, b by, d delay, i limit, w status.
var faultNeeds = map[string]string{
	Spike: "gfz", GaugeKnock: "gz", StandKnock: "sz", PowerOff: "f", ZeroPressed: "g", UnitKey: "g",
	Freeze: "gf", EndOfTravel: "gi", LoadChange: "lb", SupportMove: "uz", Garble: "pf", DropBytes: "pf",
	Stall: "pf", Unplug: "pf", Echo: "pf", BatteryLow: "g", LateReply: "pfd", OverRange: "gf",
	Hold: "gf", ShowStatus: "gfw", Press: "g", Noise: "pf", Endless: "pf",
}
