package steps

import (
	"fmt"
	"math"
	"sort"

	"gaugelog/analysis/lsq"
)

// cluster is one happening: what several gauges did at the same time.
type cluster struct {
	// lo is the last instant before anything moved, hi the first behind.
	lo, hi int64
	// jump is each gauge's lasting change, moved whether it is beyond doubt;
	// peak its greatest excursion within [lo, hi].
	jump  []Value
	moved []bool
	peak  []float64
	known []bool // the gauge has readings on both sides
	// near is the level right behind less that right before: over a gap a better
	// measure than jump, creep and weather included.
	near []Value
	// raw holds the readings of every gauge around it.
	raw [][]point
	// gap is true where the gauges left no reading between lo and hi though
	// they should have.
	gap bool

	taken bool // explained
	weak  bool // too small to be timed by itself
}

// scanGaps looks for one gauge that came out of a gap elsewhere than the
// others, where its readings beside the gap show no jump.
func (r *run) scanGaps() error {
	for _, g := range r.h.Gaps {
		if g.Gauge != "" || r.during(g.From, g.To) {
			continue
		}
		raw, err := r.h.Window(g.From-r.pad(g.From), g.To+r.pad(g.To))
		if err != nil {
			return fmt.Errorf("reading back around a gap: %w", err)
		}
		n := len(r.gauges)
		c := cluster{lo: g.From, hi: g.To, gap: true, raw: make([][]point, n)}
		c.clear(n)
		for i := range r.gauges {
			for _, s := range raw[i] {
				c.raw[i] = append(c.raw[i], r.gauges[i].fromSample(s))
			}
			c.measureGauge(&r.gauges[i], math.MinInt64, math.MaxInt64)
			c.moved[i] = false // a line carried over a gap is no jump
		}
		if r.outstanding(&c); len(c.movedGauges()) > 0 {
			r.events = append(r.events, c)
		}
	}
	sort.SliceStable(r.events, func(a, b int) bool { return r.events[a].lo < r.events[b].lo })
	return nil
}

// during says that a cluster overlaps a stretch of time.
func (r *run) during(from, to int64) bool {
	for i := range r.events {
		if r.events[i].lo < to && r.events[i].hi > from {
			return true
		}
	}
	return false
}

// clear makes room for what n gauges did.
func (c *cluster) clear(n int) {
	c.jump, c.near = make([]Value, n), make([]Value, n)
	c.moved, c.known, c.peak = make([]bool, n), make([]bool, n), make([]float64, n)
}

// forget drops the single readings around the clusters once all are timed.
func (r *run) forget() {
	for i := range r.events {
		r.events[i].raw = nil
	}
}

// join is how soon after one transition another belongs to the same happening.
func (r *run) join(t int64) int64 {
	w := nanos(r.spacing(t))
	if w > apart {
		return w
	}
	return max(apart, 2*w)
}

// dedupe drops clusters that two overlapping windows both found.
func dedupe(list []cluster) []cluster {
	var out []cluster
	for _, c := range list {
		if n := len(out); n > 0 && c.lo <= out[n-1].hi {
			out[n-1].hi = max(out[n-1].hi, c.hi)
			continue
		}
		out = append(out, c)
	}
	return out
}

// measure works out how far each gauge moved in each cluster. The readings
// compared are those between this cluster and its neighbours.
func (r *run) measure() {
	for i := range r.events {
		c := &r.events[i]
		c.gap = r.bridges(c)
		before, after := int64(math.MinInt64), int64(math.MaxInt64)
		if i > 0 {
			before = r.events[i-1].hi
		}
		if i+1 < len(r.events) {
			after = r.events[i+1].lo
		}
		c.clear(len(r.gauges))
		for gi := range r.gauges {
			c.measureGauge(&r.gauges[gi], before, after)
		}
		if c.gap {
			r.outstanding(c)
		}
	}
}

// bridges says that a cluster lies over a hole in the readings. One that was
// placed a few readings too wide about a hole is narrowed down to it: what
// scatters so much cannot tell that it moved in those few readings.
func (r *run) bridges(c *cluster) bool {
	spacing := r.spacing(c.lo)
	if seconds(c.hi-c.lo) <= 5*spacing {
		return false
	}
	if c.empty(nanos(spacing)) {
		return true
	}
	hole := interval{c.hi, c.lo}
	for _, pts := range c.raw {
		if len(pts) == 0 {
			continue
		}
		v, ok := widest(pts, c.lo, c.hi)
		if !ok || 10*(v.to-v.from) < 9*(c.hi-c.lo) {
			return false
		}
		hole.from, hole.to = min(hole.from, v.from), max(hole.to, v.to)
	}
	if seconds(hole.to-hole.from) > 5*spacing {
		c.lo, c.hi = hole.from, hole.to
		return true
	}
	return false
}

// widest is the longest stretch without a reading that lies in [lo, hi].
func widest(pts []point, lo, hi int64) (v interval, ok bool) {
	for i := 1; i < len(pts); i++ {
		if a, b := max(pts[i-1].t, lo), min(pts[i].t, hi); b-a > v.to-v.from {
			v, ok = interval{a, b}, true
		}
	}
	return v, ok
}

// empty says that no gauge left a reading inside the cluster, but for those
// that are read a little later or sooner than the one that bounds it.
func (c *cluster) empty(spacing int64) bool {
	for _, pts := range c.raw {
		for _, p := range pts {
			if p.t > c.lo+spacing && p.t < c.hi-spacing {
				return false
			}
		}
	}
	return true
}

// sides is how many readings on either side of a cluster are compared.
const sides = 12

func (c *cluster) measureGauge(g *gauge, before, after int64) {
	pts := c.raw[g.index]
	a := sort.Search(len(pts), func(k int) bool { return pts[k].t > c.lo })
	b := sort.Search(len(pts), func(k int) bool { return pts[k].t >= c.hi })
	lo := a
	for lo > 0 && a-lo < sides && pts[lo-1].t >= before {
		lo--
	}
	hi := b
	for hi < len(pts) && hi-b < sides && pts[hi].t <= after {
		hi++
	}
	if lo == a || hi == b {
		return
	}
	c.known[g.index] = true
	mid := c.lo + (c.hi-c.lo)/2
	l, lu := edge(g, pts[lo:a], mid)
	r, ru := edge(g, pts[b:hi], mid)
	c.jump[g.index] = Value{r - l, hypot(lu, ru)}
	c.moved[g.index] = math.Abs(r-l) > max(4*hypot(lu, ru), 1.5*g.res*max(pts[a-1].f, pts[b].f))
	from, fu := edge(g, pts[lo:a], c.lo)
	to, tu := edge(g, pts[b:hi], c.hi)
	c.near[g.index] = Value{to - from, hypot(fu, tu)}
	if near := to - from; c.moved[g.index] {
		c.moved[g.index] = !c.crept(g, near, pts[lo:a], pts[b:hi])
		// Over a long gap two short lines, carried on to its middle, tell that
		// there was a jump but hardly its size: the levels beside it tell more.
		if u := hypot(lu, ru); u > 0.05*math.Abs(r-l) && math.Abs(near) > 5*u {
			c.jump[g.index] = Value{near, hypot(near-(r-l), g.noise) / math.Sqrt(3)}
		}
	}
	// An excursion is one from the straight way across: a beam that creeps
	// through the cluster leaves no level.
	slope := (to - from) / max(seconds(c.hi-c.lo), 1e-9)
	for _, p := range pts[a:b] {
		if d := p.y - from - slope*seconds(p.t-c.lo); math.Abs(d) > math.Abs(c.peak[g.index]) {
			c.peak[g.index] = d
		}
	}
}

// outstanding looks for one gauge that stands out from all others over a gap,
// by how far it is away from where it was: they tell what creep and weather did
// meanwhile, where its own short lines beside the gap do not.
func (r *run) outstanding(c *cluster) {
	for g := range r.gauges {
		if !c.known[g] || c.moved[g] {
			continue
		}
		var others []float64
		for o := range r.gauges {
			if o != g && c.known[o] {
				others = append(others, c.near[o].MM)
			}
		}
		if len(others) < 3 {
			return
		}
		mid, off := lsq.Median(others), 0.0
		for _, v := range others {
			off = max(off, math.Abs(v-mid))
		}
		d, res := c.near[g].MM-mid, r.gauges[g].res
		if math.Abs(d) > max(2*off+4*c.near[g].U, jumpCounts*res) {
			c.moved[g] = true
			c.jump[g] = Value{d, hypot(c.near[g].U, off/math.Sqrt(3))}
			return
		}
	}
}

// crept says that a rise over a long gap is no more than the slopes on either
// side make of it: creep slows down, so what crept lies between the two.
func (c *cluster) crept(g *gauge, rise float64, left, right []point) bool {
	wide := seconds(c.hi - c.lo)
	before, behind := left[len(left)-1].t-left[0].t, right[len(right)-1].t-right[0].t
	if wide <= max(blind, seconds(min(before, behind))) || len(left) < 8 || len(right) < 8 {
		return false
	}
	slope := func(pts []point, span int64) float64 {
		return (levelAt(g, pts, pts[len(pts)-1].t) - levelAt(g, pts, pts[0].t)) / seconds(span)
	}
	a, b := wide*slope(left, before), wide*slope(right, behind)
	slack := 4*g.noise + g.res
	return a*b > 0 && rise >= min(a, b)-slack && rise <= max(a, b)+slack
}

// levelAt is edge without its uncertainty.
func levelAt(g *gauge, pts []point, t int64) float64 {
	level, _ := edge(g, pts, t)
	return level
}

// edge estimates a gauge's level at the instant t from readings on one side
// of it: their line where there are eight, else their median.
func edge(g *gauge, pts []point, t int64) (level, u float64) {
	coarse := 1.0
	x, y, s := make([]float64, len(pts)), make([]float64, len(pts)), make([]float64, len(pts))
	for i, p := range pts {
		x[i], y[i], s[i] = seconds(p.t-t), p.y, g.noise*p.f
		coarse = max(coarse, p.f)
	}
	floor := floorU(g.res * coarse)
	if len(pts) < 8 {
		v := Location(y, g.res*coarse)
		return v.MM, max(v.U, 1.253*g.noise*coarse/math.Sqrt(float64(len(pts))), floor)
	}
	fit, ok := fitPoly(x, y, s, 1)
	if !ok {
		v := Location(y, g.res)
		return v.MM, v.U
	}
	return fit.at(0), max(fit.u(0), floor)
}
