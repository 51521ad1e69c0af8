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

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/ingest"
	"gaugelog/simulators"
	"gaugelog/simulators/terminals"
)

// conductor runs a recording in virtual time: real bytes over real
// pseudo-terminals into the real device code, at the simulation's instants.
// It writes a stretch of bytes, waits until the device has dealt with as many
// as were sent, and hands the readings to the recorders in order of instant.
// Several rigs are recorded at once, a run each, as one computer does that has
// one pool of ports.
type conductor struct {
	source simulators.Source
	// computer is a simulation of the source whose clock and lives are those
	// of the one computer that records all rigs.
	computer *simulators.Sim
	runs     []*conductedRun
	// progress is told how far the simulation is, in nanoseconds; may be nil.
	progress func(reached int64)

	terms  *terminals.Bank
	lines  []*simLine
	byPort map[string]*simLine
	clock  *ingest.FixedClock

	mu       sync.Mutex
	present  device.Instant // of the last event of the schedule
	readings []device.Reading
	news     chan struct{} // something was taken that has to do with a port

	bank    *device.Bank
	running chan error
}

// conductedRun is one rig and the run folder it is recorded into.
type conductedRun struct {
	rig     *config.Rig
	rigText []byte
	dir     *ingest.Dir
	runID   string

	rec *ingest.Recorder // nil while the computer is without power
}

// longestStretch bounds the bytes written to one port at once: a
// pseudo-terminal takes about 20 kB with nobody reading.
const longestStretch = 4096

// patience is how long an answer may take in real time: virtual time stands
// still meanwhile, and the machine may be busy.
const patience = 30 * time.Second

// conduct records the whole simulation into the run folders.
func (c *conductor) conduct(ctx context.Context) (err error) {
	c.news = make(chan struct{}, 1)
	if err := c.openLines(); err != nil {
		return err
	}
	defer func() { err = errors.Join(err, c.terms.Close()) }()
	at := simInstant(c.computer.Instant(0))
	if err := c.powerUp(ctx, at, c.computer.BootID(0)); err != nil {
		return err
	}
	defer func() { err = errors.Join(err, c.closeBank()) }()
	for done := false; !done; {
		st := c.source.Next(c.source.End(), longestStretch)
		done = st.Done
		if err := c.play(ctx, st); err != nil {
			return err
		}
		if c.powered() {
			at = simInstant(st.At)
			if err := c.tick(at); err != nil {
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
	return c.end(at)
}

// powered tells whether the recording computer runs.
func (c *conductor) powered() bool { return c.bank != nil }

func (c *conductor) tick(at device.Instant) error {
	for _, run := range c.runs {
		if err := run.rec.Handle(ingest.TickAt(at)); err != nil {
			return err
		}
	}
	return nil
}

// end closes the ports before the recorders, so that what the device still has
// to tell is recorded too.
func (c *conductor) end(at device.Instant) error {
	if !c.powered() {
		return nil
	}
	c.setPresent(at)
	errs := []error{c.closePorts(), c.deliver()}
	for _, run := range c.runs {
		errs = append(errs, run.rec.Close(at))
	}
	return errors.Join(errs...)
}

// Take collects what the device hands over.
func (c *conductor) Take(r device.Reading) {
	c.mu.Lock()
	c.readings = append(c.readings, r)
	c.mu.Unlock()
	if r.Kind == device.PortLost {
		select {
		case c.news <- struct{}{}:
		default:
		}
	}
}

// deliver hands the collected readings to the recorders in order of instant;
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
		if err := c.runs[r.Rig].rec.Handle(ingest.Seen(r)); err != nil {
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

// happen does what the schedule asks for.
func (c *conductor) happen(ctx context.Context, e simulators.Event) error {
	at := simInstant(e.At)
	c.setPresent(at)
	switch e.Kind {
	case simulators.MarkDue:
		return c.mark(e)
	case simulators.PowerCut:
		// The machine stops where it is: what was not synced is lost, and
		// nothing is closed.
		for _, run := range c.runs {
			run.rec = nil
		}
		return c.closeBank()
	case simulators.PowerBack:
		return c.powerUp(ctx, at, e.Boot)
	case simulators.Unplugged:
		return c.unplug(ctx, c.byPort[e.Port])
	case simulators.Plugged:
		return c.plug(ctx, c.byPort[e.Port])
	}
	return nil
}

func (c *conductor) setPresent(at device.Instant) {
	c.mu.Lock()
	c.present = at
	c.mu.Unlock()
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
	run := c.runs[e.Rig]
	c.clock.At = at
	if _, err := ingest.AppendMark(run.dir.FS(), m, at, c.clock.State()); err != nil {
		return err
	}
	if run.rec == nil {
		return nil
	}
	return run.rec.Handle(ingest.Event{Kind: ingest.MarkSeen, At: at, Mark: m})
}

// powerUp starts the recording programs of one life of the computer.
func (c *conductor) powerUp(ctx context.Context, at device.Instant, boot string) error {
	for _, l := range c.lines {
		l.forget()
	}
	c.setPresent(at)
	c.clock = &ingest.FixedClock{At: at, Known: ingest.ClockState{BootID: boot, Synchronised: true}}
	var rigs []*config.Rig
	for _, run := range c.runs {
		rec, err := ingest.Open(ingest.Options{
			FS: run.dir.FS(), Rig: run.rig, RigBytes: run.rigText, Run: run.runID,
			Clock: c.clock, Start: at, Compress: true,
		})
		if err != nil {
			return err
		}
		run.rec = rec
		rigs = append(rigs, run.rig)
	}
	bank, err := device.Open(device.Options{
		Rigs: rigs, Opener: c, Stamper: c, Sink: c, Conducted: true, Patience: patience,
		// Virtual time stands still while a port is looked for.
		Backoff: device.Backoff{First: time.Millisecond, Longest: 5 * time.Millisecond},
		Logger:  slog.New(slog.DiscardHandler),
	})
	if err != nil {
		return err
	}
	c.bank, c.running = bank, make(chan error, 1)
	go func() { c.running <- bank.Run(ctx) }()
	select {
	case <-bank.Tried():
	case <-ctx.Done():
	}
	return nil
}

// closePorts ends the device code and waits for it.
func (c *conductor) closePorts() error {
	if c.bank == nil {
		return nil
	}
	err := c.bank.Close()
	runErr := <-c.running
	c.bank = nil
	return errors.Join(err, runErr)
}

// closeBank ends the device code; what it still says is lost.
func (c *conductor) closeBank() error {
	err := c.closePorts()
	c.mu.Lock()
	c.readings = nil
	c.mu.Unlock()
	return err
}

// unplug takes a port away and waits until the device has noticed, for every
// rig that uses it.
func (c *conductor) unplug(ctx context.Context, l *simLine) error {
	if err := c.terms.Unplug(l.index); err != nil || !c.powered() {
		return err
	}
	ctx, stop := context.WithTimeoutCause(ctx, patience, fmt.Errorf("nobody noticed that port %s was unplugged", l.name))
	defer stop()
	for c.lost(l.name) < len(l.rigs) {
		select {
		case <-c.news:
		case <-ctx.Done():
			return context.Cause(ctx)
		}
	}
	return c.deliver()
}

// lost counts the rigs that were told of a port's loss and have not been
// handed the news yet.
func (c *conductor) lost(port string) (n int) {
	c.mu.Lock()
	defer c.mu.Unlock()
	for _, r := range c.readings {
		if r.Kind == device.PortLost && r.Port == port {
			n++
		}
	}
	return n
}

// plug brings a port back and waits until the device has opened it.
func (c *conductor) plug(ctx context.Context, l *simLine) error {
	if _, err := c.terms.Plug(l.index); err != nil || !c.powered() {
		return err
	}
	for began := time.Now(); ; {
		for _, s := range c.bank.Stats() {
			if s.Port == l.name && s.Open {
				return nil
			}
		}
		if time.Since(began) > patience {
			return fmt.Errorf("nobody opened port %s again after it was plugged", l.name)
		}
		select {
		case <-time.After(time.Millisecond):
		case <-ctx.Done():
			return ctx.Err()
		}
	}
}

func simInstant(i simulators.Instant) device.Instant {
	return device.Instant{Wall: i.Wall, Boot: i.Boot}
}
