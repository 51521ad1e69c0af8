package main

import (
	"cmp"
	"context"
	"errors"
	"fmt"
	"log/slog"
	"slices"
	"sync"
	"time"

	"golang.org/x/sync/errgroup"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/ingest"
	"gaugelog/simulators"
	"gaugelog/simulators/terminals"
)

// conductor runs a recording in virtual time: real bytes over real
// pseudo-terminals into the real device code, at the simulation's instants.
// It writes a stretch of bytes, waits until the device has dealt with as many
// as were sent, and hands the readings to the recorder in order of instant.
type conductor struct {
	sim     *simulators.Sim
	rig     *config.Rig
	rigText []byte
	dir     *ingest.Dir
	runID   string
	program string
	// progress is told how far the simulation is, in nanoseconds.
	progress func(reached int64)

	terms  *terminals.Bank
	lines  []*simLine
	byPort map[string]*simLine
	clock  *ingest.FixedClock

	mu       sync.Mutex
	readings []device.Reading

	bank    *device.Bank
	running chan error
	rec     *ingest.Recorder
}

// simLine is one port as the conductor sees it.
type simLine struct {
	name    string
	index   int
	gauge   string // who is asked on it; empty for a port that streams
	request []byte

	mu     sync.Mutex
	fresh  bool  // nothing was sent since the present device bank was opened
	base   int64 // bytes sent before that
	frames []simulators.Frame
	reply  []byte // what the next request is answered with
	heard  []byte
}

// longestStretch bounds the bytes written to one port at once: a
// pseudo-terminal takes about 20 kB with nobody reading.
const longestStretch = 4096

// patience is how long an answer may take in real time: virtual time stands
// still meanwhile, and the machine may be busy.
const patience = 30 * time.Second

// conduct records the whole simulation into the run folder.
func (c *conductor) conduct(ctx context.Context) (err error) {
	if err := c.openLines(); err != nil {
		return err
	}
	defer func() { err = errors.Join(err, c.terms.Close()) }()
	start := simInstant(c.sim.Instant(0))
	if err := c.powerUp(ctx, start, c.sim.BootID(0)); err != nil {
		return err
	}
	defer func() { err = errors.Join(err, c.closeBank()) }()
	at := start
	for done := false; !done; {
		st := c.sim.Next(c.sim.End(), longestStretch)
		done = st.Done
		if err := c.play(ctx, st); err != nil {
			return err
		}
		if c.rec != nil {
			at = simInstant(st.At)
			if err := c.rec.Handle(ingest.TickAt(at)); err != nil {
				return err
			}
		}
		for _, e := range st.Events {
			if err := c.happen(ctx, e); err != nil {
				return err
			}
		}
		if c.progress != nil {
			c.progress(st.Reached)
		}
		if err := ctx.Err(); err != nil {
			return err
		}
	}
	if c.rec == nil {
		return nil
	}
	return c.rec.Close(at)
}

// openLines opens the pseudo-terminals and learns who is asked on which.
func (c *conductor) openLines() error {
	var names []string
	c.byPort = map[string]*simLine{}
	for i, p := range c.sim.Ports() {
		l := &simLine{name: p.Name, index: i}
		l.gauge, l.request = askedOn(c.rig, p.Gauges)
		c.lines = append(c.lines, l)
		c.byPort[p.Name] = l
		names = append(names, p.Name)
	}
	terms, err := terminals.Open(names, c.heard)
	c.terms = terms
	return err
}

// askedOn finds the gauge or probe of a port that answers requests.
func askedOn(rig *config.Rig, names []string) (string, []byte) {
	frames := map[string]*config.Frame{}
	for i := range rig.Frames {
		frames[rig.Frames[i].Name] = &rig.Frames[i]
	}
	request := func(name, frame string) []byte {
		if f := frames[frame]; f != nil && f.Request != "" && slices.Contains(names, name) {
			return []byte(f.Request)
		}
		return nil
	}
	for _, g := range rig.Gauges {
		if r := request(g.Name, g.Frame); r != nil {
			return g.Name, r
		}
	}
	for _, p := range rig.Probes {
		if r := request(p.Name, p.Frame); r != nil {
			return p.Name, r
		}
	}
	return "", nil
}

// heard answers a request with the frame that is due.
func (c *conductor) heard(port int, b []byte) {
	l := c.lines[port]
	l.mu.Lock()
	l.heard = append(l.heard, b...)
	var reply []byte
	if len(l.heard) >= len(l.request) && len(l.request) > 0 {
		l.heard, reply, l.reply = l.heard[:0], l.reply, nil
	}
	l.mu.Unlock()
	if len(reply) > 0 {
		// A terminal that takes no more has lost its reader; the question then
		// stays open and Ask says so.
		_ = c.terms.Write(port, reply, time.Second)
	}
}

// play sends one stretch on all ports at once and hands over what came of it.
func (c *conductor) play(ctx context.Context, st *simulators.Stretch) error {
	if c.bank == nil {
		return nil
	}
	group, ctx := errgroup.WithContext(ctx)
	for _, b := range st.Batches {
		l := c.lines[b.Index]
		l.mu.Lock()
		if l.fresh {
			l.fresh, l.base = false, b.Start
		}
		l.frames = b.Frames
		l.mu.Unlock()
		group.Go(func() error {
			if l.gauge != "" {
				return c.answer(ctx, l, b)
			}
			if err := c.terms.Write(b.Index, b.Bytes, 0); err != nil {
				return err
			}
			return c.bank.WaitConsumed(ctx, l.name, b.Start+int64(len(b.Bytes))-l.base)
		})
	}
	if err := group.Wait(); err != nil {
		return fmt.Errorf("conducting the gauges: %w", err)
	}
	return c.deliver()
}

// answer asks for each frame of a batch in turn.
func (c *conductor) answer(ctx context.Context, l *simLine, b simulators.Batch) error {
	for i, f := range b.Frames {
		end := b.Start + int64(len(b.Bytes))
		if i+1 < len(b.Frames) {
			end = b.Frames[i+1].Offset
		}
		l.mu.Lock()
		l.reply = b.Bytes[f.Offset-b.Start : end-b.Start]
		l.mu.Unlock()
		err := c.bank.Ask(ctx, 0, l.gauge)
		if err != nil && !(errors.Is(err, device.ErrRefused) && f.Damaged) {
			return fmt.Errorf("asking %s: %w", l.gauge, err)
		}
		if err := c.bank.WaitConsumed(ctx, l.name, end-l.base); err != nil {
			return err
		}
	}
	return nil
}

// Take collects what the device hands over.
func (c *conductor) Take(r device.Reading) {
	c.mu.Lock()
	c.readings = append(c.readings, r)
	c.mu.Unlock()
}

// deliver hands the collected readings to the recorder in order of instant;
// at equal instants in the order of the ports, so that every run is the same.
func (c *conductor) deliver() error {
	c.mu.Lock()
	batch := c.readings
	c.readings = nil
	c.mu.Unlock()
	slices.SortStableFunc(batch, func(a, b device.Reading) int {
		return cmp.Or(cmp.Compare(a.At.Wall, b.At.Wall), cmp.Compare(c.order(a.Port), c.order(b.Port)))
	})
	for _, r := range batch {
		if err := c.rec.Handle(ingest.Seen(r)); err != nil {
			return err
		}
	}
	c.mu.Lock()
	if c.readings == nil {
		c.readings = batch[:0]
	}
	c.mu.Unlock()
	return nil
}

func (c *conductor) order(port string) int {
	if l := c.byPort[port]; l != nil {
		return l.index
	}
	return -1
}

// Stamp finds the instant at which a frame's first byte was sent.
func (c *conductor) Stamp(port string, offset int64) device.Instant {
	l := c.byPort[port]
	l.mu.Lock()
	defer l.mu.Unlock()
	i, found := slices.BinarySearchFunc(l.frames, offset+l.base, func(f simulators.Frame, at int64) int { return cmp.Compare(f.Offset, at) })
	if !found && i > 0 {
		i--
	}
	if i >= len(l.frames) {
		return c.clock.At // not a byte of any frame: the port's own news
	}
	return simInstant(l.frames[i].At)
}

// Open opens the pseudo-terminal behind a simulated port's name.
func (c *conductor) Open(ctx context.Context, name string, line config.Line) (device.Port, error) {
	for _, t := range c.terms.Terminals() {
		if t.Name == name {
			return device.SystemOpener{}.Open(ctx, t.Path, line)
		}
	}
	return nil, fmt.Errorf("no simulated port is called %s", name)
}

// happen does what the schedule asks for.
func (c *conductor) happen(ctx context.Context, e simulators.Event) error {
	at := simInstant(e.At)
	switch e.Kind {
	case simulators.MarkDue:
		return c.mark(e)
	case simulators.PowerCut:
		// The machine stops where it is: what was not synced is lost, and
		// nothing is closed.
		c.rec = nil
		return c.closeBank()
	case simulators.PowerBack:
		return c.powerUp(ctx, at, e.Boot)
	case simulators.Unplugged:
		return c.terms.Unplug(c.byPort[e.Port].index)
	case simulators.Plugged:
		_, err := c.terms.Plug(c.byPort[e.Port].index)
		return err
	}
	return nil
}

func (c *conductor) mark(e simulators.Event) error {
	at := simInstant(e.At)
	m := ingest.Mark{Time: at.Wall, Step: e.Mark.Step}
	for _, l := range e.Mark.Loads {
		v := ingest.LoadValue{Name: l.Name, Newton: l.Newton, Shown: l.Shown}
		if !l.IsForce {
			kg := l.Kilogram
			v.Kilogram = &kg
		}
		m.Loads = append(m.Loads, v)
	}
	c.clock.At = at
	if _, err := ingest.AppendMark(c.dir.FS(), m, at, c.clock.State()); err != nil {
		return err
	}
	if c.rec == nil {
		return nil
	}
	return c.rec.Handle(ingest.Event{Kind: ingest.MarkSeen, At: at, Mark: m})
}

// powerUp starts the recording programs of one life of the computer.
func (c *conductor) powerUp(ctx context.Context, at device.Instant, boot string) error {
	for _, l := range c.lines {
		l.fresh = true
		l.frames, l.heard, l.reply = nil, nil, nil
	}
	c.clock = &ingest.FixedClock{At: at, Known: ingest.ClockState{BootID: boot, Synchronised: true}}
	rec, err := ingest.Open(ingest.Options{
		FS: c.dir.FS(), Rig: c.rig, RigBytes: c.rigText, Run: c.runID, Program: c.program,
		Clock: c.clock, Start: at, Compress: true,
	})
	if err != nil {
		return err
	}
	bank, err := device.Open(device.Options{
		Rigs: []*config.Rig{c.rig}, Opener: c, Stamper: c, Sink: c, Conducted: true, Patience: patience,
		Logger: slog.New(slog.DiscardHandler),
	})
	if err != nil {
		return err
	}
	c.rec, c.bank, c.running = rec, bank, make(chan error, 1)
	go func() { c.running <- bank.Run(ctx) }()
	select {
	case <-bank.Tried():
	case <-ctx.Done():
	}
	return nil
}

// closeBank ends the device code and waits for it.
func (c *conductor) closeBank() error {
	if c.bank == nil {
		return nil
	}
	err := c.bank.Close()
	runErr := <-c.running
	c.bank = nil
	c.mu.Lock()
	c.readings = nil
	c.mu.Unlock()
	return errors.Join(err, runErr)
}

func simInstant(i simulators.Instant) device.Instant {
	return device.Instant{Wall: i.Wall, Boot: i.Boot}
}
