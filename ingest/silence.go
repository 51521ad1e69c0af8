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

// silence watches one gauge or probe for what it does not say. What it does
// not say while its port is lost, or while it shows no number, is told by
// those events: one fault is one event.
type silence struct {
	after  int64 // stated; 0: three times the interval seen; negative: never
	last   int64 // boot-time instant of the last reading
	usual  int64 // interval between readings, slowly following
	heard  int64 // boot-time instant of the last sign of life: a frame, the return of its port
	silent bool  // no reading came for too long
	told   bool  // an event said so
	port   portState
	spell  spell // of frames that carry no number
}

// portState is how the port of a gauge stands.
type portState uint8

const (
	portThere portState = iota
	portLost            // an event said so
	portDeaf            // reopened in vain, after the silence was told
)

func newSilence(rig *config.Rig, frame string, stated *config.Duration, now int64) silence {
	s := silence{last: now, heard: now}
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
	switch {
	case s.told:
		r.happened(Happening{Kind: Gap, Gauge: r.channels[i].name, From: s.last + r.offset,
			Detail: "no readings for " + seconds(at-s.last)})
	case s.silent || s.spell.on || s.heard > s.last: // no interval of its own making
	case r.channels[i].seen:
		d := max(0, at-s.last)
		if s.usual == 0 {
			s.usual = d
		}
		s.usual += (d - s.usual) / 8
	}
	s.silent, s.told = false, false
	s.last = max(s.last, at)
	s.heard = s.last
	r.endSpell(i)
}

// watchSilence finds the gauges and probes that have been silent for too long.
// Where damaged frames come on the port, that is what is told of it.
func (r *Recorder) watchSilence() {
	for i := range r.silences {
		s := &r.silences[i]
		limit := s.limit()
		s.silent = s.silent || r.now-s.last > limit
		if s.told || s.port != portThere || r.now-s.heard <= limit || r.refusing(r.channels[i].port) {
			continue
		}
		s.told = true
		r.happened(Happening{Kind: NoReading, Gauge: r.channels[i].name, From: s.last + r.offset,
			Detail: "silent: nothing came for " + seconds(r.now-s.heard)})
	}
}

// portMoved notes the loss or return of the port of a gauge or probe, and
// reports whether that is news: a port that was reopened because its gauges
// are silent is none, where the silence was told.
func (s *silence) portMoved(d *device.Reading, now int64) bool {
	before := s.port
	switch {
	case d.Kind == device.PortBack:
		s.port, s.heard = portThere, max(s.heard, now)
	case d.Deaf && s.told:
		s.port = portDeaf
	default:
		s.port = portLost
	}
	return s.port == portLost || before == portLost
}
