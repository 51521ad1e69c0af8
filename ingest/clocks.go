package ingest

import (
	"fmt"
	"math"
	"time"

	"gaugelog/device"
	"gaugelog/ingest/segment"
)

// advance moves the present to the instant, and notices a stepped wall clock.
func (r *Recorder) advance(at device.Instant) {
	r.now = max(r.now, at.Boot)
	moved := at.Wall - at.Boot - r.offset
	if -stepAfter <= moved && moved <= stepAfter {
		return
	}
	if r.o.Live {
		// The two clocks of a reading are read one after the other; only a
		// second, guarded look tells a step from a process that was held up.
		seen := r.o.Clock.Now()
		moved = seen.Wall - seen.Boot - r.offset
		if -stepAfter <= moved && moved <= stepAfter {
			return
		}
	}
	r.stepped(moved)
}

// stepped goes over to the new wall clock. What was stamped by the old one is
// cut off under a checkpoint of its own, so that a reader can tell the two
// apart; where the clock went back, stamps start afresh in a new segment.
func (r *Recorder) stepped(by int64) {
	old := r.wall()
	r.tellSpells(true)
	if by < 0 {
		r.filling.roll = true
	}
	// Not cut: that would say of stamps by the old clock that it had been set.
	r.endBatch()
	r.offset += by
	if !r.set && r.policy.changedAt < r.o.Start.Boot {
		// A change of before this recording is known by its wall clock alone.
		r.policy.changedAt -= by
	}
	for _, c := range r.channels {
		c.memory.rebase(by)
		if by < 0 {
			c.lastWall = math.MinInt64
		}
	}
	detail := fmt.Sprintf("the wall clock was stepped by %+.3f s", float64(by)/1e9)
	if r.believe(); r.set && r.gapFrom != 0 {
		d := time.Duration(r.o.Start.Boot + r.offset - r.gapFrom)
		detail += fmt.Sprintf("; so nothing had been recorded for %s before this recording began", d.Round(time.Millisecond))
		r.gapFrom = 0
	}
	r.happened(Happening{Kind: ClockStepped, From: old, Detail: detail})
	r.send()
}

// believe looks whether the wall clock has been set since this boot; once it
// was, it stays so. The first checkpoint that says so puts right all stamps of
// the boot made before it, so it must not carry a wall clock of before the setting:
// where that happened since the last event, it counts from the step on.
func (r *Recorder) believe() {
	if r.set || !r.o.Clock.State().Synchronised {
		return
	}
	if r.o.Live {
		seen := r.o.Clock.Now()
		if moved := seen.Wall - seen.Boot - r.offset; moved < -stepAfter || moved > stepAfter {
			return
		}
	}
	r.set = true
}

// clockState is the state of the clocks as a checkpoint carries it.
func (r *Recorder) clockState() segment.ClockState {
	return segment.ClockState{Boot: r.now, Wall: r.wall(), Synced: r.set}
}
