package device

import (
	"fmt"
	"math"
	"time"

	"gaugelog/device/frame"
)

// take is called by a decoder for each frame it found.
func (p *pump) take(s *slot, f *frame.Frame) {
	at := p.at(f.Offset)
	if f.Rejected != frame.None {
		why := f.Rejected.String()
		if f.Exception != 0 {
			why += ": " + frame.ExceptionText(f.Exception)
		}
		p.refuse(s, f, at, why)
		return
	}
	in := s.sender(f.Channel)
	if in == nil {
		p.refuse(s, f, at, "from a channel no gauge has")
		return
	}
	if s.asked != nil && !p.poll.expects(in) && !in.button {
		p.refuse(s, f, at, "an answer nobody waited for")
		return
	}
	p.lastGood, p.deafs = time.Now(), 0
	p.frames.Add(1)
	p.lastWall.Store(at.Wall)
	p.lastBoot.Store(at.Boot)
	p.answering.Store(true)
	p.regain(at)
	p.hand(in, f, at)
	p.refusals.due(p, at)
	p.poll.answered(in, nil)
}

// sender finds the instrument a frame on this decoder came from.
func (s *slot) sender(channel []byte) *instrument {
	if len(s.senders) == 1 && (channel == nil || s.senders[0].spec.Kind == string(frame.ModbusReply)) {
		return s.senders[0] // a modbus decoder has compared the address itself
	}
	for _, in := range s.senders {
		if in.channel == string(channel) {
			return in
		}
	}
	if len(s.senders) == 1 && s.senders[0].channel == "" {
		return s.senders[0]
	}
	return nil
}

// hand gives the frame to every rig that listens to the instrument.
func (p *pump) hand(in *instrument, f *frame.Frame, at Instant) {
	r := Reading{Port: p.plan.name, At: at, Status: f.Status, Celsius: math.NaN(), HumidityPercent: math.NaN()}
	newUnit := false
	if f.HasValue {
		r.Shown, r.MM, r.Unit = f.Value.Float64(), f.Value.MM(f.Unit), f.Unit.String()
		newUnit = in.unit != frame.NoUnit && in.unit != f.Unit
		in.unit = f.Unit
	}
	for i := range in.targets {
		t := &in.targets[i]
		r.Rig, r.Gauge, r.Probe = t.rig, t.gauge, t.probe
		switch {
		case f.NoReading != "":
			r.Kind, r.Detail = NoReading, f.NoReading
		case t.probe != "":
			r.Kind, r.Detail = Ambient, ""
			r.Celsius, r.HumidityPercent = number(f, t.temperature), number(f, t.humidity)
			if math.IsNaN(r.Celsius) && math.IsNaN(r.HumidityPercent) {
				r.Kind, r.Detail = NoReading, "the frame holds no number"
			}
		default:
			if newUnit {
				p.o.Sink.Take(Reading{Kind: UnitKey, Rig: t.rig, Gauge: t.gauge, Port: p.plan.name, At: at, Unit: r.Unit})
			}
			r.Kind, r.Detail = Indication, ""
		}
		p.o.Sink.Take(r)
	}
}

// number reads a probe's field; NaN where the frame has none.
func number(f *frame.Frame, field int) float64 {
	if field < 0 || field >= len(f.Fields) || !f.Fields[field].Number {
		return math.NaN()
	}
	return f.Fields[field].Value.Float64()
}

// refuse counts a damaged or foreign frame, unless another decoder on the
// port may still read the same bytes.
func (p *pump) refuse(s *slot, f *frame.Frame, at Instant, why string) {
	if !p.refusals.vote(p, s, f) {
		return
	}
	p.refused.Add(1)
	p.refusals.add(why, f.Raw, at)
	p.refusals.due(p, at)
	// A damaged answer is the answer; a foreign one is not.
	if s.asked != nil && f.Rejected != frame.None && f.Rejected != frame.BadAddress {
		p.poll.answered(s.asked, ErrRefused)
	}
}

// refusals sums the refused frames of a port between two readings of them.
type refusals struct {
	n           int
	first, last Instant
	why         string
	raw         []byte // of the last one, its beginning
	told        bool
	toldAt      Instant
	votes       [16]votes
	oldest      int
}

// votes counts the decoders that refused the bytes at one offset.
type votes struct {
	offset int64
	n      int
}

// vote reports whether every listening decoder has now refused the bytes at
// the frame's offset.
func (r *refusals) vote(p *pump, s *slot, f *frame.Frame) bool {
	if p.listening() == s {
		return true
	}
	listening := 0
	for _, other := range p.slots {
		if other.asked == nil || other.asked == p.poll.last {
			listening++
		}
	}
	for i := range r.votes {
		v := &r.votes[i]
		if v.n > 0 && v.offset == f.Offset {
			if v.n++; v.n >= listening {
				v.n = 0
				return true
			}
			return false
		}
	}
	r.votes[r.oldest%len(r.votes)] = votes{f.Offset, 1}
	r.oldest++
	return false
}

func (r *refusals) add(why string, raw []byte, at Instant) {
	if r.n == 0 {
		r.first = at
	}
	r.n++
	r.last = at
	r.why = why
	r.raw = append(r.raw[:0], raw[:min(len(raw), 40)]...)
}

// due tells of refused frames, the first at once, then at most once in
// Options.RefusedEvery.
func (r *refusals) due(p *pump, at Instant) {
	if r.n > 0 && (!r.told || time.Duration(at.Boot-r.toldAt.Boot) >= p.o.RefusedEvery) {
		r.flush(p, at)
	}
}

func (r *refusals) flush(p *pump, at Instant) {
	if r.n == 0 {
		return
	}
	p.events(Reading{Kind: FramesRefused, At: at, N: r.n, First: r.first, Last: r.last, Detail: fmt.Sprintf("last: %s: %q", r.why, r.raw)})
	r.n, r.told, r.toldAt = 0, true, at
}
