package main

import (
	"cmp"
	"context"
	"errors"
	"log/slog"
	"slices"
	"sync"
	"time"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/ingest"
	"gaugelog/ingest/segment"
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
	// ports puts the simulated ports somewhere; nil: on pseudo-terminals.
	ports func(names []string, heard terminals.Heard) (simPorts, error)
	// clockOf turns an instant of the simulation into what the computer's clocks
	// say, and whether its wall clock has been set; nil: true time, always set.
	clockOf func(simulators.Instant) (at device.Instant, set bool)
	// stops are done at their instants, in their order, behind all that was
	// sent before.
	stops []conductedStop
	// cut is told that the power is gone, before anything is opened again; it
	// may put another file system in a run's place. May be nil.
	cut func()

	terms  simPorts
	lines  []*simLine
	byPort map[string]*simLine
	clock  ingest.FixedClock

	mu       sync.Mutex
	present  device.Instant // of the last event of the schedule
	readings []device.Reading
	news     chan struct{} // something was taken that has to do with a port

	bank    *device.Bank
	running chan error
}

// conductedStop is something that is done to the recording at an instant, in
// nanoseconds from the start.
type conductedStop struct {
	at int64
	do func()
}

// conductedRun is one rig and the run folder it is recorded into.
type conductedRun struct {
	rig     *config.Rig
	rigText []byte
	fs      segment.FS
	runID   string
	// mostWaiting bounds what waits in memory for the disk; 0: the usual.
	mostWaiting int

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
	if err := c.powerUp(ctx, c.computer.Instant(0), c.computer.BootID(0)); err != nil {
		return err
	}
	at := c.instant(c.computer.Instant(0))
	defer func() { err = errors.Join(err, c.closeBank()) }()
	for done := false; !done; {
		st := c.source.Next(c.until(), longestStretch)
		done = st.Done
		c.look(st.At)
		if err := c.play(ctx, st); err != nil {
			return err
		}
		if c.powered() {
			at = c.instant(st.At)
			if err := c.tick(at); err != nil {
				return err
			}
		}
		for _, e := range st.Events {
			if err := c.happen(ctx, e); err != nil {
				return err
			}
		}
		for len(c.stops) > 0 && c.stops[0].at <= st.Reached {
			c.stops[0].do()
			c.stops = c.stops[1:]
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

// until is how far the next stretch may go.
func (c *conductor) until() int64 {
	if len(c.stops) > 0 {
		return min(c.source.End(), c.stops[0].at)
	}
	return c.source.End()
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
	at := c.instant(e.At)
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
		err := c.closeBank()
		if c.cut != nil {
			c.cut()
		}
		return err
	case simulators.PowerBack:
		return c.powerUp(ctx, e.At, e.Boot)
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
	at := c.instant(e.At)
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
	c.look(e.At)
	if _, err := ingest.AppendMark(run.fs, m, at, c.clock.State()); err != nil {
		return err
	}
	if run.rec == nil {
		return nil
	}
	return run.rec.Handle(ingest.Event{Kind: ingest.MarkSeen, At: at, Mark: m})
}

// powerUp starts the recording programs of one life of the computer.
func (c *conductor) powerUp(ctx context.Context, i simulators.Instant, boot string) error {
	for _, l := range c.lines {
		l.forget()
	}
	at := c.instant(i)
	c.setPresent(at)
	c.clock.Known.BootID = boot
	c.look(i)
	var rigs []*config.Rig
	for _, run := range c.runs {
		rec, err := ingest.Open(ingest.Options{
			FS: run.fs, Rig: run.rig, RigBytes: run.rigText, Run: run.runID,
			Clock: &c.clock, Start: at, Compress: true, MostWaiting: run.mostWaiting,
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

// instant is what the computer's clocks say at an instant of the simulation.
func (c *conductor) instant(i simulators.Instant) device.Instant {
	if c.clockOf == nil {
		return device.Instant{Wall: i.Wall, Boot: i.Boot}
	}
	at, _ := c.clockOf(i)
	return at
}

// look has the recorders' clock show an instant of the simulation.
func (c *conductor) look(i simulators.Instant) {
	if c.clockOf == nil {
		c.clock.At, c.clock.Known.Synchronised = c.instant(i), true
		return
	}
	c.clock.At, c.clock.Known.Synchronised = c.clockOf(i)
}
