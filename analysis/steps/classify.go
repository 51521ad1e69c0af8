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
		moved := e.movedGauges()
		if len(moved) == 0 {
			// What lasts longer, between many readings or over a gap, is creep or
			// weather: no excursion of a moment.
			long := max(shortly, 3*nanos(max(r.spacing(e.lo), r.spacing(e.hi))))
			if ruling != "none" && (ruling != "" || e.hi-e.lo <= long) {
				r.spike(e, e, r.peakGauges(e), ruling)
			}
			e.taken = true
			continue
		}
		all := append(pats[:len(pats):len(pats)], r.together(e)...)
		v := r.overrule(e, r.nature(e, all), all, ruling)
		f := r.partner(i, v)
		alike := f != nil && (r.ruling(f) == "" || r.ruling(f) == ruling)
		switch {
		case ruling == "none":
			e.taken = true
			if alike {
				f.taken = true // it goes with what it takes back
			}
		case f != nil && ruling == "", alike && (v.kind == Spike || v.kind == LoadChanged):
			r.temporary(e, f, v, moved, ruling)
		default:
			r.report(e, v, moved)
		}
	}
}

// decided goes before the evidence of what a person overruled.
const decided = "decided by a person; the readings alone: "

// overrule puts a person's word in place of a verdict; "none" leaves it.
func (r *run) overrule(e *cluster, v verdict, pats []pattern, ruling string) verdict {
	if ruling == "" || ruling == "none" {
		return v
	}
	v.kind, v.candidates, v.evidence = Kind(ruling), nil, decided+v.evidence
	if v.kind == LoadChanged && v.fit != nil && v.fit.p.kind != LoadChanged {
		v.fit = r.best(e, pats, LoadChanged)
	}
	return v
}

// spike reports an excursion from one cluster to another (or within one), by
// the name a person gave it if that is not empty.
func (r *run) spike(e, f *cluster, gauges []int, ruling string) {
	if len(gauges) == 0 {
		return
	}
	d := Disturbance{Kind: Spike, Gauges: gauges, From: e.lo, To: f.hi,
		Treated:  "readings between left out",
		Evidence: fmt.Sprintf("%s left their level and came back within %s", r.names(gauges), lasted(seconds(f.hi-e.lo)))}
	if ruling != "" {
		d.Kind, d.Evidence = Kind(ruling), decided+d.Evidence
	}
	for _, g := range gauges {
		size := e.peak[g]
		if e != f {
			size = e.jump[g].MM
		}
		d.By = append(d.By, Value{size, hypot(r.gauges[g].noise, r.gauges[g].res/2)})
		r.exclude(g, e.lo, f.hi, string(d.Kind))
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
	if v.kind == LoadChanged || v.kind == Spike { // the latter is a person's word
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
func (r *run) temporary(e, f *cluster, v verdict, moved []int, ruling string) {
	if v.kind != LoadChanged {
		r.spike(e, f, moved, ruling)
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
	if v.kind == LoadChanged {
		d := r.loadDisturbance(e, v, moved)
		d.From = t.start
		d.Treated = "treated as a load step of its own"
		r.add(d)
		fit := fitted{p: pattern{kind: LoadChanged, load: -1}} // a person's word; nobody knows which load
		if v.fit != nil {
			fit = *v.fit
		}
		r.unmarked = append(r.unmarked, unmarkedStep{event: e, at: t, fit: fit, newton: d.Load, told: len(r.out.Disturbances) - 1})
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
