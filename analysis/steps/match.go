package steps

import (
	"math"
)

// expected is the sag a change of load should bring at each gauge, as far as
// proportions go; nil influence expects gauges between the supports to go
// down with the load and says nothing of the others.
func (r *run) expected(c change) []float64 {
	v := make([]float64, len(r.gauges))
	for g := range v {
		if r.opt.Influence == nil {
			if r.seesBeam(g) && r.inSpan(g) {
				v[g] = math.Copysign(1, total(c.delta))
			}
			continue
		}
		for j, d := range c.delta {
			v[g] += r.opt.Influence[g][j] * d
		}
	}
	return v
}

// matching holds which cluster each change became: index of the event, or -1.
type matching []int

// matchOf returns the cluster of the i-th change, nil where none.
func (r *run) matchOf(i int) *cluster {
	if i >= len(r.matched) || r.matched[i] < 0 {
		return nil
	}
	return &r.events[r.matched[i]]
}

// reach is how far from its mark a change may be found: two minutes or a third
// of the shorter neighbouring hold, and never less than some readings.
func (r *run) reach(i int) float64 {
	hold := seconds(r.h.Last - r.h.First)
	at := r.changes[i].mark()
	prev, next := r.h.First, r.h.Last
	if i > 0 {
		prev = r.changes[i-1].mark()
	}
	if i+1 < len(r.changes) {
		next = r.changes[i+1].mark()
	}
	hold = min(hold, seconds(next-at), seconds(at-prev))
	return max(120, hold/3, 3*r.spacing(at))
}

// matchChanges gives each marked change the cluster that answers it. Order is
// kept; of all ways to do so the one with the least total cost is taken, where
// the cost grows with the distance from the mark and with unlikeness.
func (r *run) matchChanges() {
	const alone = 2.0 // cost of a mark without response
	n, m := len(r.changes), len(r.events)
	cost := make([][]float64, n+1)
	from := make([][]bool, n+1) // true: change i-1 took event j-1
	for i := range cost {
		cost[i] = make([]float64, m+1)
		from[i] = make([]bool, m+1)
		for j := range cost[i] {
			switch {
			case i == 0:
				continue
			case j == 0:
				cost[i][j] = float64(i) * alone
				continue
			}
			// Leave the event, or leave the change, or pair them.
			best, paired := cost[i][j-1], false
			if v := cost[i-1][j] + alone; v < best {
				best = v
			}
			if p, ok := r.pairCost(i-1, j-1); ok {
				if v := cost[i-1][j-1] + p; v < best {
					best, paired = v, true
				}
			}
			cost[i][j], from[i][j] = best, paired
		}
	}
	r.matched = make(matching, n)
	for i := range r.matched {
		r.matched[i] = -1
	}
	for i, j := n, m; i > 0 && j > 0; {
		switch {
		case from[i][j]:
			r.matched[i-1] = j - 1
			r.events[j-1].taken = true
			i, j = i-1, j-1
		case cost[i][j] == cost[i][j-1]:
			j--
		default:
			i--
		}
	}
}

// pairCost is the cost of taking event j for the answer to change i.
func (r *run) pairCost(i, j int) (float64, bool) {
	c, e := r.changes[i], &r.events[j]
	if e.taken || len(e.movedGauges()) == 0 {
		return 0, false
	}
	like := r.alike(e, r.expected(c))
	if like < 0.6 {
		if like = r.alikeReversed(e, r.expected(c)); like < 0.9 {
			return 0, false
		}
		like -= 0.25 // what fits as it is goes before
	}
	dt, reach := r.offMark(i, e), r.reach(i)
	if dt > reach {
		return 0, false
	}
	return dt/reach + 2*(1-like), true
}

// offMark is how far a cluster lies off the marks of change i, s. Its nearest
// instant counts: it may be a gap of hours.
func (r *run) offMark(i int, e *cluster) float64 {
	c := r.changes[i]
	return seconds(max(e.lo-c.last, c.first-e.hi, 0))
}

// alikeReversed is alike with that one gauge's sense reversed which makes the
// proportions likest: a gauge entered the wrong way round still answers its
// loads, and the fit then says which it is. Three gauges must answer at least,
// or anything could be made to fit.
func (r *run) alikeReversed(e *cluster, v []float64) float64 {
	if len(e.movedGauges()) < 3 {
		return 0
	}
	best := 0.0
	for g := range v {
		if e.moved[g] && v[g] != 0 {
			v[g] = -v[g]
			best = max(best, r.alike(e, v))
			v[g] = -v[g]
		}
	}
	return best
}
