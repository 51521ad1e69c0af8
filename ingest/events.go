package ingest

import (
	"fmt"

	"gaugelog/ingest/segment"
)

// eventQueue holds the events on their way to events.lp. A fault of that file
// must not hold back readings, which are in files of their own: so its events
// wait here, at most mostEvents of them, and are tried again ever more rarely,
// because each attempt may leave a torn piece of the file behind.
type eventQueue struct {
	groups []eventGroup
	held   int
	lost   loss // beyond the bound
	err    error
	pause  int64
	tryAt  int64 // boot-time instant
}

// eventGroup are events that were stamped under one clock.
type eventGroup struct {
	clock  segment.ClockState
	events []dated
}

// rarestTry is the longest pause between two attempts on events.lp.
const rarestTry = 10 * longestRetry

// openEvents prepares events.lp; a torn tail in it is left and stepped over.
func (s *store) openEvents() (err error) {
	s.events, err = segment.OpenLog(s.fs, eventsName, s.header)
	return err
}

// take adds a batch's events, each once.
func (q *eventQueue) take(b *batch) {
	fresh := b.events[b.doneEvents:]
	b.doneEvents = len(b.events)
	if over := q.held + len(fresh) - mostEvents; over > 0 {
		if q.lost.n == 0 {
			q.lost.from = fresh[len(fresh)-over].wall
		}
		q.lost.n += int64(over)
		fresh = fresh[:len(fresh)-over]
	}
	if len(fresh) == 0 {
		return
	}
	q.held += len(fresh)
	if n := len(q.groups); n > 0 && sameClock(q.groups[n-1].clock, b.clock) {
		g := &q.groups[n-1]
		g.clock, g.events = b.clock, append(g.events, fresh...)
		return
	}
	q.groups = append(q.groups, eventGroup{b.clock, append([]dated(nil), fresh...)})
}

// sameClock tells whether stamps under both may stand before one checkpoint.
func sameClock(a, b segment.ClockState) bool {
	moved := (a.Wall - a.Boot) - (b.Wall - b.Boot)
	return a.Synced == b.Synced && -stepAfter <= moved && moved <= stepAfter
}

// commitEvents appends what waits, unless an attempt failed a short while ago.
func (s *store) commitEvents(now int64) {
	q := &s.queued
	if q.err != nil && now < q.tryAt {
		return
	}
	if err := s.appendEvents(); err != nil {
		q.err = err
		q.pause = min(max(firstRetry, 2*q.pause), rarestTry)
		q.tryAt = now + q.pause
	}
}

// appendEvents appends all that wait, a clock's at a time: all of it or none.
func (s *store) appendEvents() error {
	q := &s.queued
	for len(q.groups) > 0 {
		g := &q.groups[0]
		entries := make([]segment.Entry, len(g.events))
		for i := range g.events {
			entries[i] = segment.Entry{Point: g.events[i].point(), Time: g.events[i].wall}
		}
		if err := s.events.Append(g.clock, entries...); err != nil {
			return err
		}
		q.held -= len(g.events)
		q.groups = q.groups[1:]
	}
	q.groups, q.err, q.pause = nil, nil, 0
	return nil
}

// lastEvents appends what waits, once more where that fails: there is no later.
func (s *store) lastEvents() (err error) {
	for range lastTries {
		if err = s.appendEvents(); err == nil {
			return nil
		}
	}
	return fmt.Errorf("%d events could not be saved: %s: %w", s.queued.held, faultText(err), err)
}

// takeLostEvents hands over, once, what the queue had no room for.
func (s *store) takeLostEvents() loss {
	l := s.queued.lost
	s.queued.lost = loss{}
	return l
}

// takeMoved hands over, once, what is to be told of failed segments.
func (s *store) takeMoved() []string {
	moved := s.moved
	s.moved = nil
	return moved
}

// takeRefused hands over, once, how many values could not be written.
func (s *store) takeRefused() int64 {
	n := s.refused
	s.refused = 0
	return n
}
