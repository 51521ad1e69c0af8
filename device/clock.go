package device

import "time"

// RealClock is the [Stamper] of real time: the wall clock and the boot-time
// clock, read when the bytes of a frame arrive.
type RealClock struct{}

// Stamp returns the present instant, whatever the port and offset.
func (c RealClock) Stamp(string, int64) Instant { return c.Now() }

// Now returns the present instant.
func (RealClock) Now() Instant {
	return Instant{Wall: time.Now().UnixNano(), Boot: bootTime()}
}

// liveStamper is a Stamper that knows only the present. The pump then asks it
// when bytes arrive and remembers, so that a frame which arrives in pieces
// still gets the instant of its first byte.
type liveStamper interface {
	Stamper
	Now() Instant
}

// arrivals remembers when the last chunks of bytes came.
type arrivals struct {
	ring [64]arrival
	next int
}

type arrival struct {
	offset int64
	at     Instant
}

func (a *arrivals) add(offset int64, at Instant) {
	a.ring[a.next%len(a.ring)] = arrival{offset, at}
	a.next++
}

// at returns when the byte at offset came; of one older than the ring, when
// the oldest remembered chunk came.
func (a *arrivals) at(offset int64) Instant {
	var at Instant
	for i := a.next - 1; i >= max(0, a.next-len(a.ring)); i-- {
		e := &a.ring[i%len(a.ring)]
		at = e.at
		if e.offset <= offset {
			break
		}
	}
	return at
}
