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
	r.toldKeys()
	for _, s := range r.stuckRuns {
		if s.kind == "" {
			continue // a person let it stand
		}
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

// whyUnseen says what may be wrong with a mark at t that no gauge answered. Where
// nothing was read for long behind it, what came at once and what crept until
// then cannot be told apart, and no change of load is taken from that.
func (r *run) whyUnseen(t int64) string {
	next := int64(math.MaxInt64)
	for i := range r.gauges {
		seq := r.gauges[i].seq
		if k := sort.Search(len(seq), func(k int) bool { return seq[k].from > t }); k < len(seq) {
			next = min(next, seq[k].from)
		}
	}
	switch {
	case next == math.MaxInt64:
		return "no reading came behind it"
	case next-t > r.near(t):
		return fmt.Sprintf("the next reading came %s later, too late to tell the step from what crept meanwhile; read soon behind a change of load", lasted(seconds(next-t)))
	}
	return "wrong load, wrong time, or nothing hung?"
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
			r.warn("mark-without-response", -1, s.Marked, fmt.Sprintf("step %s was marked, but no gauge shows it: %s", s.Name, r.whyUnseen(s.Marked)))
		case s.Found != 0 && math.Abs(s.OffsetS) > lateMark:
			word := "late"
			if s.OffsetS < 0 {
				word = "early"
			}
			r.warn("mark-off", -1, s.Marked, fmt.Sprintf("the mark of step %s came %s %s; the readings' own time was used", s.Name, lasted(math.Abs(s.OffsetS)), word))
		}
		if s.RingingS > 0 {
			r.warn("ringing", -1, s.Full, fmt.Sprintf("the beam swung for %s after step %s (up to %.3g\u202fmm): the load was not put on gently", lasted(s.RingingS), s.Name, s.RingingMM))
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
