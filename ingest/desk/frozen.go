package desk

import (
	"fmt"
	"math"
	"time"

	"gaugelog/config"
	"gaugelog/ingest/alarm"
)

// stillness is how long a gauge's indication has been the same, and what the
// others showed when it became so.
type stillness struct {
	seen   bool
	turned bool // it has shown something else since the start
	value  float64
	from   int64 // ns by the wall clock
	latest int64
	others []float64
}

// moved follows the indications for the frozen alarm.
func (d *Desk) moved(i int, t int64, v float64) {
	s := &d.still[i]
	s.latest = t
	if s.seen && s.value == v {
		return
	}
	if s.others == nil {
		s.others = make([]float64, len(d.still))
	}
	s.seen, s.turned, s.value, s.from = true, s.seen, v, t
	for k := range d.still {
		s.others[k] = math.NaN()
		if d.still[k].seen {
			s.others[k] = d.still[k].value
		}
	}
}

// frozenFacts finds gauges that show the same while others move. Repeats alone
// are ordinary when creep is slow: the neighbours decide.
func (d *Desk) frozenFacts() []alarm.Fact {
	var out []alarm.Fact
	after := int64(d.o.Rig.Alarms.FrozenAfter.Value * 1e9)
	for i := range d.still {
		s := &d.still[i]
		if !d.shouldMove(i) {
			continue
		}
		f := alarm.Fact{Cause: "frozen", Subject: d.o.Rig.Gauges[i].Name, Wish: alarm.Over}
		if !s.turned {
			f.Wish = alarm.Leave // since the start nothing can be said of it
		}
		if s.seen && s.latest-s.from >= after {
			others := 0
			for k := range d.still {
				if k != i && d.shouldMove(k) && math.Abs(d.still[k].value-s.others[k]) > movedCounts*d.o.Rig.Gauges[k].Resolution.Value {
					others++
				}
			}
			f.Wish = alarm.Leave
			if others >= fewestOthers {
				f.Wish = alarm.Raise
				f.Text = fmt.Sprintf("it has shown %s mm for %s while %d other gauges moved", Fixed(s.value, s.resolution(d, i)), Span(time.Duration(s.latest-s.from)), others)
			}
		}
		out = append(out, f)
	}
	return out
}

func (s *stillness) resolution(d *Desk, i int) float64 { return d.o.Rig.Gauges[i].Resolution.Value }

// shouldMove says whether a gauge sees the beam away from its supports.
func (d *Desk) shouldMove(i int) bool {
	g := &d.o.Rig.Gauges[i]
	if g.Sees != "beam" && g.Sees != "" {
		return false
	}
	for _, s := range d.o.Rig.Supports {
		if math.Abs(s.At.Value-g.At.Value) < atSupportNear*span(d.o.Rig) {
			return false
		}
	}
	return true
}

// span is the distance between the outermost supports, or the beam's length
// where it has one support only, mm.
func span(rig *config.Rig) float64 {
	low, high := math.Inf(1), math.Inf(-1)
	for _, s := range rig.Supports {
		low, high = min(low, s.At.Value), max(high, s.At.Value)
	}
	if high > low {
		return high - low
	}
	return rig.Specimen.Length.Value
}
