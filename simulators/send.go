package simulators

import "math/rand/v2"

// line is what is being sent on a port.
type line struct {
	sent   int64
	batch  Batch
	frames int    // sent
	lost   int    // sent while nobody could read
	down   bool   // unplugged
	heard  []byte // of a request not yet whole
	touch  []*effect
	random *rand.Rand
	// spoilt is true where what was sent last may swallow the next frame.
	spoilt bool
}

// clear begins a new batch.
func (l *line) clear() {
	l.batch.Start, l.batch.Delay = l.sent, 0
	l.batch.Bytes, l.batch.Frames = l.batch.Bytes[:0], l.batch.Frames[:0]
}

// Counts are the frames of one gauge or probe, each in one of them.
type Counts struct {
	Name string
	// Intact frames were sent whole and readable, with a number.
	Intact int
	// Doubtful ones are whole, but what stands beside them is not
	// ([Frame.Doubtful]).
	Doubtful int
	// NoReading are whole frames that say there is no number.
	NoReading int
	// Damaged are those a line fault touched.
	Damaged int
	// Silent are those that were due and not sent: a stalled line, or a frame
	// that has no way to say what the gauge shows.
	Silent int
	// Lost were sent with nobody to read them: unplugged, or the recorder
	// without power.
	Lost int
}

// Due are all frames that were due.
func (c Counts) Due() int {
	return c.Intact + c.Doubtful + c.NoReading + c.Damaged + c.Silent + c.Lost
}

// add counts a frame that was sent.
func (c *Counts) add(f *Frame) {
	switch {
	case f.NoReading:
		c.NoReading++
	case f.Damaged:
		c.Damaged++
	case f.Doubtful:
		c.Doubtful++
	default:
		c.Intact++
	}
}

// Counts lists the frames of every instrument so far, in the rig's order,
// gauges before probes.
func (s *Sim) Counts() []Counts {
	out := make([]Counts, len(s.gauges))
	for i, g := range s.gauges {
		out[i] = g.counts
	}
	return out
}

// send puts one frame of g on its line at an instant; asked is the request it
// answers, nil where it sends by itself.
func (s *Sim) send(g *instrument, at int64, asked []byte) {
	l := s.lines[g.port]
	s.show(g, at)
	if s.unheard(l, g, at) {
		return
	}
	begin := len(l.batch.Bytes)
	p := passage{doubtful: l.spoilt || g.overdue}
	l.spoilt = false
	if len(l.touch) > 0 {
		l.lead(g, at, asked, &p)
	}
	if !p.instead {
		out, ok := g.encoder.Append(l.batch.Bytes, &g.value)
		if !ok {
			l.batch.Bytes = l.batch.Bytes[:begin]
			g.counts.Silent++
			return
		}
		l.batch.Bytes = out
	}
	if len(l.touch) > 0 {
		l.harm(g, at, begin, &p)
	}
	p.length = len(l.batch.Bytes) - begin - p.lead
	s.note(l, g, at, p)
	l.sent += int64(p.lead + p.length)
}

// passage is what befell a frame on its line.
type passage struct {
	lead     int  // bytes before it, of echo and noise
	length   int  // bytes of it
	instead  bool // something else was sent in its place
	damaged  bool
	doubtful bool
}

// unheard tells whether nothing of a frame comes through.
func (s *Sim) unheard(l *line, g *instrument, at int64) bool {
	if l.down || len(s.cuts) > 0 && s.off(at) {
		l.lost++
		g.counts.Lost++
		l.spoilt = false // a port is opened anew
		return true
	}
	for _, e := range l.touch {
		if e.kind == Stall && e.on(at, g) {
			e.truth.Frames++
			g.counts.Silent++
			return true
		}
	}
	return false
}

// lead puts on the line what comes before a frame, or in its place.
func (l *line) lead(g *instrument, at int64, asked []byte, p *passage) {
	begin := len(l.batch.Bytes)
	for _, e := range l.touch {
		if !e.on(at, g) {
			continue
		}
		switch e.kind {
		case Echo:
			if asked == nil {
				asked = g.encoder.Request()
			}
			l.batch.Bytes = append(l.batch.Bytes, asked...)
			e.truth.Frames++
		case Noise:
			if l.random.Float64() < e.share {
				l.babble(1 + l.random.IntN(mostNoise))
				e.truth.Frames++
				p.doubtful = true
			}
		case Endless:
			p.instead = true
			e.truth.Frames++
		}
	}
	p.lead = len(l.batch.Bytes) - begin
	if p.instead {
		p.damaged, l.spoilt = true, true
		for range endlessBytes {
			l.batch.Bytes = append(l.batch.Bytes, byte('0'+l.random.IntN(10)))
		}
	}
}

const (
	mostNoise    = 24  // bytes of one burst
	endlessBytes = 128 // in the place of one frame
)

// babble puts random bytes on the line.
func (l *line) babble(n int) {
	for range n {
		l.batch.Bytes = append(l.batch.Bytes, byte(l.random.IntN(256)))
	}
}

// harm damages a frame that begins lead bytes after begin.
func (l *line) harm(g *instrument, at int64, begin int, p *passage) {
	if p.instead {
		return
	}
	for _, e := range l.touch {
		if (e.kind == Garble || e.kind == DropBytes) && e.on(at, g) && l.random.Float64() < e.share {
			l.spoil(e, g, begin+p.lead)
			e.truth.Frames++
			p.damaged = true
		}
	}
}

// spoil changes or drops one byte of the frame that begins at from. Where that
// is part of its end, or the frame has none, the next one may suffer with it;
// not that of an instrument that is asked, which the next question sets right.
func (l *line) spoil(e *effect, g *instrument, from int) {
	frame := l.batch.Bytes[from:]
	if len(frame) == 0 {
		return
	}
	at := l.random.IntN(len(frame))
	if !g.askedFor() && (g.ends == 0 || at >= len(frame)-g.ends) {
		l.spoilt = true
	}
	if e.kind == Garble {
		frame[at] ^= byte(1 + l.random.IntN(255))
		return
	}
	copy(frame[at:], frame[at+1:])
	l.batch.Bytes = l.batch.Bytes[:len(l.batch.Bytes)-1]
}

// note enters a frame in the batch and in the counts.
func (s *Sim) note(l *line, g *instrument, at int64, p passage) {
	none := g.value.NoReading != ""
	l.batch.Frames = append(l.batch.Frames, Frame{
		Offset: l.sent + int64(p.lead), Lead: p.lead, Length: p.length, At: s.Instant(at), Name: g.name, MM: g.showedMM, Damaged: p.damaged || none,
		Doubtful: p.doubtful, NoReading: none && !p.damaged, Status: g.value.Status,
	})
	f := &l.batch.Frames[len(l.batch.Frames)-1]
	l.frames++
	g.counts.add(f)
	for _, e := range g.live {
		e.truth.Frames++
	}
	if s.frames != nil {
		s.frames.add(f)
	}
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
