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
	for i := range s.lines {
		l := &s.lines[i]
		l.batch.Start, l.batch.Delay = l.sent, 0
		l.batch.Bytes, l.batch.Frames = l.batch.Bytes[:0], l.batch.Frames[:0]
	}
	s.stretch.Events = s.stretch.Events[:0]
	for {
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
		l := &s.lines[g.port]
		if most > 0 && len(l.batch.Bytes) > 0 && len(l.batch.Bytes)+longest > most {
			return s.hand(due)
		}
		if !g.delayed(l, due) {
			s.send(g, due, nil)
			g.advance()
		}
		s.queue.sink()
	}
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
		if l := &s.lines[i]; len(l.batch.Frames) > 0 || len(l.batch.Bytes) > 0 {
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

// send puts one frame of g on its line at an instant; asked is the request it
// answers, nil where it sends by itself.
func (s *Sim) send(g *instrument, at int64, asked []byte) {
	l := &s.lines[g.port]
	s.show(g, at)
	if l.down || s.off(at) {
		l.lost++
		return
	}
	begin := len(l.batch.Bytes)
	lead, damaged := 0, false
	for _, e := range l.touch {
		if !e.on(at, g) {
			continue
		}
		switch e.kind {
		case Stall:
			e.truth.Frames++
			return
		case Echo:
			if asked == nil {
				asked = g.encoder.Request()
			}
			l.batch.Bytes = append(l.batch.Bytes, asked...)
			lead = len(asked)
			e.truth.Frames++
		}
	}
	out, ok := g.encoder.Append(l.batch.Bytes, &g.value)
	if !ok {
		l.batch.Bytes = l.batch.Bytes[:begin]
		return
	}
	l.batch.Bytes = out
	for _, e := range l.touch {
		if (e.kind == Garble || e.kind == DropBytes) && e.on(at, g) && l.random.Float64() < e.share {
			l.spoil(e, begin+lead)
			e.truth.Frames++
			damaged = true
		}
	}
	l.batch.Frames = append(l.batch.Frames, Frame{
		Offset: l.sent + int64(lead), At: s.Instant(at), Name: g.name,
		MM: g.showedMM, Damaged: damaged || g.value.NoReading != "",
	})
	l.frames++
	l.sent += int64(len(l.batch.Bytes) - begin)
}

// spoil changes or drops one byte of the frame that begins at from.
func (l *line) spoil(e *effect, from int) {
	frame := l.batch.Bytes[from:]
	if len(frame) == 0 {
		return
	}
	at := l.random.IntN(len(frame))
	if e.kind == Garble {
		frame[at] ^= byte(1 + l.random.IntN(255))
		return
	}
	copy(frame[at:], frame[at+1:])
	l.batch.Bytes = l.batch.Bytes[:len(l.batch.Bytes)-1]
}

// off tells whether the recorder is without power.
func (s *Sim) off(at int64) bool {
	for _, c := range s.cuts {
		if c.From <= at && at < c.To {
			return true
		}
	}
	return false
}

// queue is a heap of instruments by the instant of their next frame, then by
// their place in the rig.
type queue []*instrument

func (q queue) before(i, j int) bool {
	a, b := q[i], q[j]
	return a.due < b.due || a.due == b.due && a.place < b.place
}

func (q *queue) push(g *instrument) {
	*q = append(*q, g)
	for i := len(*q) - 1; i > 0; {
		up := (i - 1) / 2
		if !q.before(i, up) {
			return
		}
		(*q)[i], (*q)[up] = (*q)[up], (*q)[i]
		i = up
	}
}

// sink puts the first back in order after its instant has changed.
func (q queue) sink() {
	for i := 0; ; {
		least := i
		for _, down := range []int{2*i + 1, 2*i + 2} {
			if down < len(q) && q.before(down, least) {
				least = down
			}
		}
		if least == i {
			return
		}
		q[i], q[least] = q[least], q[i]
		i = least
	}
}
