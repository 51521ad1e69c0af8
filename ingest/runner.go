package ingest

import (
	"context"
	"errors"
	"fmt"
	"sync"
	"sync/atomic"
	"time"

	"gaugelog/device"
)

// Figures of the runner.
const (
	usualQueue = 8192
	tickEvery  = 100 * time.Millisecond
	marksEvery = 200 * time.Millisecond
)

// RunnerOptions is what a [Runner] needs.
type RunnerOptions struct {
	// Recorders are the runs, by the index that [device.Reading] calls Rig.
	// They are live, and are the runner's from now on.
	Recorders []*Recorder
	Clock     Clock
	// PortsTried is closed when every port was tried once; nil: there is
	// nothing to wait for.
	PortsTried <-chan struct{}
	// Ready is called once, from Run, when the recorders are open and every
	// port was tried; may be nil.
	Ready func()
	// Queue bounds the readings between the ports and the recorders; 0: 8192.
	Queue int
}

// Runner is the real-time front of one recorder or several: a [device.Sink]
// that never blocks, a ticker, and a watcher of the marks files.
type Runner struct {
	o        RunnerOptions
	readings chan device.Reading
	happened chan rigHappening
	marks    chan rigMark
	dropped  []droppedReadings
	tails    []*MarkTail
	running  atomic.Bool
	first    error
}

type rigHappening struct {
	rig  int
	what Happening
}

type rigMark struct {
	rig  int
	mark Mark
}

type droppedReadings struct{ n, from atomic.Int64 }

// NewRunner makes a runner; Run sets it going. Readings may come before that.
func NewRunner(o RunnerOptions) (*Runner, error) {
	if o.Queue <= 0 {
		o.Queue = usualQueue
	}
	r := &Runner{
		o:        o,
		readings: make(chan device.Reading, o.Queue),
		happened: make(chan rigHappening, 64),
		marks:    make(chan rigMark, 16),
		dropped:  make([]droppedReadings, len(o.Recorders)),
	}
	for _, rec := range o.Recorders {
		t, err := NewMarkTail(rec.o.FS)
		if err != nil {
			return nil, err
		}
		r.tails = append(r.tails, t)
	}
	return r, nil
}

// Take puts a reading into the queue. Where that is full the reading is
// dropped and counted; the recorder notes how many, and since when.
func (r *Runner) Take(d device.Reading) {
	select {
	case r.readings <- d:
	default:
		l := &r.dropped[d.Rig]
		l.from.CompareAndSwap(0, d.At.Wall)
		l.n.Add(1)
	}
}

// Happen hands an event, such as an alarm, to the run of a rig. It says false
// where the queue is full; then nothing was taken.
func (r *Runner) Happen(rig int, h Happening) bool {
	select {
	case r.happened <- rigHappening{rig, h}:
		return true
	default:
		return false
	}
}

// Queued counts the readings between the ports and the recorders at present.
func (r *Runner) Queued() int { return len(r.readings) }

// Run records until the context ends, then takes what is still in the queue
// and closes the recorders. Close the device before ending the context, or
// readings that come later are lost. Its error joins those of the recorders.
// Run may be called once.
func (r *Runner) Run(ctx context.Context) error {
	if !r.running.CompareAndSwap(false, true) {
		panic("ingest: Runner.Run was called twice")
	}
	watching, stop := context.WithCancel(ctx)
	var watcher sync.WaitGroup
	watcher.Go(func() { r.watchMarks(watching) })
	r.loop(ctx)
	stop()
	watcher.Wait()
	r.drain()
	errs := []error{r.first}
	now := r.o.Clock.Now()
	for i, rec := range r.o.Recorders {
		r.noteDrops(i, now)
		errs = append(errs, rec.Close(now))
	}
	return errors.Join(errs...)
}

func (r *Runner) loop(ctx context.Context) {
	ticker := time.NewTicker(tickEvery)
	defer ticker.Stop()
	tried := r.o.PortsTried
	if tried == nil {
		r.ready()
	}
	for {
		select {
		case d := <-r.readings:
			r.handle(d.Rig, Seen(d))
		case <-ticker.C:
			r.tick()
		case m := <-r.marks:
			r.handle(m.rig, Event{Kind: MarkSeen, At: r.o.Clock.Now(), Mark: m.mark})
		case h := <-r.happened:
			r.handle(h.rig, Event{Kind: Happened, At: r.o.Clock.Now(), What: h.what})
		case <-tried:
			tried = nil
			r.ready()
		case <-ctx.Done():
			return
		}
	}
}

func (r *Runner) ready() {
	if r.o.Ready != nil {
		r.o.Ready()
	}
}

func (r *Runner) tick() {
	now := r.o.Clock.Now()
	for i := range r.o.Recorders {
		r.noteDrops(i, now)
		r.handle(i, TickAt(now))
	}
}

// noteDrops records what Take had to drop since the last tick.
func (r *Runner) noteDrops(i int, now device.Instant) {
	l := &r.dropped[i]
	n := l.n.Swap(0)
	if n == 0 {
		return
	}
	r.handle(i, Event{Kind: Happened, At: now, What: Happening{Kind: Dropped, From: l.from.Swap(0), N: n,
		Detail: "readings dropped: they came faster than they could be taken"}})
}

// handle passes an event on and keeps the first error.
func (r *Runner) handle(rig int, e Event) {
	if err := r.o.Recorders[rig].Handle(e); err != nil && r.first == nil {
		r.first = fmt.Errorf("an event was refused: %w", err)
	}
}

// drain takes what the queues still hold.
func (r *Runner) drain() {
	for {
		select {
		case d := <-r.readings:
			r.handle(d.Rig, Seen(d))
		case m := <-r.marks:
			r.handle(m.rig, Event{Kind: MarkSeen, At: r.o.Clock.Now(), Mark: m.mark})
		case h := <-r.happened:
			r.handle(h.rig, Event{Kind: Happened, At: r.o.Clock.Now(), What: h.what})
		default:
			return
		}
	}
}

// watchMarks looks at the marks files several times a second. A look that
// fails is made again: a mark is in its file, whether seen now or later.
func (r *Runner) watchMarks(ctx context.Context) {
	ticker := time.NewTicker(marksEvery)
	defer ticker.Stop()
	for {
		select {
		case <-ticker.C:
		case <-ctx.Done():
			return
		}
		for i, t := range r.tails {
			fresh, _ := t.Poll()
			for _, m := range fresh {
				select {
				case r.marks <- rigMark{i, m}:
				case <-ctx.Done():
					return
				}
			}
		}
	}
}
