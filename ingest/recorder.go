package ingest

import (
	"errors"
	"fmt"
	"strings"
	"sync/atomic"
	"time"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/ingest/segment"
)

// Figures of the recorder that no rig file states.
const (
	usualSync     = int64(10 * time.Second)
	fastSync      = int64(time.Second)
	fastFor       = int64(10 * time.Minute) // after a mark or a jump
	idleSync      = int64(10 * time.Minute) // a checkpoint although nothing came
	slowAfter     = int64(2 * time.Second)  // a sync that takes longer is a disk-slow event
	firstRetry    = int64(time.Second)
	longestRetry  = int64(time.Minute)
	usualRollSize = 16_000_000
	usualRollAge  = int64(24 * time.Hour)
	stepAfter     = int64(5 * time.Millisecond) // a wall clock that moved farther against the boot-time clock was stepped
	glance        = int64(250 * time.Millisecond)
	// usualMost bounds the readings that wait for the disk: 8 MiB or so.
	usualMost  = 100_000
	mostEvents = 4096
)

// Options is what a [Recorder] needs.
type Options struct {
	// FS is the run folder.
	FS segment.FS
	// Lock takes the run's lock; see [LockRun]. Nil: no lock is taken, for
	// folders that nobody else can reach.
	Lock func() (unlock func() error, err error)
	// Rig is the rig with its amendments applied; RigBytes is the rig file as
	// it stands, which becomes rig.yaml byte for byte.
	Rig      *config.Rig
	RigBytes []byte
	// Amendments counts the amendments applied to Rig; they are noted in events.lp.
	Amendments int
	// Run is the id of a new run; empty: a random one. A run that goes on keeps its own.
	Run string
	// Program names the program and version in the files' headers; may be
	// empty. What a header cannot carry, such as blanks, becomes a hyphen.
	Program string
	// Clock tells whether the wall clock can be believed, and the boot id.
	Clock Clock
	// Start is the instant at which the recording begins.
	Start device.Instant
	// Live puts the disk behind a goroutine of the recorder's own, so that
	// Handle never waits for it, and makes Status current. Where it is false
	// everything is done before Handle returns, in an order that depends on
	// the events alone.
	Live bool
	// Visit says that this is one visit of a gauge that is carried from board
	// to board: that nothing was recorded since the last one is no gap.
	Visit bool
	// Compress makes closed segments into .zst files.
	Compress bool
	// MostWaiting bounds the readings that wait in memory for the disk;
	// 0: 100,000. Beyond it readings are dropped, counted and the loss is recorded.
	MostWaiting int
	// DiskFree tells the free bytes on the run folder's disk for Status; may be nil.
	DiskFree func() (int64, error)
	// LeastFree is how many free bytes Open demands, where DiskFree is given.
	LeastFree int64
}

// Recorder records one run. Its methods are for one goroutine, but for Status.
type Recorder struct {
	o        Options
	policy   policy
	channels []*channel
	gauges   map[string]int // index into channels
	probes   map[string]int
	silences []silence
	refusals []*refusals // by port

	unlock func() error
	store  *store
	sealer *sealer
	writer *writer // nil unless live
	run    string

	offset   int64 // wall minus boot-time clock, as stamps are made
	set      bool  // the wall clock has been set since this boot, as checkpoints say
	gapFrom  int64 // wall clock: a gap before this recording whose length nobody knows yet; 0: none
	now      int64 // boot-time clock: the latest instant seen
	filling  *batch
	waiting  []*batch // cut, not yet committed; the first may have failed
	spare    []*batch
	held     int // readings in filling, waiting and on their way
	inFlight *batch
	sentAt   int64

	lastCommit  int64 // when the last completed sync began
	lastSynced  int64 // boot-time instant up to which everything is on disk
	fastUntil   int64
	retryAt     int64
	retryPause  int64
	failing     bool
	slowTold    bool
	dropped     []loss // per channel
	eventsLost  loss
	nextGlance  int64
	lost        int64 // readings dropped so far, for Status
	stored      int64
	commitError error
	eventsError error // keeps events in memory; nil: nothing does
	freeAsked   int64 // boot-time instant
	free        int64

	status atomic.Pointer[Status]
	closed bool
}

// loss counts what was dropped since from (wall clock).
type loss struct{ n, from int64 }

// ErrClosed is what Handle answers behind Close.
var ErrClosed = errors.New("the recorder is closed")

// Open begins a run, or goes on with one: it takes the lock, lays out the run
// folder or checks that its rig file is the same, and starts a new segment.
//
// Errors: *HeldError where another recorder has the run, *RigDiffersError
// where the run was recorded with another rig file, *NoRoomError, or an error
// of the file system. Nothing is held after an error.
func Open(o Options) (*Recorder, error) {
	if o.FS == nil || o.Rig == nil || o.Clock == nil {
		panic("ingest: Open needs FS, Rig and Clock")
	}
	r := &Recorder{o: o, offset: o.Start.Wall - o.Start.Boot, now: o.Start.Boot, unlock: func() error { return nil }}
	if o.Lock != nil {
		unlock, err := o.Lock()
		if err != nil {
			return nil, err
		}
		r.unlock = unlock
	}
	if err := r.open(); err != nil {
		return nil, errors.Join(err, r.unlock())
	}
	return r, nil
}

func (r *Recorder) open() error {
	if err := r.checkRoom(); err != nil {
		return err
	}
	r.layChannels()
	found, err := layFolder(&r.o)
	if err != nil {
		return err
	}
	r.run = found.run
	if err := r.openStore(found); err != nil {
		return err
	}
	r.filling = &batch{}
	r.lastCommit, r.lastSynced = r.now, r.now
	r.beginEvents(found)
	if err := r.flushSync(); err != nil {
		return errors.Join(fmt.Errorf("the first sync: %w", err), r.store.finish(r.clockState()))
	}
	if err := r.store.lastEvents(); err != nil {
		return errors.Join(fmt.Errorf("the first sync: %w", err), r.store.finish(r.clockState()))
	}
	if r.o.Live {
		r.writer = startWriter(r.store)
		r.sealer.start()
		r.publish()
	}
	r.sealer.takeAll(found.unsealed)
	return nil
}

func (r *Recorder) checkRoom() error {
	if r.o.DiskFree == nil || r.o.LeastFree <= 0 {
		return nil
	}
	free, err := r.o.DiskFree()
	if err != nil {
		return fmt.Errorf("asking for the free space of the run's disk: %w", err)
	}
	if free < r.o.LeastFree {
		return &NoRoomError{Free: free, Least: r.o.LeastFree}
	}
	return nil
}

// layChannels makes a channel of each gauge and probe of the rig.
func (r *Recorder) layChannels() {
	rig := r.o.Rig
	r.policy = newPolicy(rig.Record.Sampling, r.now)
	r.gauges, r.probes = map[string]int{}, map[string]int{}
	for i := range rig.Gauges {
		g := &rig.Gauges[i]
		c := &channel{name: g.Name, port: g.Port, jump: jumpResolutions * g.Resolution.Value}
		if r.policy.deadBand > 0 {
			c.jump = r.policy.deadBand
		}
		r.gauges[g.Name] = len(r.channels)
		r.channels = append(r.channels, c)
		r.silences = append(r.silences, newSilence(rig, g.Frame, g.SilentAfter, r.now))
	}
	for i := range rig.Probes {
		p := &rig.Probes[i]
		r.probes[p.Name] = len(r.channels)
		r.channels = append(r.channels, &channel{name: p.Name, port: p.Port, probe: true})
		r.silences = append(r.silences, newSilence(rig, p.Frame, p.SilentAfter, r.now))
	}
	for _, c := range r.channels {
		c.memory.span = r.policy.rememberedSpan
	}
	r.dropped = make([]loss, len(r.channels))
}

// headerWord makes a text into one word of printable ASCII.
func headerWord(text string) string {
	return strings.Map(func(c rune) rune {
		if c <= ' ' || c >= 0x7f {
			return '-'
		}
		return c
	}, text)
}

func (r *Recorder) openStore(found *folder) error {
	state := r.o.Clock.State()
	r.believe()
	header := segment.Header{Run: found.run, Boot: state.BootID, Rig: found.rigSum, Program: headerWord(r.o.Program), Clock: r.clockState()}
	r.sealer = newSealer(r.o.FS, r.o.Compress)
	s := &store{fs: r.o.FS, header: header, channels: r.channels,
		rollSize: int64(r.o.Rig.Record.Roll.Size.Value), rollAge: int64(r.o.Rig.Record.Roll.Age.Value * 1e9),
		closed: r.sealer.take}
	if s.rollSize <= 0 {
		s.rollSize = usualRollSize
	}
	if s.rollAge <= 0 {
		s.rollAge = usualRollAge
	}
	if err := s.openEvents(); err != nil {
		return err
	}
	if err := s.open(header.Clock); err != nil {
		return errors.Join(err, s.finish(header.Clock))
	}
	r.store = s
	return nil
}

// beginEvents notes the start, the gap since an earlier recorder of the run,
// and the amendments in force.
func (r *Recorder) beginEvents(found *folder) {
	if found.resumed {
		if found.last != 0 && !r.o.Visit {
			r.statesGap(found.last)
		}
		r.happened(Happening{Kind: Started, Detail: "the recording goes on"})
	} else {
		r.happened(Happening{Kind: Started, Detail: "the recording begins"})
	}
	if r.o.Amendments > 0 {
		r.happened(Happening{Kind: RigAmended, N: int64(r.o.Amendments), Detail: "amendments in force"})
	}
	// A restart is no change: the spacing goes on from the last mark.
	if last, any := lastChange(found.marks, r.wall()); any {
		r.policy.changedAt = last - r.offset
	}
}

// statesGap records the gap since an earlier recorder of the run. A machine
// without a battery clock starts with a time of the past: how long the gap was is
// known only once its clock is set; see stepped.
func (r *Recorder) statesGap(last int64) {
	d := time.Duration(r.o.Start.Wall - last)
	how := fmt.Sprintf("for %s by the wall clock", d.Round(time.Millisecond))
	if !r.set {
		r.gapFrom = last
		how = "since then; the wall clock is not set, so for how long is not known yet"
	}
	r.happened(Happening{Kind: Gap, From: last, Detail: "nothing was recorded " + how})
}

// lastChange is the time of the latest mark that speaks of a change before now.
func lastChange(marks []Mark, now int64) (last int64, any bool) {
	for i := range marks {
		if m := &marks[i]; m.counts() && m.Time <= now && (!any || m.Time > last) {
			last, any = m.Time, true
		}
	}
	return last, any
}

// Run is the run's id.
func (r *Recorder) Run() string { return r.run }

// wall is the present by the wall clock.
func (r *Recorder) wall() int64 { return r.now + r.offset }

// Close ends the recording: what is in memory goes to disk, the segment is
// sealed, SHA256SUMS is brought up to date and the lock is given back. Its
// error tells what could not be saved. A second Close does nothing.
func (r *Recorder) Close(at device.Instant) error {
	if r.closed {
		return nil
	}
	r.advance(at)
	r.closed = true
	r.tellSpells(true)
	r.happened(Happening{Kind: Stopped, Detail: "the recording ends"})
	var errs []error
	if r.writer != nil {
		r.settle(r.writer.stop())
	}
	if err := r.flushSync(); err != nil {
		errs = append(errs, fmt.Errorf("%d readings could not be saved: %w", r.held, err))
	}
	errs = append(errs, r.store.lastEvents(), r.store.finish(r.clockState()), r.sealer.finish(), r.unlock())
	if r.o.Live {
		r.publish()
	}
	return errors.Join(errs...)
}
