package simulators

import "bytes"

// Ask is for gauges that wait for a request ([Options.Asked]): it takes bytes
// that a port's reader wrote at an instant (nanoseconds from the start, never
// earlier than before) and returns what the gauges answer to the requests in
// them, or nil. A request may come in pieces. The batch's slices are
// overwritten by the next call of Ask or Next.
func (s *Sim) Ask(port int, heard []byte, at int64) Batch {
	l := &s.lines[port]
	l.batch.Start, l.batch.Delay = l.sent, 0
	l.batch.Bytes, l.batch.Frames = l.batch.Bytes[:0], l.batch.Frames[:0]
	l.heard = append(l.heard, heard...)
	for at < s.end {
		g, end := s.called(port)
		if g == nil {
			break
		}
		request := append([]byte(nil), g.encoder.Request()...)
		l.heard = append(l.heard[:0], l.heard[end:]...)
		l.batch.Delay = s.turn
		for _, e := range l.touch {
			if e.kind == LateReply && e.on(at, g) {
				e.truth.Frames++
				l.batch.Delay += e.delay
			}
		}
		s.send(g, at+l.batch.Delay, request)
	}
	if len(l.heard) > longest {
		l.heard = append(l.heard[:0], l.heard[len(l.heard)-longest:]...)
	}
	return l.batch
}

// called finds the first request heard on a port and where it ends.
func (s *Sim) called(port int) (*instrument, int) {
	var first *instrument
	end := 0
	for _, g := range s.gauges {
		if g.port != port || g.encoder.Request() == nil {
			continue
		}
		if i := bytes.Index(s.lines[port].heard, g.encoder.Request()); i >= 0 && (first == nil || i+len(g.encoder.Request()) < end) {
			first, end = g, i+len(g.encoder.Request())
		}
	}
	return first, end
}
