package steps

import (
	"fmt"
	"math"
	"slices"
	"sort"
)

// stuck is a stretch in which a gauge's indication did not move at all though
// it should have.
type stuck struct {
	gauge    int
	from, to int64
	// before and behind are the far ends of the bins beside it, in which it began
	// and ended.
	before, behind int64
	kind           Kind
	evidence       string
}

// stillReadings is how many readings must be alike before a gauge may be called stuck.
const stillReadings = 20

// findStuck looks for gauges whose indication stood still while others moved,
// and takes their jumps at either end out of the clusters.
func (r *run) findStuck() {
	r.stuckRuns = nil
	for g := range r.gauges {
		for _, run := range r.constantRuns(g) {
			if s, ok := r.judgeStill(run); ok {
				r.stuckRuns = append(r.stuckRuns, r.ruleStuck(s))
			}
		}
	}
	for k := range r.stuckRuns {
		r.holdBack(&r.stuckRuns[k])
	}
}

// ruleStuck applies what a person decided about a stretch: by "none" its kind
// is empty, and the gauge's readings stand, with its jump at the end.
func (r *run) ruleStuck(s stuck) stuck {
	switch k := r.rulingAt(s.gauge, s.from, s.from); k {
	case "":
	case "none":
		s.kind = ""
	default:
		s.kind, s.evidence = Kind(k), decided+s.evidence
	}
	return s
}

// holdBack takes a stuck gauge's movements out of the clusters, and those by
// which it stopped and came back, which lie within the bins beside the stretch;
// they tell its ends better than the bins do.
func (r *run) holdBack(s *stuck) {
	tol := max(2*nanos(r.spacing(s.from)), 2*second)
	from, to := s.before-tol, s.behind+tol
	for i := range r.events {
		e := &r.events[i]
		if e.hi < from || e.lo > to {
			continue
		}
		if e.moved[s.gauge] && e.lo >= s.to {
			s.to = max(s.to, e.lo)
		}
		e.known[s.gauge], e.moved[s.gauge] = false, false
	}
}

// constantRuns returns the stretches of a gauge's points that are all alike.
func (r *run) constantRuns(g int) []stuck {
	var out []stuck
	seq := r.gauges[g].seq
	for i := 0; i < len(seq); {
		j, n := i, 0
		for j < len(seq) && seq[j].min == seq[i].min && seq[j].max == seq[i].min {
			n += seq[j].n
			j++
		}
		if n >= stillReadings {
			out = append(out, stuck{gauge: g, from: seq[i].from, to: seq[j-1].to, before: seq[max(i-1, 0)].from, behind: seq[min(j, len(seq)-1)].to})
		}
		i = max(j, i+1)
	}
	return out
}

// judgeStill says whether a stretch without any change is no honest one.
func (r *run) judgeStill(s stuck) (stuck, bool) {
	g, v := s.gauge, interval{s.from, s.to}
	gg := &r.gauges[g]
	s.kind = Frozen
	want, by := r.shouldHave(g, v)
	count := gg.res * max(gg.factor(v.from+1), 1)
	if (want <= 6*count || r.oftenStill(g, v, want)) && (want <= 2*count || !r.unlikeItself(s)) {
		return s, false
	}
	s.evidence = fmt.Sprintf("gauge %s showed the same value for %.0f s while %s moved: it should have moved %.3g\u202fmm", r.name(g), seconds(v.to-v.from), r.names(by), want)
	if raw, ok := r.rawAt(g, v.from); ok && len(gg.cfg.Travel) == 2 {
		lo, hi := gg.cfg.Travel[0].Value, gg.cfg.Travel[1].Value
		edge := 2*gg.res + 0.002*(hi-lo)
		if raw <= lo+edge || raw >= hi-edge {
			s.kind = EndOfTravel
			s.evidence = fmt.Sprintf("gauge %s stood at the end of its travel (%.4g\u202fmm) from then on, while %s moved", r.name(g), raw, r.names(by))
		}
	}
	return s, true
}

// unlikeItself says that a gauge which otherwise scatters from count to count
// stood still for five times more readings than ever else.
func (r *run) unlikeItself(s stuck) bool {
	seq := r.gauges[s.gauge].seq
	longest, held, rest := 0, 0, 0
	for i := 0; i < len(seq); {
		j, n := i+1, seq[i].n
		for j < len(seq) && seq[i].min == seq[i].max && seq[j].min == seq[i].min && seq[j].max == seq[i].min {
			n += seq[j].n
			j++
		}
		if seq[i].from >= s.from && seq[i].to <= s.to {
			held += n
		} else {
			rest += n
			if seq[i].min == seq[i].max {
				longest = max(longest, n)
			}
		}
		i = j
	}
	return held >= 10*stillReadings && rest >= 3*held/10 && held >= 5*longest
}

// oftenStill says that a gauge is still at other times too, as long, while the
// others move as much: at the turn of its day one gauge may stand still and its
// neighbours, which warm sooner or later, not.
func (r *run) oftenStill(g int, v interval, want float64) bool {
	still, seen := 0, 0
	length := v.to - v.from
	for from := r.h.First; from+length <= r.h.Last && length > 0; from += length {
		w := interval{from, from + length}
		if w.from < v.to && w.to > v.from {
			continue
		}
		lo, hi, ok := r.reachOf(g, w)
		if !ok {
			continue
		}
		if others, _ := r.shouldHave(g, w); others < want/2 {
			continue
		}
		seen++
		if hi-lo <= 2*r.gauges[g].res {
			still++
		}
	}
	return seen >= 5 && 10*still > seen
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
// changes. The (lower) median over the others is taken, so that one knocked
// gauge accuses nobody.
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
	slices.Sort(want)
	return want[(len(want)-1)/2], by // of two the lesser
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
	seq := r.gauges[o].seq
	first := sort.Search(len(seq), func(i int) bool { return seq[i].from >= v.from })
	for _, p := range seq[first:] {
		if p.to > v.to {
			break
		}
		lo, hi = min(lo, p.y), max(hi, p.y)
	}
	return lo, hi, hi >= lo
}
