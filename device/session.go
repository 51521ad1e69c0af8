package device

import (
	"context"
	"errors"
	"fmt"
	"time"
)

// chunk is what one Read gave.
type chunk struct {
	p   []byte
	err error
}

// listener is the one goroutine that reads an open port. Two buffers change
// hands between it and the pump, so nothing is copied or allocated.
type listener struct {
	chunks chan chunk
	free   chan []byte
	quit   chan struct{}
	ended  chan struct{}
}

func listen(port Port) *listener {
	l := &listener{
		chunks: make(chan chunk), free: make(chan []byte, 2),
		quit: make(chan struct{}), ended: make(chan struct{}),
	}
	l.free <- make([]byte, 4096)
	l.free <- make([]byte, 4096)
	go l.run(port)
	return l
}

func (l *listener) run(port Port) {
	defer close(l.ended)
	for {
		var buf []byte
		select {
		case buf = <-l.free:
		case <-l.quit:
			return
		}
		n, err := 0, ErrQuiet
		for n == 0 && errors.Is(err, ErrQuiet) {
			select {
			case <-l.quit:
				return
			default:
			}
			n, err = port.Read(buf)
			if n == 0 && err == nil {
				err = ErrQuiet // a Port must not do that; never spin on it
			}
		}
		if errors.Is(err, ErrQuiet) {
			err = nil
		}
		select {
		case l.chunks <- chunk{buf[:n], err}:
		case <-l.quit:
			return
		}
		if err != nil {
			return
		}
	}
}

// housekeeping is how often a session looks at what no byte announces.
const housekeeping = time.Second

// session reads and asks on one open port until it is lost (the error says
// how) or the context ends (nil). The port is closed when it returns.
func (p *pump) session(ctx context.Context, port Port, tried func()) error {
	l := listen(port)
	w := p.write(port)
	defer func() {
		close(l.quit)
		close(w.quit)
		p.poll.abort(ErrUnplugged)
		p.closePort(port, l.ended)
	}()
	p.begin()
	tried()
	timer := time.NewTimer(time.Hour)
	defer timer.Stop()
	for {
		p.arm(timer)
		select {
		case c := <-l.chunks:
			p.bytes(c.p)
			if c.err != nil {
				return c.err
			}
			l.free <- c.p[:cap(c.p)]
		case <-timer.C:
			if err := p.tick(time.Now(), w); err != nil {
				return err
			}
		case a := <-p.asks:
			p.poll.queue = append(p.poll.queue, a)
			p.poll.next(p, time.Now(), w)
		case done := <-p.gaps.settles:
			p.poll.silence(p)
			p.quiet()
			p.poll.close()
			p.poll.next(p, time.Now(), w)
			close(done)
		case err := <-w.wrote:
			if err != nil {
				return fmt.Errorf("asking on the port: %w", err)
			}
			p.poll.written(time.Now())
		case <-ctx.Done():
			return nil
		}
	}
}

// begin starts a session with nothing half-read and nothing asked.
func (p *pump) begin() {
	p.open.Store(true)
	now := time.Now()
	p.lastGood = now
	for _, s := range p.slots {
		s.reset(p.received)
		if s.identity != nil {
			s.identity.known = false
		}
	}
	p.gaps.begin()
	p.echo = echo{}
	p.poll.begin(p, now)
}

// arm sets the timer to the next moment at which something is due.
func (p *pump) arm(timer *time.Timer) {
	due := p.poll.due(p)
	if !p.o.Conducted {
		if check := p.poll.lastTick.Add(housekeeping); due.IsZero() || check.Before(due) {
			due = check
		}
		for _, s := range p.slots {
			if s.gaps && s.decoder.Pending() > 0 {
				if gap := p.poll.lastBytes.Add(p.gaps.idle); gap.Before(due) {
					due = gap
				}
			}
		}
	}
	if due.IsZero() {
		due = time.Now().Add(time.Hour)
	}
	if due != p.poll.armed {
		p.poll.armed = due
		timer.Reset(max(time.Until(due), 0))
	}
}

// tick does what is due at now.
func (p *pump) tick(now time.Time, w *writer) error {
	p.poll.armed = time.Time{}
	if !p.o.Conducted && now.Sub(p.poll.lastBytes) >= p.gaps.idle {
		p.quiet()
	}
	if err := p.poll.tick(p, now, w); err != nil {
		return err
	}
	if p.o.Conducted || now.Sub(p.poll.lastTick) < housekeeping {
		return nil
	}
	p.poll.lastTick = now
	p.refusals.due(p, p.now())
	if limit := p.deafAfter(); limit > 0 && now.Sub(p.lastGood) >= limit {
		p.deafs++
		return fmt.Errorf("%w for %v", errDeaf, limit)
	}
	return nil
}

// deafAfter is the silence after which the port is opened anew; 0: never.
func (p *pump) deafAfter() time.Duration {
	limit, sends := time.Duration(0), false
	for _, in := range p.plan.instruments {
		if in.button && !in.asked() || in.silent < 0 {
			continue
		}
		sends = true
		if in.silent > 0 {
			limit = max(limit, 3*in.silent)
		}
	}
	if !sends || p.o.DeafAfter < 0 {
		return 0
	}
	if limit == 0 {
		limit = p.o.DeafAfter
	}
	const longest = 10 * time.Minute
	for range min(p.deafs, 16) {
		if limit < longest {
			limit = min(2*limit, longest)
		}
	}
	return limit
}

// bytes deals with what arrived, whole, before it counts as consumed.
func (p *pump) bytes(b []byte) {
	if len(b) == 0 {
		return
	}
	if p.live != nil {
		p.arrived.add(p.received, p.live.Now())
	}
	if !p.o.Conducted {
		p.poll.lastBytes = time.Now()
	}
	rest := p.echo.strip(p, b)
	if p.o.Conducted && p.gaps.any {
		p.feedBetweenGaps(rest)
	} else {
		p.feed(rest)
	}
	p.consumed.add(len(b))
}

// feed gives bytes to every decoder that listens. Several decoders take turns
// byte by byte, so that their frames come out in the order they ended.
func (p *pump) feed(b []byte) {
	one := p.listening()
	if one != nil {
		p.received += int64(len(b))
		one.feed(b)
		return
	}
	for i := range b {
		p.received++
		for _, s := range p.slots {
			if s.asked == nil || s.asked == p.poll.last {
				s.feed(b[i : i+1])
			}
		}
	}
}

// listening returns the only decoder that listens, nil if several do.
func (p *pump) listening() *slot {
	var one *slot
	n := 0
	for _, s := range p.slots {
		if s.asked == nil || s.asked == p.poll.last {
			one = s
			n++
		}
	}
	if n == 1 {
		return one
	}
	return nil
}
