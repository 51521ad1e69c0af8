package history

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strings"

	"gaugelog/config"
	"gaugelog/ingest/segment"
)

// recordedGaps returns the gaps of a run that gaugelog recorded: those of which
// its events tell, and intervals that its sampling does not explain.
func recordedGaps(h *History, starts []segment.Start) []Gap {
	all := runGaps(h, starts)
	per := make([][]Gap, len(h.Rig.Gauges))
	for i := range h.Rig.Gauges {
		told := mergeGaps(toldGaps(h, h.Rig.Gauges[i].Name, all))
		for _, g := range h.unexplained(i) {
			if !covered(g, told) && !covered(g, all) {
				told = append(told, g)
			}
		}
		per[i] = told
	}
	all = append(all, joinGaps(per, h.GaugeReadings)...)
	slices.SortStableFunc(all, func(a, b Gap) int { return cmp.Compare(a.From, b.From) })
	return all
}

// runGaps are the gaps of the whole run: between one recorder of it and the
// next. The events stand in the order of the file here.
func runGaps(h *History, starts []segment.Start) []Gap {
	var out []Gap
	stopped := false
	for i := range h.Events {
		e := &h.Events[i]
		switch {
		case e.Kind == "stopped":
			stopped = true
		case e.Kind == "started":
			stopped = false
		case e.Kind == "gap" && e.Gauge == "":
			g := Gap{From: e.From, To: e.Time, Why: brokeOff(stopped, starts, e.Time)}
			// The clock of the recorder before may have been wrong.
			if t, ok := h.lastBefore(e.Time); ok && (g.From >= g.To || t > g.From) {
				g.From = t
			}
			if g.From < g.To {
				out = append(out, g)
			}
		}
	}
	return out
}

// brokeOff says why nothing was recorded before a recorder began at t.
func brokeOff(stopped bool, starts []segment.Start, t int64) string {
	if stopped {
		return "the recording had been stopped and was taken up again"
	}
	why := "the recording broke off without being stopped"
	for i := 1; i < len(starts); i++ {
		if d := starts[i].Time - t; d > -second && d < second {
			if starts[i].Boot != starts[i-1].Boot {
				return why + ", and the machine was started anew: a power cut or a restart"
			}
			return why + " while the machine ran on"
		}
	}
	return why
}

// lastBefore returns the last reading of any gauge before the last edge of
// bins not behind t.
func (h *History) lastBefore(t int64) (last int64, ok bool) {
	for g := range h.Rig.Gauges {
		bins := h.Bins(g)
		n, _ := slices.BinarySearchFunc(bins, t, func(b Bin, t int64) int {
			if b.To <= t {
				return -1
			}
			return 1
		})
		if n > 0 && (!ok || bins[n-1].LastTime > last) {
			last, ok = bins[n-1].LastTime, true
		}
	}
	return last, ok
}

// toldGaps are one gauge's gaps as the events tell them.
func toldGaps(h *History, name string, all []Gap) []Gap {
	var out []Gap
	var lost, silent *Event
	add := func(from, to int64, why string) {
		if from < to && from != 0 {
			out = append(out, Gap{Gauge: name, From: from, To: to, Why: why})
		}
	}
	port := func(to int64) {
		if lost != nil {
			add(lost.Time, to, "its port was lost ("+lost.Detail+")")
		}
		lost = nil
	}
	quiet := func(to int64) {
		if silent != nil {
			add(silent.From, to, "the gauge fell silent")
		}
		silent = nil
	}
	for i := range h.Events {
		e := &h.Events[i]
		if e.Kind == "stopped" || e.Kind == "started" || e.Kind == "gap" && e.Gauge == "" {
			// Nothing is known of the gauge beyond its recorder.
			until := e.Time
			for _, g := range all {
				if e.Kind == "gap" && g.To == e.Time {
					until = g.From
				}
			}
			port(until)
			quiet(until)
			continue
		}
		if e.Gauge != name {
			continue
		}
		switch {
		case e.Kind == "port-lost" && lost == nil:
			lost = e
		case e.Kind == "port-back":
			port(e.Time)
		case e.Kind == "no-reading" && e.From != 0 && strings.HasPrefix(e.Detail, "silent"):
			silent = e
		case e.Kind == "gap":
			silent = nil
			add(e.From, e.Time, e.Detail)
		case e.Kind == "dropped":
			add(e.From, e.Time, fmt.Sprintf("%d %s", max(e.N, 1), e.Detail))
		}
	}
	port(h.Last)
	quiet(h.Last)
	return out
}

// mergeGaps makes one of gaps that overlap, with all their reasons.
func mergeGaps(gaps []Gap) []Gap {
	slices.SortStableFunc(gaps, func(a, b Gap) int { return cmp.Compare(a.From, b.From) })
	out := gaps[:0]
	for _, g := range gaps {
		if n := len(out); n > 0 && g.From <= out[n-1].To {
			last := &out[n-1]
			last.To = max(last.To, g.To)
			if !strings.Contains(last.Why, g.Why) {
				last.Why += "; " + g.Why
			}
			continue
		}
		out = append(out, g)
	}
	return out
}

// covered tells whether most of g lies in one of the gaps known.
func covered(g Gap, known []Gap) bool {
	for _, k := range known {
		if min(g.To, k.To)-max(g.From, k.From) > (g.To-g.From)/2 {
			return true
		}
	}
	return false
}

// clearly is how many times longer than the widest interval asked for an interval
// must be to count as a gap.
const clearly = 3

// unexplained are a gauge's intervals without a reading that neither its rig's
// sampling nor its own pace accounts for.
func (h *History) unexplained(gauge int) []Gap {
	g := &h.Rig.Gauges[gauge]
	p, ok := newPacing(h.Rig, g)
	if !ok {
		return nil
	}
	bins := h.Bins(gauge)
	gaps := wideIntervals(g.Name, bins, func(from, to int64) bool {
		return to-from > clearly*p.widest(to-h.changeBefore(from))
	})
	for i := range gaps {
		gaps[i].Why = h.unexplainedWhy(&gaps[i])
	}
	return gaps
}

// changeBefore is the last mark before t, or the beginning: a jump or a mark
// that came too late made the sampling denser only.
func (h *History) changeBefore(t int64) int64 {
	last := h.First
	for i := range h.Marks {
		if m := h.Marks[i].Time; m <= t {
			last = max(last, m)
		}
	}
	return last
}

func (h *History) unexplainedWhy(g *Gap) string {
	for _, d := range h.damage {
		if d.First < g.To && d.Last > g.From {
			return "a damaged block was left out"
		}
	}
	for i := range h.Events {
		e := &h.Events[i]
		if e.Kind == "clock-stepped" && e.Time > g.From-second && e.Time <= g.To+second {
			return "no reading by its stamps: " + e.Detail
		}
		if e.Time > g.From && e.Time <= g.To+second && h.spoiled(e, g.Gauge) {
			return "no reading: " + e.Detail
		}
	}
	return "no reading, and nothing recorded says why"
}

// spoiled tells whether the event is of frames of the gauge that held no
// number, or of damaged ones on its port.
func (h *History) spoiled(e *Event, gauge string) bool {
	switch e.Kind {
	case "no-reading":
		return e.Gauge == gauge
	case "frames-refused":
		return e.Gauge == gauge || e.Gauge == "" && slices.ContainsFunc(h.Rig.Gauges, func(g config.Gauge) bool {
			return g.Name == gauge && g.Port != "" && strings.HasPrefix(e.Detail, g.Port+": ")
		})
	}
	return false
}

// pacing is how far apart the rig's sampling lets readings lie, in nanoseconds.
type pacing struct {
	every, dense, around, longest int64
	perDecade                     float64 // 10^(1/n)-1
}

// newPacing returns the pacing of a gauge; ok is false where nothing bounds it:
// readings on a button, or stored when they move alone.
func newPacing(rig *config.Rig, g *config.Gauge) (p pacing, ok bool) {
	if g.SilentAfter != nil && g.SilentAfter.Value <= 0 {
		return p, false
	}
	for i := range rig.Frames {
		if f := &rig.Frames[i]; f.Name == g.Frame {
			if f.Button {
				return p, false
			}
			p.every = nanoseconds(f.Every)
		}
	}
	s := &rig.Record.Sampling
	p.dense, p.longest = nanoseconds(s.Dense), nanoseconds(s.Longest)
	p.around = max(nanoseconds(s.Around), 0)
	if s.Around == nil {
		p.around = 10 * 60 * second
	}
	if s.PerDecade != nil && s.PerDecade.Value > 0 {
		p.perDecade = math.Pow(10, 1/s.PerDecade.Value) - 1
	}
	p.every = max(p.every, nanoseconds(s.Every))
	spaced := p.dense > 0 || p.perDecade > 0 || p.longest > 0
	if s.DeadBand != nil && !s.All && s.Every == nil && !spaced {
		return p, false
	}
	return p, true
}

func nanoseconds(d *config.Duration) int64 {
	if d == nil {
		return 0
	}
	return int64(math.Round(d.Value * 1e9))
}

// widest is the longest interval asked for up to that long after a change; 0
// where all readings are.
func (p *pacing) widest(since int64) int64 {
	wide := max(p.every, p.dense)
	if since <= p.around {
		return wide
	}
	if p.perDecade > 0 {
		grown := int64(p.perDecade * float64(since))
		if p.longest > 0 {
			grown = min(grown, p.longest)
		}
		return max(wide, grown)
	}
	return max(wide, p.longest)
}
