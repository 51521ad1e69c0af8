package ingest

import (
	"fmt"
	"time"

	"gaugelog/device"
)

// ClockState is what is known of the wall clock at some moment.
type ClockState struct {
	// BootID names the boot of the machine, so that instants of the boot-time
	// clock are compared only within one boot.
	BootID string
	// Synchronised is true where the system says that its wall clock is kept
	// by a time source.
	Synchronised bool
	// MaxError is the system's own bound on the wall clock's error; 0 where unknown.
	MaxError time.Duration
}

// Clock is the seam to the machine's clocks.
type Clock interface {
	// Now reads both clocks as one instant.
	Now() device.Instant
	// State tells whether the wall clock can be believed.
	State() ClockState
}

// SystemClock is the machine's own clock. On Linux the boot-time clock counts
// through suspend and the state comes from the kernel's clock discipline;
// elsewhere the boot-time clock is the process's monotonic clock, the boot id
// changes with every process, and the wall clock never counts as synchronised.
type SystemClock struct{}

// Now reads the clocks twice and takes the wall clock that lies between two
// readings of the boot-time clock, so that a process held up in between gives
// no false clock step. It tries again where those lie more than a millisecond
// apart.
func (SystemClock) Now() device.Instant {
	var clock device.RealClock
	var best device.Instant
	shortest := int64(1<<63 - 1)
	for range 4 {
		before := clock.Now()
		at := clock.Now()
		if took := at.Boot - before.Boot; took < shortest {
			shortest = took
			best = device.Instant{Wall: at.Wall, Boot: before.Boot + took/2}
		}
		if shortest < int64(time.Millisecond) {
			break
		}
	}
	return best
}

// State reads the kernel's view of the wall clock.
func (SystemClock) State() ClockState { return systemClockState() }

// FixedClock is the clock of a virtual run: the conductor sets it to the
// instant of each event before handing that over.
type FixedClock struct {
	At    device.Instant
	Known ClockState
}

// Now returns the instant it was set to.
func (c *FixedClock) Now() device.Instant { return c.At }

// State returns the state it was given.
func (c *FixedClock) State() ClockState { return c.Known }

// Bounds of a believable wall clock: nothing was recorded before the first,
// and stamps beyond the second are no longer 19 digits of nanoseconds.
var (
	earliestWall = time.Date(2020, 1, 1, 0, 0, 0, 0, time.UTC).UnixNano()
	latestWall   = time.Date(2200, 1, 1, 0, 0, 0, 0, time.UTC).UnixNano()
)

// checkMarkTime refuses the time of a mark that cannot be meant: before 2020,
// or more than a day after now where now itself can be believed.
func checkMarkTime(t, now int64) error {
	if t < earliestWall || t > latestWall {
		return fmt.Errorf("time %s cannot be meant: it lies outside the years 2020 to 2200",
			time.Unix(0, t).UTC().Format(time.RFC3339))
	}
	if now >= earliestWall && t > now+int64(24*time.Hour) {
		return fmt.Errorf("time %s lies more than a day in the future",
			time.Unix(0, t).UTC().Format(time.RFC3339))
	}
	return nil
}
