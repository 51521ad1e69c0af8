package ingest

import (
	"time"

	"gaugelog/device"
)

// A fault of the line or of an instrument spoils many frames; it is one event.
// So frames without a number and refused frames are gathered into a spell,
// which is written when it is over, from its first frame to its last, with
// their count. What a power cut may take of that is the count, never a reading.
const (
	// spellFirst and spellAgain are after how long a spell that lasts is
	// written for the first time, and then again.
	spellFirst = int64(2 * time.Minute)
	spellAgain = int64(time.Hour)
	// refusalsApart parts two spells of refused frames. Ports tell of them
	// at most once a minute, so one is known to be over after refusalsOver.
	refusalsApart = int64(30 * time.Second)
	refusalsOver  = int64(90 * time.Second)
)

// spell gathers what happens frame by frame. The zero value is none.
type spell struct {
	why        string
	n          int64 // not yet written
	from, to   int64 // boot-time instants: the first and the last of these
	heardAt    int64 // boot-time instant at which they were told of last
	wroteAt    int64 // boot-time instant at which it was written last, or began
	on, lasted bool
}

// add counts n more, told of at now.
func (s *spell) add(why string, n, from, to, now int64) {
	if !s.on {
		*s = spell{on: true, wroteAt: from}
	}
	if s.n == 0 {
		s.from = from
	}
	s.why, s.to, s.heardAt = why, to, now
	s.n += n
}

// lasts reports that it has gone on for long enough to be written.
func (s *spell) lasts(now int64) bool {
	if s.lasted {
		return s.n > 0 && now-s.wroteAt >= spellAgain
	}
	return s.n > 0 && now-s.wroteAt >= spellFirst
}

// write makes an event of what was gathered.
func (r *Recorder) write(s *spell, kind, gauge string) {
	if s.n > 0 {
		h := Happening{Kind: kind, Gauge: gauge, Detail: s.why, N: s.n}
		if s.from != s.to {
			h.From = s.from + r.offset
		}
		r.happenedAt(h, s.to+r.offset)
	}
	s.n, s.wroteAt, s.lasted = 0, r.now, true
}

// refusals are the refused frames of one port.
type refusals struct {
	port string
	spell
}

// refused notes refused frames.
func (r *Recorder) refused(d *device.Reading) {
	var s *refusals
	for _, known := range r.refusals {
		if known.port == d.Port {
			s = known
		}
	}
	if s == nil {
		s = &refusals{port: d.Port}
		r.refusals = append(r.refusals, s)
	}
	from, to := d.First.Boot, d.Last.Boot
	if d.First == (device.Instant{}) {
		from, to = r.now, r.now
	}
	if s.on && from-s.to > refusalsApart {
		r.write(&s.spell, FramesRefused, r.onlyOn(s.port))
		s.on = false
	}
	s.add(d.Port+": "+d.Detail, int64(d.N), from, to, r.now)
}

// refusing reports that damaged frames have been coming on the port.
func (r *Recorder) refusing(port string) bool {
	for _, s := range r.refusals {
		if s.port == port {
			return s.on && r.now-s.heardAt < refusalsOver
		}
	}
	return false
}

// noNumber notes a frame without a number. Another reason is another spell.
func (r *Recorder) noNumber(i int, d *device.Reading) {
	s := &r.silences[i]
	s.heard = max(s.heard, d.At.Boot)
	if s.spell.on && s.spell.why != d.Detail {
		r.endSpell(i)
	}
	s.spell.add(d.Detail, 1, r.now, r.now, r.now)
}

// endSpell writes what is left of a gauge's spell: a number came.
func (r *Recorder) endSpell(i int) {
	s := &r.silences[i].spell
	if s.on {
		r.write(s, NoReading, r.channels[i].name)
		s.on = false
	}
}

// tellSpells writes the spells that are over and those that last, or all.
func (r *Recorder) tellSpells(all bool) {
	r.tellSayings()
	for i := range r.silences {
		if s := &r.silences[i].spell; s.n > 0 && (all || s.lasts(r.now)) {
			r.write(s, NoReading, r.channels[i].name)
		}
	}
	for _, s := range r.refusals {
		over := r.now-s.heardAt >= refusalsOver
		if s.n > 0 && (all || over || s.lasts(r.now)) {
			r.write(&s.spell, FramesRefused, r.onlyOn(s.port))
		}
		if over {
			s.on = false
		}
	}
}
