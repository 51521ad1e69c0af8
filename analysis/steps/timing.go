package steps

import (
	"math"
	"slices"
	"sort"

	"gaugelog/analysis/lsq"
)

// timing is when a change began and was complete.
type timing struct {
	start, full      int64
	u                float64 // of start, s
	ramp             float64 // s
	ringing, swingMM float64
	ruled            bool // start is a person's word
}

// share is how much of the whole change had happened at one instant, from all
// gauges read about then.
type share struct {
	t    int64
	z, u float64
}

// settled is the share of the change within which it counts as complete: the
// first seconds of creep are not part of the ramp.
const settled = 0.03

// blind is how long nothing may be read, where more was, before a change in
// between is said to have happened unseen, s.
const blind = 60

// Ringing is told by readings at most this far apart, s: seldomer ones show
// creep and temperature, and no swing.
const (
	ringingSpacing = 1.5
	ringingGap     = 5
)

// time finds the first movement and the instant of full load of a cluster
// from all gauges that moved, each weighted by its jump over its scatter.
// mark is the operator's instant, 0 for none.
func (r *run) time(c *cluster, mark int64) timing {
	s := r.shares(c)
	// The change has begun by the first share beyond half.
	mid := -1
	for i := range s {
		if s[i].t >= c.lo && s[i].z > 0.5 && (i+1 >= len(s) || s[i+1].z > 0.4) {
			mid = i
			break
		}
	}
	if mid <= 0 {
		return r.coarse(c, mark)
	}
	first := mid
	for first > 0 && !still(s, first-1) {
		first--
	}
	if first == 0 {
		return r.coarse(c, mark)
	}
	lo, hi := s[first-1].t, s[first].t
	if gap := seconds(hi - lo); gap > blind && s[first].z > 0.8 {
		// All of it happened while nothing was read: what is missing of the level
		// read later is creep.
		return r.coarse(&cluster{lo: lo, hi: hi}, mark)
	}
	after := r.aftermath(s, c, hi)
	done := first
	for done < len(s) && !complete(s, done, after) {
		done++
	}
	if done == len(s) {
		done = mid
	}
	t := r.ramped(s, first, done, lo, hi, mark)
	t.ringing, t.swingMM = r.ringing(c, s, first, done, after)
	return t
}

// still says that share i and the one before it show no movement.
func still(s []share, i int) bool {
	quiet := func(v share) bool { return v.z < max(4*v.u, 0.004) }
	return quiet(s[i]) && (i == 0 || quiet(s[i-1]) || s[i].z < s[i].u)
}

// complete says that share i, and most of the next, lie at the later level.
func complete(s []share, i int, after func(int64) float64) bool {
	good, seen := 0, 0
	for j := i; j < len(s) && j < i+3; j++ {
		seen++
		if math.Abs(s[j].z-after(s[j].t)) < max(4*s[j].u, settled) {
			good++
		}
	}
	first := math.Abs(s[i].z-after(s[i].t)) < max(4*s[i].u, settled)
	return first && 2*good > seen
}

// coarse is the timing where single readings cannot tell more than the
// interval in which it happened.
func (r *run) coarse(c *cluster, mark int64) timing {
	t := timing{start: c.lo + (c.hi-c.lo)/2, u: seconds(c.hi-c.lo) / math.Sqrt(12)}
	if mark > c.lo && mark < c.hi {
		t.start = mark
	}
	t.full = t.start
	return t
}

// ramped turns the first moved and the first settled share into instants.
func (r *run) ramped(s []share, first, done int, lo, hi, mark int64) timing {
	var t timing
	gap := seconds(hi - lo)
	t.start = lo + (hi-lo)/2
	if gap > 5 && mark > lo && mark < hi {
		t.start = mark // nothing between these readings contradicts it
	}
	t.full = t.start
	if done > first {
		// Part of the change was seen under way: its line gives both ends.
		t.full = s[done-1].t + (s[done].t-s[done-1].t)/2
		var x, y []float64
		for _, v := range s[first:done] {
			if v.z > 0.05 && v.z < 0.95 {
				x, y = append(x, seconds(v.t-hi)), append(y, v.z)
			}
		}
		if len(x) >= 3 {
			if l, err := lsq.TheilSen(x, y, 1.96); err == nil && l.Slope > 0 {
				t.start = clamp(hi+nanos(-l.Intercept/l.Slope), lo, hi)
				t.full = clamp(hi+nanos((1-l.Intercept)/l.Slope), s[done-1].t, s[done].t)
			}
		}
		t.ramp = seconds(t.full - t.start)
	}
	t.u = hypot(gap, t.ramp) / math.Sqrt(12)
	return t
}

func clamp(v, lo, hi int64) int64 { return max(lo, min(v, hi)) }

// shares merges the readings of the moved gauges around a cluster into one
// rising signal: 0 before, 1 behind.
func (r *run) shares(c *cluster) []share {
	var all []share
	before, behind := r.neighbours(c)
	for g := range r.gauges {
		if !c.moved[g] {
			continue
		}
		gg := &r.gauges[g]
		base, ok := levelBefore(c.raw[g], before, c.lo, gg)
		if !ok {
			continue
		}
		j := c.jump[g].MM
		u := max(gg.noise, floorU(gg.res)) / math.Abs(j)
		for _, p := range c.raw[g] {
			if p.t >= c.lo-keptBefore-12*nanos(gg.spacing(c.lo)) && p.t <= c.hi+keptBehind+12*nanos(gg.spacing(c.hi)) {
				all = append(all, share{p.t, (p.y - base(p.t)) / j, u})
			}
		}
	}
	all = slices.DeleteFunc(all, func(s share) bool { return s.t <= before || s.t >= behind })
	sort.SliceStable(all, func(a, b int) bool { return all[a].t < all[b].t })
	return combine(all, nanos(r.spacing(c.lo)/20))
}

// neighbours are the end of the happening before a cluster and the beginning
// of the one behind: readings beyond them belong to something else.
func (r *run) neighbours(c *cluster) (before, behind int64) {
	before, behind = math.MinInt64, math.MaxInt64
	for i := range r.events {
		e := &r.events[i]
		if e.hi <= c.lo {
			before = max(before, e.hi)
		}
		if e.lo >= c.hi {
			behind = min(behind, e.lo+1)
		}
	}
	return before, behind
}

// combine averages shares taken within tol of one another.
func combine(all []share, tol int64) []share {
	var out []share
	for i := 0; i < len(all); {
		sw, sz, st := 0.0, 0.0, 0.0
		j := i
		for j < len(all) && all[j].t-all[i].t <= tol {
			w := 1 / sq(all[j].u)
			sw += w
			sz += w * all[j].z
			st += w * seconds(all[j].t-all[i].t)
			j++
		}
		out = append(out, share{all[i].t + nanos(st/sw), sz / sw, 1 / math.Sqrt(sw)})
		i = j
	}
	return out
}

// levelBefore is a gauge's line before a cluster that begins at lo, as a
// function of time; from readings behind the happening before it, which ended
// at former. Where that is not long ago as readings go, the line is one in the
// logarithm of the time since, as creep runs.
func levelBefore(pts []point, former, lo int64, g *gauge) (func(int64) float64, bool) {
	b := sort.Search(len(pts), func(k int) bool { return pts[k].t > lo })
	a := max(0, b-keptReadings, sort.Search(b, func(k int) bool { return pts[k].t >= former }))
	if a == b {
		return nil, false
	}
	span := pts[b-1].t - pts[a].t
	creeps := former > math.MinInt64 && lo-former < 20*span
	scale := func(t int64) float64 { return seconds(t - lo) }
	if creeps {
		h := max(seconds(span)/float64(b-a), 1e-3)
		scale = func(t int64) float64 { return math.Log(seconds(t-former) + h) }
	}
	var x, y, u []float64
	for _, p := range pts[a:b] {
		x, y, u = append(x, scale(p.t)), append(y, p.y), append(u, g.noise)
	}
	if len(x) < 4 || len(x) < 8 && !creeps {
		m := lsq.Median(y)
		return func(int64) float64 { return m }, true
	}
	fit, ok := fitPoly(x, y, u, 1)
	if !ok {
		return nil, false
	}
	// Carried on for hours, over a gap, a line of a minute tells nothing.
	end := lo + max(4*span, 180*second)
	return func(t int64) float64 { return fit.at(scale(min(t, end))) }, true
}

// aftermath is the level behind a change as a function of time: a straight
// line in the logarithm of the time since, from the settled readings.
func (r *run) aftermath(s []share, c *cluster, since int64) func(int64) float64 {
	h := max(r.spacing(c.hi), 1e-3)
	var x, y, u []float64
	for _, v := range s {
		if v.t > c.hi && len(x) < 60 {
			x, y, u = append(x, math.Log(seconds(v.t-since)+h)), append(y, v.z), append(u, v.u)
		}
	}
	if len(x) < 3 {
		return func(int64) float64 { return 1 }
	}
	degree := 1
	if len(x) < 6 {
		degree = 0
	}
	fit, ok := fitPoly(x, y, u, degree)
	if !ok {
		return func(int64) float64 { return 1 }
	}
	return func(t int64) float64 { return fit.at(math.Log(seconds(max(t-since, 0)) + h)) }
}

// ringing measures how long the shares swing about the later level, and by
// how much of the greatest jump; 0 where readings come too seldom to tell, or
// a gap lies between.
func (r *run) ringing(c *cluster, s []share, first, done int, after func(int64) float64) (lasts, swing float64) {
	most := 0.0
	for g := range c.jump {
		most = max(most, math.Abs(c.jump[g].MM))
	}
	if r.spacing(c.hi) > ringingSpacing {
		return 0, 0
	}
	for i := max(first, 1); i <= done && i < len(s); i++ {
		if s[i].t-s[i-1].t > ringingGap*second {
			return 0, 0
		}
	}
	last := done
	// Once it has been quiet for a while, what comes later is something else.
	quiet := max(5*second, nanos(10*r.spacing(c.hi)))
	for i := done; i < len(s) && s[i].t < s[last].t+quiet; i++ {
		if i > done && s[i].t-s[i-1].t > ringingGap*second {
			break
		}
		if d := math.Abs(s[i].z - after(s[i].t)); d > max(4*s[i].u, settled) {
			last, swing = i, max(swing, d*most)
		}
	}
	if swing == 0 {
		return 0, 0
	}
	return seconds(s[last].t - s[done].t), swing
}
