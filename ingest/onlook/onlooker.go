package onlook

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"sync"
	"sync/atomic"
	"time"

	"gaugelog/config"
	"gaugelog/ingest"
	"gaugelog/ingest/alarm"
	"gaugelog/ingest/desk"
	"gaugelog/ingest/segment"
)

// lookEvery is how often the folder is asked whether it has grown.
const lookEvery = time.Second

// Options is what an Onlooker needs.
type Options struct {
	// Rig is the run's rig with its amendments.
	Rig *config.Rig
	// Gravity turns masses into newtons, m/s2.
	Gravity float64
	// Analyse is the analysis of the folder; nil: there is none. It is asked
	// again only when the folder has grown.
	Analyse desk.Analyse
	// Log takes what goes wrong; nil: nobody is told.
	Log *slog.Logger
}

// Onlooker keeps a desk of a run that another process records.
type Onlooker struct {
	o      Options
	dir    *ingest.Dir
	desk   *desk.Desk
	tape   tape
	events events
	last   []ingest.Last
	places map[string]int // of gauges and probes in last
	status atomic.Pointer[ingest.Status]
	grown  atomic.Int64 // counts what was read, for the analysis
	// asked is when the lock was looked at last; held what it said.
	asked time.Time
	held  bool

	mu            sync.Mutex
	raised, ended []alarm.Alarm
}

// Open looks at the run folder at path; Run follows it, Close lets it go.
// Errors: those of the file system, and of a folder that is no run.
func Open(path string, o Options) (w *Onlooker, err error) {
	if o.Log == nil {
		o.Log = slog.New(slog.DiscardHandler)
	}
	dir, err := ingest.OpenDir(path, ingest.DirOptions{})
	if err != nil {
		return nil, err
	}
	defer func() {
		if err != nil {
			err = errors.Join(err, dir.Close())
		}
	}()
	w = &Onlooker{o: o, dir: dir, tape: tape{fs: dir.FS()}, events: events{fs: dir.FS()}, places: map[string]int{}}
	for _, g := range o.Rig.Gauges {
		w.places["gauge "+g.Name] = len(w.last)
		w.last = append(w.last, ingest.Last{Name: g.Name})
	}
	for _, p := range o.Rig.Probes {
		w.places["probe "+p.Name] = len(w.last)
		w.last = append(w.last, ingest.Last{Name: p.Name, Probe: true})
	}
	if err := w.lookBack(); err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	if _, err := w.events.poll(); err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	w.publish(time.Now())
	start := ingest.SystemClock{}.Now()
	start.Wall = max(start.Wall, w.newest()+1)
	w.desk, err = desk.New(desk.Options{
		Name: o.Rig.Specimen.Name, Rig: o.Rig, FS: dir.FS(), Status: w.status.Load, Gravity: o.Gravity,
		Alarms: w.alarms, Analyse: w.analyse(), Start: start, Log: o.Log,
	})
	if err != nil {
		return nil, err
	}
	return w, nil
}

// Desk is the run's desk.
func (w *Onlooker) Desk() *desk.Desk { return w.desk }

// Run follows the folder until the context ends, and ends its goroutines.
func (w *Onlooker) Run(ctx context.Context) {
	var keeping sync.WaitGroup
	keeping.Go(func() { w.desk.Run(ctx) })
	defer keeping.Wait()
	ticker := time.NewTicker(lookEvery)
	defer ticker.Stop()
	for {
		select {
		case <-ctx.Done():
			return
		case now := <-ticker.C:
			if err := w.look(ctx, now); err != nil && ctx.Err() == nil {
				w.o.Log.Warn("the run folder cannot be read", "error", err)
			}
		}
	}
}

// Close lets go of the folder; Run must have ended.
func (w *Onlooker) Close() error { return w.dir.Close() }

// look takes what was written since the last look.
func (w *Onlooker) look(ctx context.Context, now time.Time) error {
	fresh, err := w.tape.follow(func(r *segment.Record) {
		w.note(r)
		w.desk.Give(ctx, r)
	})
	happened, errEvents := w.events.poll()
	if fresh || happened {
		w.grown.Add(1)
	}
	w.publish(now)
	return errors.Join(err, errEvents)
}

// mostLookedBack bounds the segments that are read for the last readings of
// gauges that have been silent for long.
const mostLookedBack = 8

// lookBack finds the last reading of each gauge and probe, and the place from
// which the newest segment is followed.
func (w *Onlooker) lookBack() error {
	if err := w.tape.open(); err != nil {
		return err
	}
	names := w.tape.names()
	for i := len(names) - 1; i >= 0 && i >= len(names)-mostLookedBack; i-- {
		known := make([]bool, len(w.last))
		missing := false
		for k := range w.last {
			known[k] = w.last[k].Seen
			missing = missing || !known[k]
		}
		if !missing {
			return nil
		}
		to, err := w.tape.read(names[i], 0, func(r *segment.Record) {
			if k, ok := w.place(r); ok && !known[k] {
				w.note(r)
			}
		})
		if err != nil {
			return err
		}
		if i == len(names)-1 {
			w.tape.at, w.tape.offset = names[i], to
		}
	}
	return nil
}

func (w *Onlooker) place(r *segment.Record) (int, bool) {
	kind := "gauge "
	switch r.Kind {
	case segment.Indication:
	case segment.Ambient:
		kind = "probe "
	default:
		return 0, false
	}
	k, ok := w.places[kind+r.Name]
	return k, ok
}

// analyse asks the analysis again only when the folder has grown.
func (w *Onlooker) analyse() desk.Analyse {
	if w.o.Analyse == nil {
		return nil
	}
	var last *desk.Outlook
	var failed error
	at := int64(-1)
	return func(ctx context.Context) (*desk.Outlook, error) {
		if grown := w.grown.Load(); grown != at {
			at = grown
			last, failed = w.o.Analyse(ctx)
		}
		return last, failed
	}
}

func (w *Onlooker) alarms() (raised, ended []alarm.Alarm) {
	w.mu.Lock()
	defer w.mu.Unlock()
	return w.raised, w.ended
}
