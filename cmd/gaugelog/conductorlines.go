package main

import (
	"bytes"
	"cmp"
	"context"
	"errors"
	"fmt"
	"slices"
	"sync"
	"time"

	"golang.org/x/sync/errgroup"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/simulators"
	"gaugelog/simulators/wire"
)

// simLine is one port as the conductor sees it.
type simLine struct {
	name  string
	index int
	rigs  []int // that use it
	// asked are the instruments on it that wait for a request, by name.
	asked map[string]*answerer

	mu     sync.Mutex
	fresh  bool  // nothing was sent since the present device bank was opened
	base   int64 // bytes sent before that, less those that are in no batch
	frames []simulators.Frame
	end    int64     // offset behind the batch that is being sent
	now    *answerer // who is asked
	reply  []byte    // what the request is answered with
	heard  []byte
	// answered tells of a request that was heard and dealt with.
	answered chan struct{}
}

// answerer is an instrument that waits for a request.
type answerer struct {
	name    string
	rig     int // whoever asks for it
	encoder wire.Encoder
}

// openLines opens the pseudo-terminals and learns who is asked on which.
func (c *conductor) openLines() error {
	var names []string
	c.byPort = map[string]*simLine{}
	for i, p := range c.source.Ports() {
		l := &simLine{name: p.Name, index: i, asked: map[string]*answerer{}, answered: make(chan struct{}, 1)}
		for rig, run := range c.runs {
			if err := l.learn(rig, run.rig); err != nil {
				return err
			}
		}
		c.lines = append(c.lines, l)
		c.byPort[p.Name] = l
		names = append(names, p.Name)
	}
	open := c.ports
	if open == nil {
		open = openTerminals
	}
	terms, err := open(names, c.heard)
	c.terms = terms
	return err
}

// learn finds what a rig has on the port, and who of it is asked.
func (l *simLine) learn(rig int, r *config.Rig) error {
	for _, g := range r.Gauges {
		// Only the request and the identity are wanted, so any digits will do.
		in := wire.Instrument{Channel: g.Channel, Resolution: 0.001}
		if err := l.add(rig, r, g.Name, g.Port, g.Frame, in); err != nil {
			return err
		}
	}
	for _, p := range r.Probes {
		in := wire.Instrument{Channel: p.Channel, Temperature: p.Temperature, Humidity: p.Humidity}
		if err := l.add(rig, r, p.Name, p.Port, p.Frame, in); err != nil {
			return err
		}
	}
	return nil
}

func (l *simLine) add(rig int, r *config.Rig, name, port, frame string, in wire.Instrument) error {
	f, known := r.FrameOf(frame)
	if port != l.name || !known {
		return nil
	}
	if !slices.Contains(l.rigs, rig) {
		l.rigs = append(l.rigs, rig)
	}
	if l.asked[name] != nil || f.Request == "" && f.Modbus == nil && f.SCPI == nil {
		return nil
	}
	e, err := wire.New(&f, in)
	if err == nil {
		l.asked[name] = &answerer{name, rig, e}
	}
	return err
}

// forget starts the line anew for a new life of the computer.
func (l *simLine) forget() {
	l.mu.Lock()
	defer l.mu.Unlock()
	l.fresh = true
	l.frames, l.heard, l.reply = nil, nil, nil
}

// wants says what the bytes heard ask of an instrument, and how many they are;
// 0 while the request is not whole.
func (a *answerer) wants(heard []byte) (wire.Question, int) {
	talker, ok := a.encoder.(wire.Talker)
	if !ok {
		if n := len(a.encoder.Request()); len(heard) >= n {
			return wire.AskedValue, n
		}
		return 0, 0
	}
	end := bytes.IndexAny(heard, "\r\n")
	if end < 0 {
		return 0, 0
	}
	return talker.Understands(heard[:end]), end + 1
}

// heard answers a request with the frame that is due.
func (c *conductor) heard(port int, b []byte) {
	l := c.lines[port]
	l.mu.Lock()
	l.heard = append(l.heard, b...)
	var reply []byte
	valued := false
	if l.now != nil {
		switch asked, n := l.now.wants(l.heard); {
		case n == 0:
		case asked == wire.AskedIdentity:
			reply = l.now.encoder.(wire.Talker).AppendIdentity(nil)
			l.base -= int64(len(reply)) // no batch holds these bytes
			l.heard = l.heard[:0]
		default:
			l.heard, reply, l.reply = l.heard[:0], l.reply, nil
			valued = true
		}
	}
	l.mu.Unlock()
	if len(reply) > 0 {
		// A terminal that takes no more has lost its reader; the question then
		// stays open and Ask says so.
		_ = c.terms.Write(port, reply, time.Second)
	}
	if valued {
		select {
		case l.answered <- struct{}{}:
		default:
		}
	}
}

// play sends one stretch on all ports at once and hands over what came of it.
func (c *conductor) play(ctx context.Context, st *simulators.Stretch) error {
	if !c.powered() {
		return nil
	}
	group, ctx := errgroup.WithContext(ctx)
	for _, b := range st.Batches {
		l := c.lines[b.Index]
		l.mu.Lock()
		if l.fresh {
			l.fresh, l.base = false, b.Start
		}
		l.frames, l.end = b.Frames, b.Start+int64(len(b.Bytes))
		l.mu.Unlock()
		group.Go(func() error {
			if len(l.asked) > 0 {
				return c.converse(ctx, l, b)
			}
			return c.say(ctx, l, b.Bytes, l.end)
		})
	}
	if err := group.Wait(); err != nil {
		return fmt.Errorf("conducting the gauges: %w", err)
	}
	return c.deliver()
}

// say sends bytes unasked and waits until they are dealt with; end is the
// offset behind them.
func (c *conductor) say(ctx context.Context, l *simLine, b []byte, end int64) error {
	if err := c.terms.Write(l.index, b, 0); err != nil {
		return err
	}
	return c.bank.WaitConsumed(ctx, l.name, end-l.start())
}

func (l *simLine) start() int64 {
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.base
}

// converse plays a batch of a port on which somebody is asked, frame by frame.
func (c *conductor) converse(ctx context.Context, l *simLine, b simulators.Batch) error {
	from := int64(0)
	for i := range b.Frames {
		f := &b.Frames[i]
		to := int64(len(b.Bytes))
		if i+1 < len(b.Frames) {
			next := &b.Frames[i+1]
			to = next.Offset - int64(next.Lead) - b.Start
		}
		var err error
		if a := l.asked[f.Name]; a != nil {
			err = c.answer(ctx, l, a, f, b.Bytes[from:to], b.Start+to)
		} else {
			err = c.say(ctx, l, b.Bytes[from:to], b.Start+to)
		}
		if err != nil {
			return err
		}
		from = to
	}
	return nil
}

// answer has an instrument asked for one frame; end is the offset behind it.
//
// A doubtful frame with nothing before it is an answer that came too late: its
// question stays open, and it comes when nobody waits for it any more.
func (c *conductor) answer(ctx context.Context, l *simLine, a *answerer, f *simulators.Frame, reply []byte, end int64) error {
	late := f.Doubtful && f.Lead == 0
	l.mu.Lock()
	// A copy: the simulation writes its next bytes into the same memory, and
	// only the terminal knows that it is done with these.
	l.now, l.reply = a, slices.Clone(reply)
	if late {
		l.reply = nil
	}
	l.mu.Unlock()
	select {
	case <-l.answered: // of the question before
	default:
	}
	if f.Intact() && f.Lead == 0 {
		if err := c.bank.Ask(ctx, a.rig, a.name); err != nil {
			return fmt.Errorf("asking %s: %w", a.name, err)
		}
		return c.bank.WaitConsumed(ctx, l.name, end-l.start())
	}
	sent := end
	if late {
		sent -= int64(len(reply))
	}
	err := c.question(ctx, l, a, sent)
	if err != nil && !(f.Damaged || f.Doubtful) || !answerable(err) {
		return fmt.Errorf("asking %s: %w", a.name, err)
	}
	if late {
		return c.say(ctx, l, reply, end)
	}
	return nil
}

// answerable tells whether an answer that is not intact may end so.
func answerable(err error) bool {
	return err == nil || errors.Is(err, device.ErrRefused) || errors.Is(err, device.ErrQuiet)
}

// question asks where the answer may be none: once all of it is dealt with the
// line is quiet, and the question ends.
func (c *conductor) question(ctx context.Context, l *simLine, a *answerer, end int64) error {
	done := make(chan error, 1)
	go func() { done <- c.bank.Ask(ctx, a.rig, a.name) }()
	select {
	case <-l.answered:
	case err := <-done:
		if err == nil || errors.Is(err, device.ErrRefused) {
			// It is over before the whole of it was sent.
			err = errors.Join(err, c.bank.WaitConsumed(ctx, l.name, end-l.start()))
		}
		return err
	}
	if err := c.bank.WaitConsumed(ctx, l.name, end-l.start()); err != nil {
		return errors.Join(err, <-done)
	}
	return <-done
}

// Stamp finds the instant at which a frame's first byte was sent.
func (c *conductor) Stamp(port string, offset int64) device.Instant {
	l := c.byPort[port]
	l.mu.Lock()
	defer l.mu.Unlock()
	offset += l.base
	i, found := slices.BinarySearchFunc(l.frames, offset, func(f simulators.Frame, at int64) int {
		return cmp.Compare(f.Offset-int64(f.Lead), at)
	})
	if !found && i > 0 {
		i--
	}
	if i >= len(l.frames) || offset >= l.end {
		// Not a byte of any frame: the port's own news.
		c.mu.Lock()
		defer c.mu.Unlock()
		return c.present
	}
	return c.instant(l.frames[i].At)
}
