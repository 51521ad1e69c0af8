package steps

import "math"

// loadShare is how far, as a share, a gauge's part in a change of load may lie
// off what the others foretell; half a part where nobody gave the influence.
const loadShare = 0.12

// answer finds what a marked act on gauge g did: the cluster nearest to t in
// which the gauge moved farther than a marked change of load there explains,
// and by how much. Acts are often marked while loads are being hung, and the
// load's own jump is no offset. Nil where there is none.
func (r *run) answer(g int, t int64) (best *cluster, own Value) {
	dist := r.near(t)
	for i := range r.events {
		e := &r.events[i]
		d := max(e.lo-t, t-e.hi, 0)
		if !e.moved[g] || e.taken || d > dist {
			continue
		}
		if v, ok := r.beyondLoad(e, g, t); ok {
			best, dist, own = e, d, v
		}
	}
	return best, own
}

// beyondLoad is by how much gauge g moved in a cluster beyond its part in a
// marked change of load, which the other gauges tell; ok is false where that
// is nothing. The part's own doubt goes into the uncertainty.
func (r *run) beyondLoad(e *cluster, g int, t int64) (own Value, ok bool) {
	jump := Value{e.jump[g].MM, r.jumpU(e, g)}
	others := *e
	others.known = append([]bool(nil), e.known...)
	others.known[g] = false
	for i, c := range r.changes {
		off := r.offMark(i, e)
		if off > r.reach(i) {
			continue
		}
		v := r.expected(c)
		seen, moved := 0, 0
		for o := range v {
			if others.known[o] && v[o] != 0 {
				seen++
				if e.moved[o] {
					moved++
				}
			}
		}
		switch {
		case seen == 0 && v[g]*jump.MM > 0 && off < seconds(max(e.lo-t, t-e.hi, 0)):
			return Value{}, false // no other gauge tells: the nearer mark has it
		case moved == 0 || r.alike(&others, v) < 0.9:
			continue
		}
		amount, share := r.along(&others, v), loadShare
		if r.opt.Influence == nil {
			share = 0.5
		}
		part := amount.MM * v[g]
		own = Value{jump.MM - part, hypot(jump.U, amount.U*v[g], share*part/math.Sqrt(3))}
		return own, math.Abs(own.MM) > 4*jump.U+share*math.Abs(part)
	}
	return jump, true
}

// butLoads says in words that the gauge did move near t, with a load.
func (r *run) butLoads(g int, t int64) string {
	for i := range r.events {
		if e := &r.events[i]; e.moved[g] && !e.taken && max(e.lo-t, t-e.hi, 0) <= r.near(t) {
			return " beyond the load that was hung then"
		}
	}
	return ""
}
