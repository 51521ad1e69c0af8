package device

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"slices"
	"sync/atomic"
	"time"

	"github.com/cenkalti/backoff/v5"

	"gaugelog/device/frame"
)

// slot is one decoder on a port and the instruments it may hear.
type slot struct {
	decoder frame.Decoder
	senders []*instrument
	asked   *instrument // nil: they send unasked
	gaps    bool        // an idle gap ends a frame
	emit    func(*frame.Frame)
	// identity is asked for before the first question after each opening;
	// nil: it is not.
	identity *identityCheck
}

// pump owns one port: it opens it, reads it, asks on it and opens it again,
// until its context ends. All its fields but the atomic ones belong to its
// own goroutine.
type pump struct {
	o     *Options
	plan  *portPlan
	log   *slog.Logger
	live  liveStamper // nil in virtual time
	slots []*slot
	asks  chan ask
	gaps  gaps

	received int64 // bytes since first opened
	arrived  arrivals
	lost     bool
	lostAt   Instant
	refusals refusals
	lastGood time.Time
	deafs    int
	poll     poll
	echo     echo

	consumed                         meter
	open, answering                  atomic.Bool
	frames, refused, echoes, reopens atomic.Int64
	lastWall, lastBoot               atomic.Int64
	stuck, asking                    atomic.Int64 // asking: how many wait in ask
}

// ask is a request of the conductor; done takes one result and has room for it.
type ask struct {
	in   *instrument
	done chan error
}

func newPump(o *Options, plan *portPlan) (*pump, error) {
	slots, err := plan.slotsOf()
	if err != nil {
		return nil, err
	}
	p := &pump{o: o, plan: plan, slots: slots, asks: make(chan ask), log: o.Logger.With("port", plan.name)}
	p.gaps = gapsOf(plan, slots)
	p.live, _ = o.Stamper.(liveStamper)
	for _, s := range slots {
		s.emit = func(f *frame.Frame) { p.take(s, f) }
		if s.identity != nil {
			s.identity.emit = func(f *frame.Frame) { p.identify(s, f) }
		}
	}
	return p, nil
}

// run is the pump's goroutine. tried is called once the port was tried.
func (p *pump) run(ctx context.Context, tried func()) {
	defer tried()
	pause := &backoff.ExponentialBackOff{
		InitialInterval: p.o.Backoff.First, MaxInterval: p.o.Backoff.Longest,
		Multiplier: 2, RandomizationFactor: p.o.Backoff.Jitter,
	}
	pause.Reset()
	for first := true; ctx.Err() == nil; {
		port, err := p.o.Opener.Open(ctx, p.plan.name, p.plan.line)
		if err == nil {
			if !first {
				p.reopens.Add(1)
			}
			first = false
			before := p.frames.Load()
			err = p.session(ctx, port, tried)
			if p.frames.Load() > before {
				pause.Reset()
			}
		}
		if ctx.Err() != nil {
			break
		}
		p.lose(err)
		tried()
		p.rest(ctx, pause.NextBackOff())
	}
	p.refusals.flush(p, p.now())
}

// rest pauses between attempts; whoever asks meanwhile is told that the port
// is not open.
func (p *pump) rest(ctx context.Context, d time.Duration) {
	timer := time.NewTimer(d)
	defer timer.Stop()
	for {
		select {
		case <-timer.C:
			return
		case a := <-p.asks:
			a.done <- ErrUnplugged
		case done := <-p.gaps.settles:
			close(done)
		case <-ctx.Done():
			return
		}
	}
}

// lose records the loss of the port, once until it is back.
func (p *pump) lose(err error) {
	p.answering.Store(false)
	if p.lost {
		p.log.Debug("port still not usable", "error", err)
		return
	}
	p.lost, p.lostAt = true, p.now()
	p.log.Warn("port lost", "error", err)
	p.events(Reading{Kind: PortLost, At: p.lostAt, Detail: err.Error(), Deaf: errors.Is(err, errDeaf)})
}

// regain records, once a gauge has answered in its own frame, that the port is
// back.
func (p *pump) regain(at Instant) {
	if !p.lost {
		return
	}
	p.lost = false
	gap := time.Duration(at.Boot - p.lostAt.Boot)
	p.log.Info("port back", "gap", gap)
	p.events(Reading{Kind: PortBack, At: at, Detail: fmt.Sprintf("gap %.3f s", gap.Seconds())})
}

// events hands an event of the port to every rig that uses it.
func (p *pump) events(r Reading) {
	r.Port = p.plan.name
	for _, rig := range p.plan.rigs {
		r.Rig = rig
		p.o.Sink.Take(r)
	}
}

// now is the instant of the next byte to come.
func (p *pump) now() Instant { return p.o.Stamper.Stamp(p.plan.name, p.received) }

// at is the instant of the byte at the offset.
func (p *pump) at(offset int64) Instant {
	if p.live != nil {
		return p.arrived.at(offset)
	}
	return p.o.Stamper.Stamp(p.plan.name, offset)
}

// ask hands a request of the conductor to the pump and waits for the result.
func (p *pump) ask(ctx context.Context, in *instrument) error {
	p.asking.Add(1)
	defer p.asking.Add(-1)
	a := ask{in, make(chan error, 1)}
	select {
	case p.asks <- a:
	case <-ctx.Done():
		return ctx.Err()
	}
	select {
	case err := <-a.done:
		return err
	case <-ctx.Done():
		return ctx.Err()
	}
}

// closePort closes in a goroutine of its own: a driver may wait for its output
// to drain, for ever if the line is stuck.
func (p *pump) closePort(port Port, reader <-chan struct{}) {
	p.open.Store(false)
	closed := make(chan struct{})
	go func() {
		defer close(closed)
		if err := port.Close(); err != nil {
			p.log.Debug("closing the port", "error", err)
		}
	}()
	limit := time.NewTimer(p.o.CloseWithin)
	defer limit.Stop()
	for _, ended := range []<-chan struct{}{closed, reader} {
		select {
		case <-ended:
		case <-limit.C:
			p.stuck.Add(1)
			p.log.Error("the port does not close; it is left behind", "after", p.o.CloseWithin)
			go func() { <-closed; <-reader; p.stuck.Add(-1) }()
			return
		}
	}
}

func (p *pump) stats() PortStats {
	s := PortStats{
		Port: p.plan.name, Open: p.open.Load(), Answering: p.answering.Load(),
		Bytes: p.consumed.n.Load(), Frames: p.frames.Load(), Refused: p.refused.Load(),
		Echoes: p.echoes.Load(), Reconnects: p.reopens.Load(),
		LastFrame: Instant{Wall: p.lastWall.Load(), Boot: p.lastBoot.Load()},
	}
	for _, in := range p.plan.instruments {
		for _, t := range in.targets {
			if name := t.gauge + t.probe; !slices.Contains(s.Instruments, name) {
				s.Instruments = append(s.Instruments, name)
			}
		}
	}
	return s
}

// errDeaf ends a session in which nothing that counts was heard for too long.
var errDeaf = errors.New("the port is open, but no frame that counts came")
