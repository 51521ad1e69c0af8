package simulators

import (
	"bytes"
	"fmt"

	"gaugelog/simulators/wire"
)

// Ask is for gauges that wait for a request ([Options.Asked]): it takes bytes
// that a port's reader wrote at an instant (nanoseconds from the start, never
// earlier than before) and returns what the gauges answer to the requests in
// them, or nothing. A request may come in pieces. A Modbus slave answers every
// read of its registers and refuses what it does not have; an SCPI instrument
// answers *IDN? too. The batch's slices are overwritten by the next call of
// Ask or Next.
func (s *Sim) Ask(port int, heard []byte, at int64) Batch {
	l := s.lines[port]
	l.clear()
	l.heard = append(l.heard, heard...)
	for on := s.on(l, at); l.answer(on, at); {
	}
	l.trim()
	return l.batch
}

// on lists the instruments that wait for requests on a line.
func (s *Sim) on(l *line, at int64) []*instrument {
	var out []*instrument
	for _, g := range s.gauges {
		if s.lines[g.port] == l && g.askedFor() && !g.elsewhere && at < s.end {
			out = append(out, g)
		}
	}
	return out
}

// answer answers the first request among the bytes heard; false where none is
// whole yet.
func (l *line) answer(on []*instrument, at int64) bool {
	return len(on) > 0 && (l.answerCall(on, at) || l.answerLine(on, at) || l.answerRequest(on, at))
}

// trim forgets what is older than any request is long.
func (l *line) trim() {
	if len(l.heard) > longest {
		l.forget(len(l.heard) - longest)
	}
}

// forget drops what was heard up to end.
func (l *line) forget(end int) { l.heard = append(l.heard[:0], l.heard[end:]...) }

// Press presses the button of a gauge that sends on it, at an instant
// (nanoseconds from the start), and returns what it sends. The batch's slices
// are overwritten by the next call of Ask, Press or Next.
func (s *Sim) Press(gauge string, at int64) (Batch, error) {
	for _, g := range s.gauges {
		if g.name == gauge && g.button {
			s.lines[g.port].clear()
			s.send(g, at, nil)
			return s.lines[g.port].batch, nil
		}
	}
	return Batch{}, fmt.Errorf("there is no gauge %q with a button", gauge)
}

// answerRequest answers the first request of fixed bytes.
func (l *line) answerRequest(on []*instrument, at int64) bool {
	var first *instrument
	end := 0
	for _, g := range on {
		if g.calls || g.talks {
			continue
		}
		request := g.encoder.Request()
		if i := bytes.Index(l.heard, request); i >= 0 && (first == nil || i+len(request) < end) {
			first, end = g, i+len(request)
		}
	}
	if first == nil {
		return false
	}
	l.forget(end)
	first.sim.send(first, l.late(first, at), first.encoder.Request())
	first.overdue = false
	return true
}

// late is the instant of an answer to a request heard at an instant.
func (l *line) late(g *instrument, at int64) int64 {
	l.batch.Delay = g.sim.turn
	for _, e := range l.touch {
		if e.kind == LateReply && e.on(at, g) {
			e.truth.Frames++
			l.batch.Delay += e.delay
			g.overdue = g.timeout > 0 && e.delay >= g.timeout
		}
	}
	return at + l.batch.Delay
}

// answerLine answers the first line of text with instruments that understand
// lines. A line that asks nothing of them is passed over.
func (l *line) answerLine(on []*instrument, at int64) bool {
	end := bytes.IndexAny(l.heard, "\r\n")
	if end < 0 {
		return false
	}
	talks := false
	for _, g := range on {
		if !g.talks {
			continue
		}
		talks = true
		talker := g.encoder.(wire.Talker)
		switch talker.Understands(l.heard[:end]) {
		case wire.AskedValue:
			l.forget(end + 1)
			g.sim.send(g, l.late(g, at), g.encoder.Request())
			g.overdue = false
			return true
		case wire.AskedIdentity:
			l.forget(end + 1)
			if !l.down && !g.sim.off(at) {
				l.batch.Bytes = talker.AppendIdentity(l.batch.Bytes)
				l.batch.Delay = g.sim.turn
				l.sent = l.batch.Start + int64(len(l.batch.Bytes))
			}
			return true
		}
	}
	if talks {
		l.forget(end + 1)
	}
	return talks
}

// answerCall answers the first request to Modbus slaves. One to an address
// where nobody is gets no answer.
func (l *line) answerCall(on []*instrument, at int64) bool {
	var slaves []*instrument
	for _, g := range on {
		if g.calls {
			slaves = append(slaves, g)
		}
	}
	if len(slaves) == 0 {
		return false
	}
	call, end, ok := wire.FindCall(l.heard)
	if !ok {
		return false
	}
	call.Raw = bytes.Clone(call.Raw)
	l.forget(end)
	var asked []*instrument
	for _, g := range slaves {
		if g.encoder.(wire.Registers).Address() == call.Address {
			asked = append(asked, g)
		}
	}
	if len(asked) > 0 {
		l.answerSlave(asked, call, l.late(asked[0], at))
	}
	return true
}

// answerSlave sends the answer of the instruments at one bus address. The line's
// faults happen to it once, as to a frame of the first of them.
func (l *line) answerSlave(asked []*instrument, call wire.Call, at int64) {
	g := asked[0]
	parts := make([]wire.Registers, len(asked))
	for i, one := range asked {
		parts[i] = one.encoder.(wire.Registers)
	}
	if g.sim.unheard(l, g, at) {
		return
	}
	begin := len(l.batch.Bytes)
	p := passage{doubtful: l.spoilt || g.overdue}
	l.spoilt = false
	l.lead(g, at, call.Raw, &p)
	var whole []int
	if !p.instead {
		l.batch.Bytes, whole = wire.AppendAnswer(l.batch.Bytes, call, parts, func(i int) *wire.Value {
			asked[i].sim.show(asked[i], at)
			return &asked[i].value
		})
	}
	l.harm(g, at, begin, &p)
	p.length = len(l.batch.Bytes) - begin - p.lead
	for _, i := range whole {
		asked[i].sim.note(l, asked[i], at, p)
	}
	g.overdue = false
	l.sent += int64(p.lead + p.length)
}
