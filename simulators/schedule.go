package simulators

// Instant is one moment on the recorder's two clocks, in nanoseconds: Wall
// since 1970 UTC, Boot since the computer's last start (it begins anew after a
// power cut).
type Instant struct{ Wall, Boot int64 }

// Frame is one frame that was put on a line.
type Frame struct {
	// Offset is the place of the frame's first byte, counted in bytes sent on
	// this port since the simulation began.
	Offset int64
	// Lead is how many bytes of echo and noise came with it, before Offset;
	// Length how many bytes the frame has, as it was sent.
	Lead, Length int
	// At is the instant of the first byte.
	At Instant
	// Name is the gauge or probe that sent it.
	Name string
	// MM is the indication in mm as the instrument showed it (a multiple of
	// its resolution); for a probe the temperature in degree Celsius.
	MM float64
	// Damaged is true where a line fault touched the frame's bytes, or where
	// it carries no number.
	Damaged bool
	// Doubtful is true where the frame's bytes are whole, but something
	// beside them is not: noise before it, a frame before it that lost its
	// end, an answer later than its time-out. A reader may take it, and then
	// it says MM, or refuse it.
	Doubtful bool
	// NoReading is true where the frame is whole and says that there is no
	// number; it is Damaged too.
	NoReading bool
	// Status is what the frame's status says, where the frame can say it.
	Status string
}

// Intact tells whether the frame is whole, readable and holds a number.
func (f *Frame) Intact() bool { return !f.Damaged && !f.Doubtful }

// Batch is what one port sends in one stretch of time. Its slices belong to
// the Sim and are overwritten by the next call of Next.
type Batch struct {
	Port  string // sim:NAME
	Index int    // place of the port in Ports
	// Start is the offset of Bytes[0], counted as Frame.Offset is.
	Start  int64
	Bytes  []byte
	Frames []Frame // in order of Offset and of At
	// Delay is how long an answer takes, in nanoseconds (only from Ask; the
	// frames' instants contain it).
	Delay int64
}

// EventKind says what an Event is.
type EventKind uint8

// The kinds of Event.
const (
	// MarkDue: the operator enters Event.Mark at this instant.
	MarkDue EventKind = iota
	// PowerCut: the recorder's computer loses its power; what the gauges send
	// until PowerBack is lost and is not part of any batch.
	PowerCut
	// PowerBack: the computer is up again, with a new boot id.
	PowerBack
	// Unplugged: the port Event.Port is gone. Its gauges send nothing that
	// could be read until Plugged.
	Unplugged
	// Plugged: the port is back; Event.Name is the name it came back under
	// (the same, or another device name for the same stable identity).
	Plugged
)

// String returns the kind's name as the truth log writes it.
func (k EventKind) String() string {
	return [...]string{"mark", "power-cut", "power-back", "unplugged", "plugged"}[k]
}

// Event is something the conductor has to do at an instant, after the batches
// that came with it and before the next call of Next.
type Event struct {
	Kind EventKind
	At   Instant
	Port string // Unplugged, Plugged
	Name string // Plugged
	Mark *Mark  // MarkDue
	Boot string // PowerBack: the new boot id, 32 hexadecimal digits
	Rig  int    // whose event it is, where several rigs run together (Join)
}

// Mark is an entry as the operator would type it: every load that the step
// changed, at the instant of typing, which need not be the instant of loading.
type Mark struct {
	ID    string // m1, m2, ...
	At    Instant
	Step  string
	Loads []LoadValue
}

// LoadValue is one load's new value in a mark.
type LoadValue struct {
	Name     string
	Kilogram float64 // the mass hung, without lever and tare; 0 where a force was set
	Newton   float64 // Kilogram times gravity, or the force set
	IsForce  bool
	Shown    string // as the plan wrote it: "12.40 kg"
}

// Interval is a stretch of time from the simulation's start, in nanoseconds.
type Interval struct{ From, To int64 }

// Stretch is what one call of Next gives: the batches of all ports, in the
// order of Ports, then the events due at Reached.
type Stretch struct {
	Batches []Batch
	Events  []Event
	// Reached is the instant, in nanoseconds from the start, up to which all
	// ports have been handed over (exclusive).
	Reached int64
	// At is Reached on the recorder's clocks.
	At Instant
	// Done is true when the end of the simulation was reached.
	Done bool
}
