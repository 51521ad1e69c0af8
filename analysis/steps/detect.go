package steps

import (
	"math"
	"slices"
	"sort"

	"gaugelog/analysis/lsq"
)

// transition is a sudden change of one gauge between two of its points.
type transition struct {
	gauge  int
	lo, hi int64 // the last point before and the first behind
	size   float64
	scale  int // points on either side that showed it
	index  int // of the point before
}

// How a jump must stand out. With medians of five readings on either side the
// first is about seven times the scatter of one reading, so that ten times
// the scatter is found and one false alarm needs far more than a
// gauge-century of readings; the second keeps a staircase of single counts
// from ever being a jump.
const (
	jumpSigmas = 5.5
	jumpCounts = 2.05
	// jumpShare is the least share of a rise that must not be explained by the
	// slopes on either side: a smooth curve, however steep, has less.
	jumpShare = 0.4
	// riseCounts is the least rise between medians: two medians on either side
	// of a rounding limit differ by one count for no reason.
	riseCounts = 1.75
	// longest bounds the time k points may span, s: beyond it the daily
	// temperature is no straight line any more. Two points are always taken.
	longest = 5400
)

// blocks holds the medians of k successive points, and of their instants: on a
// slope the median reading is the one of the median instant, however unequally
// the points are spaced.
type blocks struct{ y, t []float64 }

func blockMedians(seq []point, k int) blocks {
	n := len(seq) - k + 1
	if n <= 0 {
		return blocks{}
	}
	b := blocks{make([]float64, n), make([]float64, n)}
	w := make([]float64, 0, k)
	t0 := seq[0].t
	for i, p := range seq {
		if len(w) == k {
			old := seq[i-k]
			j, _ := slices.BinarySearch(w, old.y)
			w = slices.Delete(w, j, j+1)
		}
		j, _ := slices.BinarySearch(w, p.y)
		w = slices.Insert(w, j, p.y)
		if i >= k-1 {
			first := i - k + 1
			b.y[first] = (w[(k-1)/2] + w[k/2]) / 2
			b.t[first] = (seconds(seq[first+(k-1)/2].t-t0) + seconds(seq[first+k/2].t-t0)) / 2
		}
	}
	return b
}

// beside is the block that with block i tells the slope next to a rise that
// takes dt: the one step blocks on. Where readings came much closer together
// there than within the rise, as at the end of a dense stretch, so short a way
// tells no slope worth carrying across the rise, and a block farther off is
// taken. -1: there is none.
func (b blocks) beside(i, step int, dt float64) int {
	m := i + step
	if m < 0 || m >= len(b.t) {
		return -1
	}
	if dt > longest {
		return m
	}
	for most := dt / 4; math.Abs(b.t[m]-b.t[i]) < most && m+step >= 0 && m+step < len(b.t); {
		m += step
	}
	return m
}

// score is how far the rise behind point i stands out at one scale.
type score struct {
	i           int
	rise, jump  float64
	need, ratio float64
}

// scores works out, for every place between points, the rise between the
// medians of k points on either side less what the slopes beside it explain,
// and returns the places where that is more than least times what is needed.
func scores(seq []point, k int, sigma func(point) float64, res, least float64) []score {
	b := blockMedians(seq, k)
	n := len(seq)
	if len(b.y) == 0 {
		return nil
	}
	var out []score
	abs := make([]float64, 0, n)
	for i := k - 1; i+k < n; i++ {
		l, r := i-k+1, i+1
		rise, dt := b.y[r]-b.y[l], b.t[r]-b.t[l]
		slopes := make([]float64, 0, 2)
		va, vb := 1.0, 1.0
		if m := b.beside(l, -k, dt); m >= 0 {
			d := b.t[l] - b.t[m]
			slopes = append(slopes, (b.y[l]-b.y[m])/d)
			va = dt / d
		}
		if m := b.beside(r, k, dt); m >= 0 {
			d := b.t[m] - b.t[r]
			slopes = append(slopes, (b.y[m]-b.y[r])/d)
			vb = dt / d
		}
		s := score{i: i, rise: rise, jump: rise}
		coarse := max(seq[l].f, seq[i+k].f)
		v := 1.57 * sq(max(sigma(seq[l]), sigma(seq[i+k]))) / float64(k)
		bend := 0.0
		switch len(slopes) {
		case 2:
			s.jump -= dt * (slopes[0] + slopes[1]) / 2
			bend = dt * math.Abs(slopes[1]-slopes[0]) / 2
			v *= sq(1+va/2) + sq(1+vb/2) + sq(va/2) + sq(vb/2)
		case 1:
			s.jump -= dt * slopes[0]
			bend = math.Abs(dt*slopes[0]) / 2
			w := va * vb // one of them is 1
			v *= sq(1+w) + 1 + sq(w)
		default:
			if k > 2 {
				continue // so long a rise may be any slope
			}
			v *= 2
		}
		s.need = max(jumpSigmas*math.Sqrt(v), jumpCounts*res*coarse) + bend
		abs = append(abs, math.Abs(s.jump))
		if s.stands(res*seq[i].f) && math.Abs(s.jump)/s.need > least {
			out = append(out, s)
		}
	}
	if len(out) == 0 {
		return nil
	}
	// The run's own unrest (temperature, vibration) sets a floor of its own.
	unrest := 0.0
	if len(abs) >= 30 {
		unrest = jumpSigmas * trimmedSigma(abs)
	}
	for i := range out {
		out[i].ratio = math.Abs(out[i].jump) / max(out[i].need, unrest)
	}
	return slices.DeleteFunc(out, func(s score) bool { return s.ratio <= least })
}

// stands says whether a rise may be a jump at all, count being what one count
// is worth there.
func (s *score) stands(count float64) bool {
	rise, jump := math.Abs(s.rise), math.Abs(s.jump)
	if rise < riseCounts*count {
		return false
	}
	// What a slope beside it alone makes of a small rise is no jump: that
	// slope holds a change of its own. A spike has one and a half.
	if jump > 2*rise {
		return false
	}
	return s.jump*s.rise > 0 && jump >= jumpShare*rise
}

func sq(x float64) float64 { return x * x }

// jumps finds the sudden changes in one gauge's points. Small scales come
// first, because they tell the place best; a larger one only adds what they
// could not see. least is 1, or less where what is found is only looked at
// again.
func jumps(g *gauge, seq []point, scales []int, sigma func(point) float64, least float64) []transition {
	var found []transition
	for _, k := range scales {
		if k > 2 && len(seq) > 1 && float64(k)*seconds(seq[len(seq)-1].t-seq[0].t)/float64(len(seq)-1) > longest {
			break
		}
		list := scores(seq, k, sigma, g.res, least)
		sort.SliceStable(list, func(a, b int) bool { return list[a].ratio > list[b].ratio })
		for _, s := range list {
			near := false
			for _, f := range found {
				if d := f.index - s.i; d <= k && -d <= k {
					near = true
					break
				}
			}
			if !near {
				lo, hi := s.i, s.i+1
				if k > 2 {
					lo, hi = place(seq, s.i, k, sigma(seq[s.i]))
				}
				found = append(found, transition{g.index, seq[lo].t, seq[hi].t, s.jump, k, s.i})
			}
		}
	}
	sort.SliceStable(found, func(a, b int) bool { return found[a].lo < found[b].lo })
	return found
}

// place narrows down a rise that k points on either side of i show: to the
// best split between two levels, widened while points lie at neither.
func place(seq []point, i, k int, sigma float64) (lo, hi int) {
	a, b := i-k+1, i+k
	var outer, inner []float64
	for _, p := range seq[a : a+(k+1)/2] {
		outer = append(outer, p.y)
	}
	for _, p := range seq[b+1-(k+1)/2 : b+1] {
		inner = append(inner, p.y)
	}
	left, right := lsq.Median(outer), lsq.Median(inner)
	cost := 0.0
	for _, p := range seq[a : b+1] {
		cost += math.Abs(p.y - right)
	}
	best, split := cost, a
	for j := a; j < b; j++ {
		cost += math.Abs(seq[j].y-left) - math.Abs(seq[j].y-right)
		if cost < best {
			best, split = cost, j
		}
	}
	tol := max(3*sigma, 0.05*math.Abs(right-left))
	lo, hi = split, split+1
	for lo > a && math.Abs(seq[lo].y-left) > tol {
		lo--
	}
	for hi < b && math.Abs(seq[hi].y-right) > tol {
		hi++
	}
	// A rise of little more than the scatter is placed by so many points only.
	extra := int(min(4*sq(sigma/max(math.Abs(right-left), sigma/100)), float64(k)))
	return max(a, lo-extra), min(b, hi+extra)
}

// interval is a stretch of time.
type interval struct{ from, to int64 }

// merge joins intervals that overlap or lie within gap of each other.
func merge(list []interval, gap int64) []interval {
	sort.Slice(list, func(a, b int) bool {
		return list[a].from < list[b].from || list[a].from == list[b].from && list[a].to < list[b].to
	})
	var out []interval
	for _, v := range list {
		if n := len(out); n > 0 && v.from <= out[n-1].to+gap {
			out[n-1].to = max(out[n-1].to, v.to)
		} else {
			out = append(out, v)
		}
	}
	return out
}

// findHot says where single readings are worth looking at: around the marks,
// and wherever the bins show a jump or an excursion.
func (r *run) findHot() {
	shows := make([][]interval, len(r.gauges))
	r.eachGauge(func(i int) { shows[i] = r.gauges[i].restless() })
	hot := slices.Concat(shows...)
	for _, m := range r.h.Marks {
		if m.Kind != "load" && m.Kind != "touch" {
			continue
		}
		hot = append(hot, interval{m.Time - r.near(m.Time), m.Time + r.near(m.Time)})
	}
	for i := range hot {
		hot[i].from, hot[i].to = max(hot[i].from, r.h.First), min(hot[i].to, r.h.Last)
	}
	hot = slices.DeleteFunc(hot, func(v interval) bool { return v.from > v.to })
	for i := range hot {
		hot[i].from, hot[i].to = hot[i].from-r.pad(hot[i].from), hot[i].to+r.pad(hot[i].to)
	}
	r.hot = merge(hot, 0)
}

// restless says where the bins show a jump or an excursion.
func (g *gauge) restless() (hot []interval) {
	sigma := func(p point) float64 { return binSigma(g, p) }
	for _, t := range jumps(g, g.seq, []int{1, 2, 4, 8}, sigma, 0.75) {
		pad := 1 + t.scale/2
		lo, hi := max(0, t.index-pad), min(len(g.seq)-1, t.index+1+pad)
		hot = append(hot, interval{g.seq[lo].from, g.seq[hi].to})
	}
	hot = append(hot, excursions(g)...)
	_, singles := hampel(g, g.seq)
	for _, t := range singles {
		hot = append(hot, interval{t.lo, t.hi})
	}
	return hot
}

// binSigma is the scatter of a bin's median, as a single point's.
func binSigma(g *gauge, p point) float64 {
	return p.f * max(g.noise/math.Sqrt(float64(p.n)), g.res/10)
}

// excursions finds bins whose extremes stand far off their median though the
// median of their neighbours does not.
func excursions(g *gauge) []interval {
	var out []interval
	for i, p := range g.seq {
		if p.n < 2 {
			continue
		}
		slack := 0.0
		if i > 0 {
			slack = math.Abs(p.y - g.seq[i-1].y)
		}
		if i+1 < len(g.seq) {
			slack = max(slack, math.Abs(p.y-g.seq[i+1].y))
		}
		need := p.f*max(7*g.noise, 3*g.res) + slack
		if p.max-p.y > need || p.y-p.min > need {
			out = append(out, interval{p.from, p.to})
		}
	}
	return out
}
