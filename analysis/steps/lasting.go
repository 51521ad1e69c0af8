package steps

import (
	"fmt"
	"math"
	"sort"
)

// lasting reports what has no single instant: unit keys, frozen gauges, the
// end of travel, gaps. It runs before the tracks are built, so that they
// leave it out.
func (r *run) lasting() {
	r.reportKeys()
	for _, s := range r.stuckRuns {
		d := Disturbance{Kind: s.kind, Gauges: []int{s.gauge}, From: s.from, To: s.to,
			Treated: "the gauge's readings between left out", Evidence: s.evidence}
		if s.to >= r.h.Last {
			d.To = 0
		}
		r.add(d)
		r.exclude(s.gauge, s.from, s.to+1, string(s.kind))
	}
	for _, g := range r.h.Gaps {
		d := Disturbance{Kind: GapKind, From: g.From, To: g.To, Treated: "nothing was filled in",
			Evidence: fmt.Sprintf("no reading for %.0f s: %s", seconds(g.To-g.From), g.Why)}
		for i := range r.gauges {
			if g.Gauge == "" && len(r.gauges[i].seq) > 0 || g.Gauge == r.name(i) {
				d.Gauges = append(d.Gauges, i)
			}
		}
		r.add(d)
	}
	for i := range r.rules {
		u := &r.rules[i]
		if u.what != "exclude" {
			continue
		}
		g := r.gauge(u.name)
		if g < 0 && u.name != "all" {
			continue
		}
		u.used = true
		r.exclude(g, u.at, u.to, "left out by a person: "+u.decision.Why)
	}
}

// stuck is a stretch in which a gauge's indication did not move at all though
// it should have.
type stuck struct {
	gauge    int
	from, to int64
	kind     Kind
	evidence string
}

// stillReadings is how many readings must be alike before a gauge may be called stuck.
const stillReadings = 20

// findStuck looks for gauges whose indication stood still while others moved,
// and takes their jumps at either end out of the clusters.
func (r *run) findStuck() {
	r.stuckRuns = nil
	for g := range r.gauges {
		for _, run := range r.constantRuns(g) {
			if s, ok := r.judgeStill(g, run); ok {
				r.stuckRuns = append(r.stuckRuns, s)
			}
		}
	}
	for _, s := range r.stuckRuns {
		tol := max(2*nanos(r.spacing(s.from)), 2*second)
		for i := range r.events {
			e := &r.events[i]
			if e.hi >= s.from-tol && e.lo <= s.to+tol {
				e.known[s.gauge], e.moved[s.gauge] = false, false
			}
		}
	}
}

// constantRuns returns the stretches of a gauge's points that are all alike.
func (r *run) constantRuns(g int) []interval {
	var out []interval
	seq := r.gauges[g].seq
	for i := 0; i < len(seq); {
		j, n := i, 0
		for j < len(seq) && seq[j].min == seq[i].min && seq[j].max == seq[i].min {
			n += seq[j].n
			j++
		}
		if n >= stillReadings {
			out = append(out, interval{seq[i].from, seq[j-1].to})
		}
		i = max(j, i+1)
	}
	return out
}

// judgeStill says whether a stretch without any change is no honest one.
func (r *run) judgeStill(g int, v interval) (stuck, bool) {
	gg := &r.gauges[g]
	s := stuck{gauge: g, from: v.from, to: v.to, kind: Frozen}
	want, by := r.shouldHave(g, v)
	if want <= 6*gg.res*max(gg.factor(v.from+1), 1) {
		return s, false
	}
	s.evidence = fmt.Sprintf("gauge %s showed the same value for %.0f s while %s moved: it should have moved %.3g mm", r.name(g), seconds(v.to-v.from), r.names(by), want)
	if raw, ok := r.rawAt(g, v.from); ok && len(gg.cfg.Travel) == 2 {
		lo, hi := gg.cfg.Travel[0].Value, gg.cfg.Travel[1].Value
		edge := 2*gg.res + 0.002*(hi-lo)
		if raw <= lo+edge || raw >= hi-edge {
			s.kind = EndOfTravel
			s.evidence = fmt.Sprintf("gauge %s stood at the end of its travel (%.4g mm) from then on, while %s moved", r.name(g), raw, r.names(by))
		}
	}
	return s, true
}

func (r *run) rawAt(g int, t int64) (float64, bool) {
	for _, p := range r.gauges[g].seq {
		if p.to >= t {
			return p.raw, true
		}
	}
	return 0, false
}

// shouldHave estimates from the other gauges that see the beam by how much a
// gauge should have moved within a stretch, from its share of the marked
// changes. The median over the others is taken, so that one knocked gauge
// accuses nobody.
func (r *run) shouldHave(g int, v interval) (float64, []int) {
	var want []float64
	var by []int
	for o := range r.gauges {
		if o == g || !r.seesBeam(o) || r.supportUnder(o) >= 0 {
			continue
		}
		ratio, ok := r.ratio(g, o)
		if !ok {
			continue
		}
		lo, hi, ok := r.reachOf(o, v)
		if !ok {
			continue
		}
		want = append(want, ratio*(hi-lo))
		by = append(by, o)
	}
	if len(want) == 0 {
		return 0, nil
	}
	return Median(want), by
}

// ratio is how far gauge g moves while gauge o moves 1, as a magnitude.
func (r *run) ratio(g, o int) (float64, bool) {
	if r.opt.Influence != nil {
		a, b := 0.0, 0.0
		for j := range r.h.Rig.Loads {
			a += math.Abs(r.opt.Influence[g][j])
			b += math.Abs(r.opt.Influence[o][j])
		}
		return a / b, b > 0
	}
	if r.seesBeam(g) && r.inSpan(g) && r.inSpan(o) && r.supportUnder(g) < 0 {
		return 0.5, true // nobody said more: half is on the safe side
	}
	return 0, false
}

// reachOf is the range of a gauge's bins within a stretch.
func (r *run) reachOf(o int, v interval) (lo, hi float64, ok bool) {
	lo, hi = math.Inf(1), math.Inf(-1)
	for _, p := range r.gauges[o].seq {
		if p.from >= v.from && p.to <= v.to {
			lo, hi = min(lo, p.y), max(hi, p.y)
		}
	}
	return lo, hi, hi >= lo
}

// lateMark is how far a mark may be off before it is worth a word, s.
const lateMark = 15

// finish warns of what a reader must know and puts the lists in order.
func (r *run) finish() {
	for _, s := range r.out.Steps {
		if s.Marked == 0 {
			continue
		}
		switch {
		case s.Response == nil:
			r.warn("step-shorter-than-sampling", -1, s.Marked, fmt.Sprintf("step %s began and ended between two readings of its neighbour's change: its own response cannot be told apart", s.Name))
		case !*s.Response:
			r.warn("mark-without-response", -1, s.Marked, fmt.Sprintf("step %s was marked, but no gauge shows it: wrong load, wrong time, or nothing hung?", s.Name))
		case s.Found != 0 && math.Abs(s.OffsetS) > lateMark:
			word := "late"
			if s.OffsetS < 0 {
				word = "early"
			}
			r.warn("mark-off", -1, s.Marked, fmt.Sprintf("the mark of step %s came %s %s; the readings' own time was used", s.Name, lasted(math.Abs(s.OffsetS)), word))
		}
		if s.RingingS > 0 {
			r.warn("ringing", -1, s.Full, fmt.Sprintf("the beam swung for %s after step %s (up to %.3g mm): the load was not put on gently", lasted(s.RingingS), s.Name, s.RingingMM))
		}
	}
	if k := r.out.BelowBaseline(); k >= 0 {
		r.warn("unloaded-below-baseline", -1, r.out.Steps[k].From, fmt.Sprintf("less hung on the beam in step %s than at the baseline (step %s): sags count from the loaded beam, so no recovery and no permanent set are stated; record the beam before anything hangs on it", r.out.Steps[k].Name, r.out.Steps[r.out.Baseline].Name))
	}
	r.warnStill()
	for _, u := range r.rules {
		if !u.used {
			r.warn("decision-without-object", -1, u.at, fmt.Sprintf("amendment %s: nothing in the run answers to it", u.path))
		}
	}
	if len(r.changes) == 0 && len(r.unmarked) == 0 {
		r.warn("no-loads-marked", -1, 0, "no change of load was marked or found: there is no sag to state; enter loads with `gaugelog mark`")
	}
	sort.SliceStable(r.out.Disturbances, func(a, b int) bool { return r.out.Disturbances[a].From < r.out.Disturbances[b].From })
	sort.SliceStable(r.out.Excluded, func(a, b int) bool { return r.out.Excluded[a].From < r.out.Excluded[b].From })
}

// warnStill says so where no gauge ever changed its indication.
func (r *run) warnStill() {
	for g := range r.gauges {
		for _, p := range r.gauges[g].seq {
			if p.min != r.gauges[g].seq[0].min || p.max != p.min {
				return
			}
		}
	}
	r.warn("all-gauges-still", -1, r.h.First, "no gauge ever changed its indication: are they on hold, or is one old reading repeated? There is no sag to state")
}
