package steps

import (
	"fmt"
	"math"
	"slices"
	"strings"
)

// shortly is how long an excursion may last and still be called a spike.
const shortly = 15 * 60 * second

// awhile is how long a changed load may hang and still be called temporary.
const awhile = 24 * 3600 * second

// verdict is what a cluster was found to be.
type verdict struct {
	kind       Kind
	candidates []Kind
	fit        *fitted
	evidence   string
}

// classify explains the clusters that no mark has explained.
func (r *run) classify() {
	pats := r.patterns()
	r.kappa = r.influenceScale()
	for i := range r.events {
		e := &r.events[i]
		if e.taken {
			continue
		}
		ruling := r.ruling(e)
		if ruling == "none" {
			e.taken = true
			continue
		}
		moved := e.movedGauges()
		if len(moved) == 0 {
			// What lasts longer, between many readings or over a gap, is creep or
			// weather: no excursion of a moment.
			long := max(shortly, 3*nanos(max(r.spacing(e.lo), r.spacing(e.hi))))
			if ruling == "" && e.hi-e.lo <= long {
				r.spike(e, e, r.peakGauges(e))
			}
			e.taken = true
			continue
		}
		v := r.nature(e, append(pats[:len(pats):len(pats)], r.together(e)...))
		if ruling != "" {
			v.kind, v.candidates = Kind(ruling), nil
			v.evidence = "decided by a person; the readings alone: " + v.evidence
		}
		if f := r.partner(i, v); f != nil && ruling == "" {
			r.temporary(e, f, v, moved)
			continue
		}
		r.report(e, v, moved)
	}
}

// spike reports an excursion from one cluster to another (or within one).
func (r *run) spike(e, f *cluster, gauges []int) {
	if len(gauges) == 0 {
		return
	}
	d := Disturbance{Kind: Spike, Gauges: gauges, From: e.lo, To: f.hi,
		Treated:  "readings between left out",
		Evidence: fmt.Sprintf("%s left their level and came back within %s", r.names(gauges), lasted(seconds(f.hi-e.lo)))}
	for _, g := range gauges {
		size := e.peak[g]
		if e != f {
			size = e.jump[g].MM
		}
		d.By = append(d.By, Value{size, hypot(r.gauges[g].noise, r.gauges[g].res/2)})
		r.exclude(g, e.lo, f.hi, "spike")
	}
	d.Size = largest(d.By)
	r.add(d)
	e.taken, f.taken = true, true
}

func (r *run) add(d Disturbance) { r.out.Disturbances = append(r.out.Disturbances, d) }

func (r *run) exclude(g int, from, to int64, why string) {
	r.out.Excluded = append(r.out.Excluded, Span{g, from, to, why})
}

// largest returns the entry of greatest magnitude.
func largest(v []Value) *Value {
	var best *Value
	for i := range v {
		if best == nil || math.Abs(v[i].MM) > math.Abs(best.MM) {
			best = &v[i]
		}
	}
	return best
}

func (r *run) names(gauges []int) string {
	var n []string
	for _, g := range gauges {
		n = append(n, r.name(g))
	}
	return strings.Join(n, ", ")
}

// partner finds the cluster that takes back what this one did.
func (r *run) partner(i int, v verdict) *cluster {
	e := &r.events[i]
	limit := shortly
	if v.kind == LoadChanged {
		limit = awhile
	}
	for j := i + 1; j < len(r.events) && r.events[j].lo-e.hi <= limit; j++ {
		f := &r.events[j]
		if f.taken {
			if r.isMatched(j) {
				return nil // a real change of load came between
			}
			continue
		}
		back, any := true, false
		for g := range e.jump {
			if !e.moved[g] && !f.moved[g] {
				continue
			}
			any = true
			// Creep under a load that hung for a while does not come back at once.
			tol := 4*hypot(r.jumpU(e, g), r.jumpU(f, g)) + 0.1*math.Abs(e.jump[g].MM)
			if math.Abs(e.jump[g].MM+f.jump[g].MM) > tol {
				back = false
			}
		}
		if back && any {
			return f
		}
	}
	return nil
}

func (r *run) isMatched(j int) bool { return slices.Contains(r.matched, j) }

// temporary reports what came and went.
func (r *run) temporary(e, f *cluster, v verdict, moved []int) {
	if v.kind != LoadChanged {
		r.spike(e, f, moved)
		return
	}
	t, back := r.time(e, 0), r.time(f, 0)
	d := r.loadDisturbance(e, v, moved)
	d.From, d.To = t.start, back.full
	d.Treated = "readings between left out; the creep step is not split"
	for g := range r.gauges {
		r.exclude(g, e.lo, f.hi, "temporary load")
	}
	r.add(d)
	e.taken, f.taken = true, true
}

// loadDisturbance describes a change of load with its estimate.
func (r *run) loadDisturbance(e *cluster, v verdict, moved []int) Disturbance {
	d := Disturbance{Kind: LoadChanged, Gauges: moved, Evidence: v.evidence}
	for _, g := range moved {
		d.By = append(d.By, e.jump[g])
	}
	d.Size = largest(d.By)
	if v.fit != nil {
		d.Which = v.fit.p.which
		d.Load = r.newtons(e, *v.fit)
	}
	return d
}

// report turns a lasting cluster into a disturbance and its treatment.
func (r *run) report(e *cluster, v verdict, moved []int) {
	e.taken = true
	t := r.time(e, 0)
	if v.kind == LoadChanged && v.fit != nil {
		d := r.loadDisturbance(e, v, moved)
		d.From = t.start
		d.Treated = "treated as a load step of its own"
		r.add(d)
		r.unmarked = append(r.unmarked, unmarkedStep{event: e, at: t, fit: *v.fit, newton: d.Load, told: len(r.out.Disturbances) - 1})
		return
	}
	d := Disturbance{Kind: v.kind, Gauges: moved, From: t.start, Candidates: v.candidates, Evidence: v.evidence}
	for _, g := range moved {
		d.By = append(d.By, e.jump[g])
	}
	d.Size = largest(d.By)
	if v.kind == SupportShift {
		r.shifts = append(r.shifts, e)
	}
	switch {
	case v.kind == SupportShift && r.chordPossible():
		d.Treated = "a real movement: taken off by the support gauges"
	case v.kind == Spike || v.kind == Frozen || v.kind == EndOfTravel || v.kind == GapKind:
		d.Treated = "readings in that instant left out"
	default:
		d.Treated = "offset taken off as a parameter with its uncertainty"
		r.offset(e, moved, v.kind)
	}
	for _, g := range moved {
		r.exclude(g, e.lo, e.hi, string(v.kind))
	}
	r.add(d)
}

// offset takes a cluster's jumps off the tracks from then on.
func (r *run) offset(e *cluster, gauges []int, k Kind) {
	for _, g := range gauges {
		r.pending = append(r.pending, pendingOffset{g, Offset{Time: e.hi, Value: e.jump[g], Kind: k}})
	}
}

func (r *run) chordPossible() bool {
	if len(r.h.Rig.Supports) != 2 {
		return false
	}
	o := r.supportGauges()
	return o[0] >= 0 && o[1] >= 0
}
