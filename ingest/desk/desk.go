package desk

import (
	"context"
	"fmt"
	"log/slog"
	"sync"
	"sync/atomic"
	"time"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/ingest"
	"gaugelog/ingest/alarm"
	"gaugelog/ingest/forward"
	"gaugelog/ingest/past"
	"gaugelog/ingest/rollup"
	"gaugelog/ingest/segment"
)

// Options is what a Desk needs. Functions may be called from any goroutine.
type Options struct {
	// Name is what the run is called in addresses: small letters, digits, - and _.
	Name string
	// Rig is the rig with its amendments.
	Rig *config.Rig
	// FS is the run folder.
	FS segment.FS
	// Status is the recorder's look; see [ingest.Recorder.Status].
	Status func() *ingest.Status
	// Ports gives the ports' counters; nil: they are not known.
	Ports func() []device.PortStats
	// Queued counts the readings before the recorder; nil: not known.
	Queued func() int
	// Forward tells how far sending to a server is, nil for none; a nil
	// function: the run is sent nowhere.
	Forward func() *forward.State
	// Happen writes an event; see [ingest.Runner.Happen].
	Happen func(ingest.Happening) bool
	// Mark enters a mark; see [ingest.Dir.AppendMark].
	Mark func(ingest.Mark) (string, error)
	// Gravity turns masses into newtons, m/s2.
	Gravity float64
	// Analyse is the analysis; nil: there is none. AnalyseFirst is when it
	// first runs.
	Analyse      Analyse
	AnalyseFirst time.Duration
	// Alarms, where not nil, makes a desk of an onlooker: the recording is
	// another process's, which raises the alarms that this function gives
	// (raised, and ended); the desk writes nothing into the folder.
	Alarms func() (raised, ended []alarm.Alarm)
	// Outbox carries alarm messages out; nil: nobody is told.
	Outbox *alarm.Outbox
	// Start is the instant of the recorder's start: what is older is on disk.
	Start device.Instant
	Log   *slog.Logger
}

// Desk knows the present of one run.
type Desk struct {
	o        Options
	zone     *time.Location
	channels *past.Channels
	past     *past.Past
	feed     chan sample
	missed   atomic.Int64
	snapshot atomic.Pointer[Snapshot]
	outlooks chan outlookResult
	books    chan bookResult
	asked    chan func()

	// What follows belongs to the loop.
	book       *rollup.Book
	rebuilding bool
	baseline   baseline
	marks      []ingest.Mark
	gone       map[string]string
	tail       *ingest.MarkTail
	loads      Loads
	found      int64 // full load of the present step, as found in the readings
	outlook    outlookResult
	engine     *alarm.Engine
	still      []stillness
	curves     *Curves
	drawn      time.Time
	background sync.WaitGroup
}

type sample struct {
	series int
	wall   int64
	value  float64
}

// feedLength bounds the readings between the ports and the bins.
const feedLength = 8192

// New makes a desk. Run sets it going; Take and Snapshot work before that.
func New(o Options) (*Desk, error) {
	d := &Desk{
		o: o, zone: zoneOf(o.Rig.Timezone), channels: past.ChannelsOf(o.Rig), feed: make(chan sample, feedLength),
		outlooks: make(chan outlookResult), books: make(chan bookResult), asked: make(chan func()),
		engine: alarm.NewEngine(o.Rig.Alarms.Wants), rebuilding: true,
		still: make([]stillness, len(o.Rig.Gauges)),
	}
	if o.Log == nil {
		d.o.Log = slog.New(slog.DiscardHandler)
	}
	d.book = rollup.NewBook(d.channels.Names()...)
	d.past = &past.Past{FS: o.FS, Channels: d.channels, Keep: o.Alarms == nil, Gentle: true, Log: d.o.Log}
	var err error
	if d.tail, err = ingest.NewMarkTail(o.FS); err != nil {
		return nil, err
	}
	if err := d.readMarks(); err != nil {
		return nil, err
	}
	if o.Alarms == nil {
		d.restoreAlarms()
	}
	d.publish(time.Now())
	return d, nil
}

// Name is what the run is called in addresses.
func (d *Desk) Name() string { return d.o.Name }

// Rig is the rig with its amendments. It must not be changed.
func (d *Desk) Rig() *config.Rig { return d.o.Rig }

// Gravity is in m/s2.
func (d *Desk) Gravity() float64 { return d.o.Gravity }

// Take puts a reading into the bins' queue. It never waits: what does not fit
// is missing on the page, not in the recording.
func (d *Desk) Take(r device.Reading) {
	switch r.Kind {
	case device.Indication:
		if i, ok := d.channels.Gauge(r.Gauge); ok {
			d.put(sample{i, r.At.Wall, r.MM})
		}
	case device.Ambient:
		if i, ok := d.channels.Probe(r.Probe); ok {
			d.put(sample{i, r.At.Wall, r.Celsius})
			d.put(sample{i + 1, r.At.Wall, r.HumidityPercent})
		}
	}
}

func (d *Desk) put(s sample) {
	select {
	case d.feed <- s:
	default:
		d.missed.Add(1)
	}
}

// Give puts a stored record into the bins' queue and waits for room there: for
// an onlooker, behind whom nobody waits. What is no reading is left out.
func (d *Desk) Give(ctx context.Context, r *segment.Record) {
	d.channels.Each(r, func(series int, v float64) {
		select {
		case d.feed <- sample{series, r.Time, v}:
		case <-ctx.Done():
		}
	})
}

// Snapshot is the latest look, about a second old. It waits for nothing.
func (d *Desk) Snapshot() *Snapshot { return d.snapshot.Load() }

// Run keeps the desk until the context ends. It returns when all its goroutines
// have ended.
func (d *Desk) Run(ctx context.Context) {
	if d.o.Analyse != nil {
		d.background.Go(func() { d.watchOutlook(ctx) })
	}
	origin := d.book.Origin
	d.background.Go(func() { d.rebuild(ctx, origin) })
	if d.o.Alarms == nil {
		d.background.Go(func() { d.summarise(ctx) })
	}
	ticker := time.NewTicker(time.Second)
	defer ticker.Stop()
	for {
		select {
		case s := <-d.feed:
			d.add(s)
		case <-ticker.C:
			d.tick(time.Now())
			d.readAgain(ctx)
		case r := <-d.outlooks:
			d.take(r)
		case b := <-d.books:
			d.merge(ctx, b)
		case f := <-d.asked:
			f()
		case <-ctx.Done():
			d.background.Wait()
			d.drain()
			d.publish(time.Now())
			return
		}
	}
}

// add puts a sample and all that wait behind it into the book.
func (d *Desk) add(s sample) {
	for {
		d.book.Add(s.series, s.wall, s.value)
		if s.series < len(d.still) {
			d.moved(s.series, s.wall, s.value)
		}
		select {
		case s = <-d.feed:
		default:
			return
		}
	}
}

// drain takes what is still in the queue.
func (d *Desk) drain() {
	for {
		select {
		case s := <-d.feed:
			d.add(s)
		default:
			return
		}
	}
}

func (d *Desk) take(r outlookResult) {
	if r.err != nil && r.outlook == nil {
		r.outlook = d.outlook.outlook // the last good one stays, with its age
	}
	d.outlook = r
	d.setLoads()
}

// tick does what is due once a second.
func (d *Desk) tick(now time.Time) {
	if fresh, err := d.tail.Poll(); err == nil && len(fresh) > 0 {
		if err := d.readMarks(); err != nil {
			d.o.Log.Error("the marks cannot be read", "error", err)
		}
	}
	if d.o.Alarms == nil {
		d.watch(now)
	}
	d.publish(now)
}

// watch steps the alarms.
func (d *Desk) watch(now time.Time) {
	status := d.o.Status()
	if status == nil || status.Closed {
		return
	}
	step := d.engine.Step(now, d.facts(now, status))
	for _, h := range step.Happened {
		d.o.Log.Warn(h.Kind, "rig", d.o.Name, "gauge", h.Gauge, "detail", h.Detail)
		if !d.o.Happen(h) {
			d.o.Log.Error("an alarm's event found no room in the queue", "detail", h.Detail)
		}
	}
	if len(step.Message) > 0 && d.o.Outbox != nil {
		d.o.Outbox.Put(alarm.NewMessage(status.Run, d.o.Rig.Title, d.o.Rig.Specimen.Name, now, step.Message))
	}
}

// do runs f in the desk's loop and waits for it.
func (d *Desk) do(ctx context.Context, f func()) error {
	done := make(chan struct{})
	select {
	case d.asked <- func() { f(); close(done) }:
	case <-ctx.Done():
		return fmt.Errorf("the recording did not answer: %w", ctx.Err())
	}
	<-done
	return nil
}

// See notes that a person has seen an alarm, and writes that into the run.
func (d *Desk) See(ctx context.Context, id int, by string) error {
	var err error
	if e := d.do(ctx, func() {
		now := time.Now()
		h, fresh, failed := d.engine.See(id, by, now)
		if err = failed; err == nil && fresh {
			d.o.Log.Info(h.Kind, "rig", d.o.Name, "gauge", h.Gauge, "detail", h.Detail)
			d.o.Happen(h)
		}
		d.publish(now)
	}); e != nil {
		return e
	}
	return err
}

// Mark enters a mark, which is on disk when this returns, and shows it.
func (d *Desk) Mark(ctx context.Context, m ingest.Mark) (id string, err error) {
	if id, err = d.o.Mark(m); err != nil {
		return "", err
	}
	return id, d.do(ctx, func() {
		if err := d.readMarks(); err != nil {
			d.o.Log.Error("the marks cannot be read", "error", err)
		}
		d.publish(time.Now())
	})
}
