package device

// Instant is one moment on two clocks.
type Instant struct {
	// Wall is nanoseconds since 1970 UTC by the wall clock, which may be
	// stepped and may be wrong before it was first set.
	Wall int64
	// Boot is nanoseconds by the boot-time clock, which is never stepped and
	// counts through suspend.
	Boot int64
}

// Kind says what a Reading is: a value, or something that happened on its way.
type Kind uint8

// The kinds of Reading.
const (
	// Indication is one indication of one gauge.
	Indication Kind = iota
	// Ambient is one reading of a probe.
	Ambient
	// NoReading is a whole frame that carries no number (over range, error text).
	NoReading
	// PortLost and PortBack tell of the port; Gauge is empty, Port is set.
	PortLost
	PortBack
	// FramesRefused sums the damaged frames of a port since the last such
	// Reading; N counts them.
	FramesRefused
	// UnitKey says that a gauge's unit changed; Unit is the new one.
	UnitKey
)

// Reading is the one type that crosses from device to ingest. It holds no
// pointers into buffers: the strings are interned names from the rig file.
type Reading struct {
	Kind Kind
	// Rig is the index of the rig in Options.Rigs.
	Rig int
	// Gauge or Probe is the name in the rig file; Port is the name the port
	// goes by (a stable identity, a path, or sim:NAME).
	Gauge, Probe, Port string
	// At is the instant of the frame's first byte.
	At Instant
	// MM is the indication in millimetres, converted exactly from Shown and
	// Unit; NegativeZero indications arrive as 0.
	MM float64
	// Shown and Unit are what the gauge displayed; Unit is "mm" or "in".
	Shown float64
	Unit  string
	// Status is "" where ordinary, else one of hold, battery-low, high-limit,
	// low-limit, over-range, under-range, error.
	Status string
	// Celsius and HumidityPercent of a probe; NaN where the frame has none.
	Celsius, HumidityPercent float64
	// Detail says why, for NoReading, PortLost, PortBack and FramesRefused.
	Detail string
	// N counts frames refused; the first and the last of them came at First
	// and Last.
	N           int
	First, Last Instant
	// Deaf says of PortLost that the port is there and was open, but nothing
	// that counts was heard for so long that it is opened anew.
	Deaf bool
}

// Sink takes readings. Calls for one port come from one goroutine, in order;
// calls for different ports may come at once. Take must not block for long
// and must not keep the Reading's address.
type Sink interface {
	Take(Reading)
}

// Stamper gives the instant of a frame's first byte: offset counts the bytes
// received on that port since it was opened first. In real time that is now;
// in virtual time it is looked up in the sender's schedule.
type Stamper interface {
	Stamp(port string, offset int64) Instant
}
