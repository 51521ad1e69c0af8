package ingest

import (
	"gaugelog/ingest/segment"
)

// openEvents prepares events.lp; a torn tail in it is left and stepped over.
func (s *store) openEvents() (err error) {
	s.events, err = segment.OpenLog(s.fs, eventsName, s.header)
	return err
}

// commitEvents appends the batch's events, all or none.
func (s *store) commitEvents(b *batch) error {
	fresh := b.events[b.doneEvents:]
	if len(fresh) == 0 {
		return nil
	}
	entries := make([]segment.Entry, len(fresh))
	for i := range fresh {
		entries[i] = segment.Entry{Point: fresh[i].point(), Time: fresh[i].wall}
	}
	if err := s.events.Append(b.clock, entries...); err != nil {
		return err
	}
	b.doneEvents = len(b.events)
	return nil
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
