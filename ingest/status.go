package ingest

import (
	"time"

	"gaugelog/device"
)

// Status is a look at a live recorder. It is a copy that nobody changes any more.
type Status struct {
	// At is when it was taken.
	At device.Instant
	// Run is the run's id.
	Run string
	// SyncAge is how old the last completed sync is: what came later than
	// that may be lost in a power cut.
	SyncAge time.Duration
	// Waiting counts the readings in memory that are not yet on disk; Most is
	// its bound.
	Waiting, Most int
	// Stored and Dropped count readings since the recorder was opened: those
	// taken for the disk, and those that found no room.
	Stored, Dropped int64
	// Fault is what is wrong with the disk, "" where nothing is.
	Fault string
	// DiskFree is the free space in bytes, negative where unknown.
	DiskFree int64
	// ClockSynchronised tells whether the wall clock can be believed.
	ClockSynchronised bool
	// Closed is true once the recording has ended.
	Closed bool
	// Last holds the last reading of each gauge, then of each probe, in the
	// rig file's order.
	Last []Last
}

// Last is the last reading of one gauge or probe.
type Last struct {
	Name  string
	Probe bool
	// Seen is false while nothing came yet; the rest is zero then.
	Seen bool
	// Wall is the reading's stamp; Age how old it is.
	Wall int64
	Age  time.Duration
	// MM is a gauge's indication in mm; Celsius and HumidityPercent are a
	// probe's, NaN where it has none.
	MM, Celsius, HumidityPercent float64
	// Shown, Unit and GaugeStatus are what the gauge displayed.
	Shown       float64
	Unit        string
	GaugeStatus string
	// Silent says that it has said nothing for longer than it may.
	Silent bool
}

// Status returns the latest look, at most a quarter of a second old while
// events come. It may be called from any goroutine and waits for nothing; it
// is nil for a recorder that is not live.
func (r *Recorder) Status() *Status { return r.status.Load() }

func (r *Recorder) publish() {
	s := &Status{
		At: device.Instant{Wall: r.wall(), Boot: r.now}, Run: r.run,
		SyncAge: time.Duration(r.now - r.lastSynced), Waiting: r.held, Most: r.o.mostWaiting(),
		Stored: r.stored, Dropped: r.lost,
		ClockSynchronised: r.o.Clock.State().Synchronised, Closed: r.closed,
		Last: make([]Last, len(r.channels)),
	}
	if r.commitError != nil {
		s.Fault = faultText(r.commitError)
	} else if r.eventsError != nil {
		s.Fault = eventsName + ": " + faultText(r.eventsError)
	} else if r.slowTold {
		s.Fault = "the disk is slow"
	}
	s.DiskFree = r.diskFree()
	for i, c := range r.channels {
		s.Last[i] = r.lastOf(i, c)
	}
	r.status.Store(s)
}

// diskFree asks for the free space, every ten seconds at most.
func (r *Recorder) diskFree() int64 {
	if r.o.DiskFree == nil {
		return -1
	}
	if r.freeAsked == 0 || r.now-r.freeAsked >= usualSync {
		r.freeAsked, r.free = r.now, -1
		if free, err := r.o.DiskFree(); err == nil {
			r.free = free
		}
	}
	return r.free
}

func (r *Recorder) lastOf(i int, c *channel) Last {
	l := Last{Name: c.name, Probe: c.probe, Seen: c.seen, Silent: r.silences[i].silent}
	if !c.seen {
		return l
	}
	n := c.memory.at(c.memory.next - 1)
	l.Wall, l.Age = n.wall, time.Duration(max(0, r.now-n.boot))
	if c.probe {
		l.Celsius, l.HumidityPercent = n.mm, n.shown
	} else {
		l.MM, l.Shown, l.Unit = n.mm, n.shown, n.unit
	}
	l.GaugeStatus = n.status
	return l
}
