package steps

import (
	"fmt"
	"math"
	"runtime"
	"slices"
	"sort"

	"golang.org/x/sync/errgroup"

	"gaugelog/analysis/history"
	"gaugelog/analysis/lsq"
)

// scan looks at the single readings of every hot stretch and gathers what
// the gauges did there into clusters.
func (r *run) scan() error {
	for _, v := range r.hot {
		raw, err := r.h.Window(v.from, v.to)
		if err != nil {
			return fmt.Errorf("reading back around a jump: %w", err)
		}
		r.scanWindow(raw)
	}
	sort.SliceStable(r.events, func(a, b int) bool { return r.events[a].lo < r.events[b].lo })
	r.events = dedupe(r.events)
	r.measure()
	return r.scanGaps()
}

func (r *run) scanWindow(raw [][]history.Sample) {
	found := make([][]transition, len(r.gauges))
	var some errgroup.Group
	some.SetLimit(runtime.GOMAXPROCS(0))
	for gi := range r.gauges {
		some.Go(func() error {
			found[gi] = r.gauges[gi].scan(raw[gi])
			return nil
		})
	}
	_ = some.Wait() // none fails
	all := slices.Concat(found...)
	sort.SliceStable(all, func(a, b int) bool { return all[a].lo < all[b].lo })
	first := len(r.events)
	for i := 0; i < len(all); {
		c := cluster{lo: all[i].lo, hi: all[i].hi}
		j := i
		for j < len(all) && all[j].lo <= c.hi+r.join(c.hi) {
			c.hi = max(c.hi, all[j].hi)
			j++
		}
		r.events = append(r.events, c)
		i = j
	}
	r.keep(r.events[first:], raw)
}

// scan finds the sudden changes in one gauge's single readings.
func (g *gauge) scan(raw []history.Sample) []transition {
	flat, found := hampel(g, g.points(raw))
	return append(found, jumps(g, flat, []int{1, 2, 5, 15, 45}, func(p point) float64 { return g.noise * p.f }, 1)...)
}

// points are a gauge's readings as points, which take five times the memory.
func (g *gauge) points(raw []history.Sample) []point {
	pts := make([]point, len(raw))
	for i, s := range raw {
		pts[i] = g.fromSample(s)
	}
	return pts
}

// Readings that far beside a cluster are held against it, ns and number.
const (
	keptBefore, keptBehind = 60 * second, 120 * second
	keptReadings           = 30
)

// keep gives the clusters of a window the readings they are timed and measured
// by, and lets the window go where that saves memory.
func (r *run) keep(events []cluster, raw [][]history.Sample) {
	if len(events) == 0 {
		return
	}
	kept, all := 0, 0
	cut := make([][][]history.Sample, len(events))
	for i := range events {
		c := &events[i]
		cut[i] = make([][]history.Sample, len(raw))
		for g, p := range raw {
			gg := &r.gauges[g]
			from, to := c.lo-keptBefore-12*nanos(gg.spacing(c.lo)), c.hi+keptBehind+12*nanos(gg.spacing(c.hi))
			at := func(t int64) int { return sort.Search(len(p), func(k int) bool { return p[k].Time > t }) }
			a := max(0, min(at(from-1), at(c.lo)-keptReadings))
			b := min(len(p), max(at(to), at(c.hi)+keptReadings))
			cut[i][g] = p[a:b]
			kept += b - a
		}
	}
	for _, p := range raw {
		all += len(p)
	}
	whole := r.pointsOf(raw, 2*kept > all)
	for i := range events {
		if events[i].raw = whole; whole == nil {
			events[i].raw = r.pointsOf(cut[i], true)
		}
	}
}

// pointsOf are the readings of every gauge as points; nil where they are not
// wanted.
func (r *run) pointsOf(raw [][]history.Sample, wanted bool) [][]point {
	if !wanted {
		return nil
	}
	out := make([][]point, len(raw))
	for g := range raw {
		out[g] = r.gauges[g].points(raw[g])
	}
	return out
}

// atOnce is how many readings together may be a spike where they come seldomer
// than once in a minute: more are a load that hung for a while.
const atOnce = 3

// plateau says that reading i, seldom as they are, lies among more than atOnce
// that stand off mid as it does.
func plateau(seq []point, i int, mid float64) bool {
	if seq[i].n > 1 || i+1 < len(seq) && seq[i+1].t-seq[i].t < 60*second {
		return false
	}
	off := seq[i].y - mid
	alike := func(k int) bool { return k >= 0 && k < len(seq) && (seq[k].y-mid)/off > 0.5 }
	a, b := i, i
	for alike(a - 1) {
		a--
	}
	for alike(b + 1) {
		b++
	}
	return b-a+1 > atOnce
}

// hampel takes out single readings (up to three together) that stand off the
// median of the eleven around them, and returns them as pairs of transitions.
func hampel(g *gauge, seq []point) (rest []point, singles []transition) {
	const half = 5
	bad := make([]bool, len(seq))
	w := make([]float64, 0, 2*half+1)
	for i := range seq {
		if i < half || i+half >= len(seq) {
			continue
		}
		w = w[:0]
		for _, p := range seq[i-half : i+half+1] {
			w = append(w, p.y)
		}
		sorted := [2*half + 1]float64(w)
		slices.Sort(sorted[:])
		off := math.Abs(seq[i].y - sorted[half])
		if off <= max(3*g.res, 6*g.noise)*seq[i].f {
			continue // as nearly all: the rest need not be worked out
		}
		// Both sides must agree with each other: a step is no spike.
		left, right := lsq.Median(w[:half-1]), lsq.Median(w[half+2:])
		spread := lsq.MAD(w)
		if spread <= g.res*seq[i].f {
			// Of two counts the median deviation tells nothing.
			spread = min(spread, g.noise*seq[i].f/lsq.MADScale)
		}
		need := max(5*lsq.MADScale*spread, 3*g.res*seq[i].f, 6*g.noise*seq[i].f)
		bad[i] = off > need && math.Abs(left-right) < off/3 && !plateau(seq, i, sorted[half])
	}
	if !slices.Contains(bad, true) {
		return seq, nil
	}
	rest = make([]point, 0, len(seq))
	for i := 0; i < len(seq); i++ {
		if !bad[i] {
			rest = append(rest, seq[i])
			continue
		}
		j := i
		for j < len(seq) && bad[j] {
			j++
		}
		if i > 0 && j < len(seq) {
			singles = append(singles,
				transition{g.index, seq[i-1].t, seq[i].t, seq[i].y - seq[i-1].y, 1, i - 1},
				transition{g.index, seq[j-1].t, seq[j].t, seq[j].y - seq[j-1].y, 1, j - 1})
		}
		i = j - 1
	}
	return rest, singles
}
