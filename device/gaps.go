package device

import (
	"context"
	"time"
)

// idleGap ends an unfinished frame of the kinds without terminator. It is
// longer than the 16 ms for which a USB bridge may hold bytes back.
const idleGap = 50 * time.Millisecond

// gaps knows when a line is quiet: really by time, in virtual time by the
// instants of the bytes and by the conductor's word.
type gaps struct {
	any  bool          // some decoder of the port needs to know
	idle time.Duration // the shortest silence that ends a frame
	char time.Duration // how long one byte takes on the line

	settles chan chan struct{}
	since   int64 // virtual time: offset and instant of the last byte sent apart
	at      int64
}

// gapsOf allows for slow lines: a gap is at least five characters long (a
// start bit, eight data bits, parity and stop make eleven bits).
func gapsOf(plan *portPlan, slots []*slot) gaps {
	g := gaps{idle: idleGap, settles: make(chan chan struct{})}
	if plan.line.Baud > 0 {
		g.char = 11 * time.Second / time.Duration(plan.line.Baud)
	}
	g.idle = max(g.idle, 5*g.char)
	for _, s := range slots {
		g.any = g.any || s.gaps
	}
	return g
}

func (g *gaps) begin() { g.since, g.at = -1, 0 }

// settle tells the pump that the line is quiet now, and waits until it has
// dealt with that; done is closed when no pump runs any more. asking tells
// that a question may be open.
func (g *gaps) settle(ctx context.Context, done <-chan struct{}, asking bool) error {
	if !g.any && !asking {
		return nil
	}
	dealt := make(chan struct{})
	select {
	case g.settles <- dealt:
	case <-done:
		return nil
	case <-ctx.Done():
		return ctx.Err()
	}
	<-dealt
	return nil
}

// quiet ends what is unfinished on every decoder that frames by gaps.
func (p *pump) quiet() {
	for _, s := range p.slots {
		if s.gaps && s.decoder.Pending() > 0 {
			s.decoder.Quiet(s.emit)
		}
	}
}

// feedBetweenGaps feeds bytes of virtual time: it makes the gaps that lie
// between the instants of the frames sent, and ends an answer that is whole,
// since nothing else is on the line of an asked instrument.
func (p *pump) feedBetweenGaps(b []byte) {
	g := &p.gaps
	from := 0
	for i := range b {
		at := p.o.Stamper.Stamp(p.plan.name, p.received+int64(i-from)).Boot
		if g.since >= 0 && at == g.at {
			continue
		}
		offset := p.received + int64(i-from)
		apart := time.Duration(at-g.at) - time.Duration(offset-g.since)*g.char
		if g.since >= 0 && apart >= g.idle {
			p.feed(b[from:i])
			p.quiet()
			from = i
		}
		g.since, g.at = offset, at
	}
	p.feed(b[from:])
	for _, s := range p.slots {
		if s.asked != nil && p.poll.expects(s.asked) && s.gaps && s.decoder.Whole() {
			s.decoder.Quiet(s.emit)
		}
	}
}
