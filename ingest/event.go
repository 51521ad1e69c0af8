package ingest

import (
	"fmt"

	"gaugelog/device"
)

// EventKind says what an [Event] carries.
type EventKind uint8

// The kinds of Event.
const (
	// ReadingTaken carries whatever device handed over: an indication, an
	// ambient reading, a frame without a number or the state of a port.
	ReadingTaken EventKind = iota
	// Tick carries only its instant; it lets due work be done while no
	// reading comes.
	Tick
	// MarkSeen carries a mark that stands in the marks file already.
	MarkSeen
	// Happened carries a [Happening] for events.lp, such as an alarm.
	Happened
)

// Event is one thing that reaches a [Recorder]. Only the field that Kind names
// counts, beside At.
type Event struct {
	Kind EventKind
	// At is the instant at which the event happened or was seen. For a
	// reading it is the instant of the frame's first byte.
	At      device.Instant
	Reading device.Reading
	Mark    Mark
	What    Happening
}

// Seen is the event of a reading, at the reading's own instant.
func Seen(r device.Reading) Event { return Event{Kind: ReadingTaken, At: r.At, Reading: r} }

// TickAt is the event of time passing.
func TickAt(at device.Instant) Event { return Event{Kind: Tick, At: at} }

// The kinds of [Happening], which stand in events.lp as the tag kind.
const (
	Started       = "started"
	Stopped       = "stopped"
	PortLost      = "port-lost"
	PortBack      = "port-back"
	FramesRefused = "frames-refused"
	NoReading     = "no-reading"
	UnitKey       = "unit-key"
	StatusChanged = "status" // the gauge says something else of itself: battery-low, hold, a limit
	ClockStepped  = "clock-stepped"
	Gap           = "gap"
	Dropped       = "dropped"
	DiskFull      = "disk-full"
	DiskBack      = "disk-back"
	DiskSlow      = "disk-slow"
	RigAmended    = "rig-amended"
	AlarmRaised   = "alarm-raised"
	AlarmSeen     = "alarm-seen"
	AlarmOver     = "alarm-over"
)

var happeningKinds = map[string]bool{
	Started: true, Stopped: true, PortLost: true, PortBack: true, FramesRefused: true,
	NoReading: true, UnitKey: true, StatusChanged: true, ClockStepped: true, Gap: true, Dropped: true,
	DiskFull: true, DiskBack: true, DiskSlow: true, RigAmended: true,
	AlarmRaised: true, AlarmSeen: true, AlarmOver: true,
}

// Happening is one line of events.lp: something that happened to the
// recording, or an alarm.
type Happening struct {
	// Kind is one of the kinds above.
	Kind string
	// Gauge is the gauge or probe it happened to, empty where it concerns a
	// port or the whole run.
	Gauge string
	// Detail says it in words. Line breaks and other control characters are
	// replaced by blanks.
	Detail string
	// From is when it began, in nanoseconds since 1970 UTC, for what has a
	// length (gap, dropped); 0 where it has none. The event's own stamp is its end.
	From int64
	// N counts what happened; 0 is written as 1.
	N int64
}

func (h Happening) check() error {
	if !happeningKinds[h.Kind] {
		return fmt.Errorf("event kind %q is not one of those that events.lp holds", h.Kind)
	}
	return nil
}
