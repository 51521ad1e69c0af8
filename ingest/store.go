package ingest

import (
	"errors"
	"fmt"
	"math"

	"gaugelog/ingest/segment"
)

// entry is one reading to be stored. late says that readings stored before it
// may be younger: it comes from memory, and stamps start afresh with it.
type entry struct {
	sample
	channel int32
	late    bool
}

// dated is one event to be stored.
type dated struct {
	Happening
	wall int64
}

// batch is what one sync puts on disk.
type batch struct {
	entries []entry
	events  []dated
	// clock is the state of the clocks at the end of the batch, under which
	// all its stamps were made.
	clock segment.ClockState
	// roll closes the segment behind the batch, whatever its size and age.
	roll bool

	// How far a failed attempt came; the next one goes on there.
	doneEntries, doneEvents int
}

func (b *batch) reset() {
	clear(b.entries)
	clear(b.events)
	*b = batch{entries: b.entries[:0], events: b.events[:0]}
}

// try commits the batch and tells all that came of it.
func (s *store) try(b *batch) outcome {
	err := s.commit(b)
	return outcome{batch: b, err: err, moved: s.takeMoved(), refused: s.takeRefused(), eventsErr: s.queued.err, eventsLost: s.takeLostEvents()}
}

func (b *batch) empty() bool { return len(b.entries) == 0 && len(b.events) == 0 && !b.roll }

// store owns the files of a run that its recorder writes. One goroutine uses
// it: the recorder's caller, or the writer of a live recorder.
type store struct {
	fs       segment.FS
	header   segment.Header
	channels []*channel // only name and probe are read here
	rollSize int64
	rollAge  int64
	closed   func(name string, clock segment.ClockState) // told of every finished segment

	writer   *segment.Writer
	openedAt int64 // boot-time instant
	stamps   *segment.Stamps
	events   *segment.Log
	queued   eventQueue
	// moved tells, once, of the segment that failed and the one that took over.
	moved []string
	// refused counts values that cannot be written as line protocol.
	refused int64
	shown   segment.Shown
}

// commit puts the batch on disk; its events may come later than its readings,
// see eventQueue. After an error the batch is kept and given
// again later: what a first attempt took is not taken twice.
func (s *store) commit(b *batch) error {
	if err := s.ready(b.clock); err != nil {
		return err
	}
	for ; b.doneEntries < len(b.entries); b.doneEntries++ {
		if err := s.put(&b.entries[b.doneEntries], b.clock); err != nil {
			return err
		}
	}
	if err := s.checkpoint(b.clock); err != nil {
		return err
	}
	s.queued.take(b)
	s.commitEvents(b.clock.Boot)
	if b.roll || s.writer.Size() >= s.rollSize || b.clock.Boot-s.openedAt >= s.rollAge {
		return s.roll(b.clock)
	}
	return nil
}

// ready makes sure of a segment that can be written to.
func (s *store) ready(clock segment.ClockState) error {
	switch {
	case s.writer == nil:
		return s.open(clock)
	case s.writer.Err() != nil:
		return s.goOn(clock)
	}
	return nil
}

func (s *store) open(clock segment.ClockState) error {
	number, err := segment.NextNumber(s.fs, segment.ReadingsDir)
	if err != nil {
		return err
	}
	h := s.header
	h.Clock = clock
	w, err := segment.NewWriter(s.fs, segment.ReadingsDir, number, segment.WriterOptions{Header: h, Stamps: s.stamps})
	if err != nil {
		return err
	}
	s.writer, s.stamps, s.openedAt = w, w.Stamps(), clock.Boot
	return nil
}

// goOn carries what the failed segment still holds in memory into a new one.
func (s *store) goOn(clock segment.ClockState) error {
	old := s.writer
	if err := s.room(old.Unsynced()); err != nil {
		return err
	}
	w, err := segment.Continue(old, clock)
	if err != nil {
		return err
	}
	s.writer, s.stamps, s.openedAt = w, w.Stamps(), clock.Boot
	s.moved = append(s.moved, fmt.Sprintf("%s failed and is left as it is; its unsynced lines stand in %s", old.Name(), w.Name()))
	s.closed(old.Name(), clock)
	return nil
}

// room asks the disk whether it takes as much as is about to be written, in a
// file that is removed again: trying with segments would leave one more broken
// file at each attempt for as long as the disk is full.
func (s *store) room(unsynced []byte) error {
	const name = ".room"
	if f, err := s.fs.Open(name); err == nil {
		f.Close()
		if err := s.fs.Remove(name); err != nil {
			return err
		}
	}
	f, err := s.fs.Create(name)
	if err != nil {
		return err
	}
	_, err = f.Write(unsynced)
	if err == nil {
		_, err = f.Write(make([]byte, 16<<10)) // header, checkpoint, directory
	}
	if err == nil {
		err = f.Sync()
	}
	if cerr := f.Close(); err == nil {
		err = cerr
	}
	if rerr := s.fs.Remove(name); err == nil {
		err = rerr
	}
	return err
}

// put hands one reading to the segment's memory. A block that is full goes to
// disk first. A value that line protocol cannot carry is counted and left out.
func (s *store) put(e *entry, clock segment.ClockState) error {
	if e.late {
		s.writer.Stamps().Forget()
	}
	for {
		err := s.append(e)
		switch {
		case err == nil:
			return nil
		case errors.Is(err, segment.ErrBlockFull):
			if err := s.checkpoint(clock); err != nil {
				return err
			}
		case errors.Is(err, segment.ErrClockBack):
			s.writer.Stamps().Forget()
		case s.writer.Err() != nil:
			return err
		default:
			s.refused++
			return nil
		}
	}
}

func (s *store) append(e *entry) error {
	c := s.channels[e.channel]
	if c.probe {
		return s.writer.Ambient(c.name, finite(e.mm), finite(e.shown), e.wall)
	}
	// One value for all: handed over by address, each would be an allocation.
	s.shown = segment.Shown{Gauge: c.name, MM: e.mm, Time: e.wall, Status: e.status}
	if e.unit != "" && e.unit != "mm" {
		s.shown.Shown, s.shown.Unit = e.shown, e.unit
	}
	return s.writer.Indication(&s.shown)
}

func finite(v float64) float64 {
	if notNumber(v) {
		return math.NaN()
	}
	return v
}

// checkpoint syncs the segment. Where that fails the lines go into a new
// segment at once, and only if that fails too is the error handed up.
func (s *store) checkpoint(clock segment.ClockState) error {
	err := s.writer.Checkpoint(clock)
	if err == nil {
		return nil
	}
	if s.goOn(clock) != nil {
		return err
	}
	return s.writer.Checkpoint(clock)
}

// roll closes the segment and opens the next.
func (s *store) roll(clock segment.ClockState) error {
	w := s.writer
	if err := w.Close(clock); err != nil {
		// All its lines were synced by the checkpoint before; it stays unsealed.
		s.moved = append(s.moved, fmt.Sprintf("%s could not be sealed: %v", w.Name(), err))
	}
	s.writer = nil
	s.closed(w.Name(), clock)
	return s.open(clock)
}

// finish seals what is open. The batch before it was committed.
func (s *store) finish(clock segment.ClockState) error {
	var errs []error
	if s.writer != nil {
		errs = append(errs, s.writer.Close(clock))
		s.closed(s.writer.Name(), clock)
		s.writer = nil
	}
	return errors.Join(errs...)
}
