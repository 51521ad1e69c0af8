package ingest

import (
	"math"
	"time"

	"gaugelog/config"
	"gaugelog/device"
)

// leastSilence keeps a fast gauge from being called silent at each hiccup
// where the rig states no silent_after.
const leastSilence = int64(3 * time.Second)

// spellEvery is how often a lasting spell of frames without a number is noted.
const spellEvery = int64(time.Minute)

// silence watches one gauge or probe for what it does not say.
type silence struct {
	after  int64 // stated; 0: three times the interval seen; negative: never
	last   int64 // boot-time instant of the last reading
	usual  int64 // interval between readings, slowly following
	silent bool

	// A spell of frames that carry no number.
	spell      int64 // not yet noted
	spellFrom  int64 // wall clock
	spellNoted int64 // boot-time instant
	inSpell    bool
	why        string
}

func newSilence(rig *config.Rig, frame string, stated *config.Duration, now int64) silence {
	s := silence{last: now}
	for i := range rig.Frames {
		f := &rig.Frames[i]
		if f.Name != frame {
			continue
		}
		if f.Button {
			s.after = -1
		} else if f.Every != nil {
			s.after = 3 * nanoseconds(f.Every)
		}
	}
	if stated != nil {
		s.after = nanoseconds(stated)
	}
	return s
}

// limit is how long nothing may come, or a very long time where it may for ever.
func (s *silence) limit() int64 {
	switch {
	case s.after > 0:
		return s.after
	case s.after < 0 || s.usual == 0:
		return math.MaxInt64
	}
	return max(leastSilence, 3*s.usual)
}

// spoke notes that a number came.
func (r *Recorder) spoke(i int, at int64) {
	s := &r.silences[i]
	if s.silent {
		s.silent = false
		r.happened(Happening{Kind: Gap, Gauge: r.channels[i].name, From: s.last + r.offset,
			Detail: "no readings for " + seconds(at-s.last)})
	} else if r.channels[i].seen {
		d := max(0, at-s.last)
		if s.usual == 0 {
			s.usual = d
		}
		s.usual += (d - s.usual) / 8
	}
	s.last = max(s.last, at)
	if s.inSpell {
		r.tellSpell(i)
		s.inSpell = false
	}
}

// noNumber notes a frame without a number: the first of a spell at once, the
// others summed.
func (r *Recorder) noNumber(i int, d *device.Reading) {
	s := &r.silences[i]
	s.spell++
	if !s.inSpell || s.why != d.Detail {
		s.inSpell, s.why, s.spellFrom = true, d.Detail, 0
		r.tellSpell(i)
		return
	}
	if s.spellFrom == 0 {
		s.spellFrom = r.wall()
	}
}

func (r *Recorder) tellSpell(i int) {
	s := &r.silences[i]
	if s.spell == 0 {
		return
	}
	r.happened(Happening{Kind: NoReading, Gauge: r.channels[i].name, Detail: s.why, From: s.spellFrom, N: s.spell})
	s.spell, s.spellFrom, s.spellNoted = 0, 0, r.now
}

// tellSpells notes what has summed up for a minute, or all of it.
func (r *Recorder) tellSpells(all bool) {
	for i := range r.silences {
		s := &r.silences[i]
		if s.spell > 0 && (all || r.now-s.spellNoted >= spellEvery) {
			r.tellSpell(i)
		}
	}
}

// watchSilence finds the gauges and probes that have been silent for too long.
func (r *Recorder) watchSilence() {
	for i := range r.silences {
		s := &r.silences[i]
		if !s.silent && r.now-s.last > s.limit() {
			s.silent = true
			r.happened(Happening{Kind: NoReading, Gauge: r.channels[i].name, From: s.last + r.offset,
				Detail: "silent: nothing came for " + seconds(r.now-s.last)})
		}
	}
}
