package simulators

// Next gives what happens from where the last call ended up to until
// (nanoseconds from the start, exclusive): the bytes of every port and, where
// something else is due, the events. It stops early at an event, so that
// events come after all bytes sent before them; and, where most is above 0,
// before a port's bytes exceed most (a pseudo-terminal without a reader takes
// about 20 kB), so that every port is always handed over up to one instant.
//
// The Stretch's slices are overwritten by the next call.
func (s *Sim) Next(until int64, most int) *Stretch {
	until = min(until, s.end)
	s.clear()
	for {
		if stretch := s.proceed(until, most); stretch != nil {
			return stretch
		}
	}
}

// clear begins a new stretch.
func (s *Sim) clear() {
	for _, l := range s.lines {
		l.clear()
	}
	s.stretch.Events = s.stretch.Events[:0]
}

// proceed sends the next frame due before until, or hands the stretch out.
func (s *Sim) proceed(until int64, most int) *Stretch {
	due := until
	var g *instrument
	if len(s.queue) > 0 && s.queue[0].due < due {
		g, due = s.queue[0], s.queue[0].due
	}
	if len(s.events) > 0 && s.events[0].at <= due && s.events[0].at < s.end {
		due = s.events[0].at
		s.happen(due)
		return s.hand(due)
	}
	if g == nil {
		return s.hand(until)
	}
	l := s.lines[g.port]
	if most > 0 && len(l.batch.Bytes) > 0 && len(l.batch.Bytes)+longest > most {
		return s.hand(due)
	}
	if !g.delayed(l, due) {
		s.send(g, due, nil)
		g.advance()
	}
	s.queue.sink()
	return nil
}

const longest = 256 // bytes of a frame with its echo, for the bound of a batch

// happen takes all events due at one instant.
func (s *Sim) happen(at int64) {
	for len(s.events) > 0 && s.events[0].at <= at {
		e := s.events[0].event
		switch e.Kind {
		case Unplugged, Plugged:
			for i := range s.lines {
				if s.ports[i].Name == e.Port {
					s.lines[i].down = e.Kind == Unplugged
				}
			}
		}
		s.stretch.Events = append(s.stretch.Events, e)
		s.events = s.events[1:]
	}
}

// hand gives the stretch out.
func (s *Sim) hand(reached int64) *Stretch {
	s.stretch.Batches = s.stretch.Batches[:0]
	for i := range s.lines {
		if l := s.lines[i]; len(l.batch.Frames) > 0 || len(l.batch.Bytes) > 0 {
			s.stretch.Batches = append(s.stretch.Batches, l.batch)
		}
	}
	s.stretch.Reached, s.stretch.At = reached, s.Instant(reached)
	s.stretch.Done = reached >= s.end
	return &s.stretch
}

// Due is the instant of the next frame or event, in nanoseconds from the
// start, or End.
func (s *Sim) Due() int64 {
	due := s.end
	if len(s.queue) > 0 {
		due = min(due, s.queue[0].due)
	}
	if len(s.events) > 0 {
		due = min(due, s.events[0].at)
	}
	return due
}
