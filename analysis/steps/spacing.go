package steps

import (
	"fmt"
	"math"
	"sort"
)

// Sampling is dense around changes and sparse in long holds, so how far apart
// readings lie is a question of when.

// spacing is how far apart the slowest gauge's readings lie about an instant,
// s: from the bin that holds it, or the bins on either side of it.
func (r *run) spacing(t int64) float64 {
	w := 0.0
	for i := range r.gauges {
		w = max(w, r.gauges[i].spacing(t))
	}
	return w
}

func (g *gauge) spacing(t int64) float64 {
	if len(g.seq) < 2 {
		return 0
	}
	i := sort.Search(len(g.seq), func(k int) bool { return g.seq[k].to >= t })
	i = min(i, len(g.seq)-1)
	best := g.spread(i)
	// An instant at the edge of a bin belongs to the denser neighbour: what is
	// dense there was kept because something happened here.
	for _, k := range []int{i - 1, i + 1} {
		if k >= 0 && k < len(g.seq) {
			best = min(best, g.spread(k))
		}
	}
	return best
}

// spread is the spacing within bin i, or from the bin before where it holds
// one reading.
func (g *gauge) spread(i int) float64 {
	p := g.seq[i]
	if p.n > 1 && p.to > p.from {
		return seconds(p.to-p.from) / float64(p.n-1)
	}
	if i == 0 {
		return seconds(g.seq[1].from - p.to)
	}
	return seconds(p.to - g.seq[i-1].to)
}

// near is how far from an instant single readings are looked at.
func (r *run) near(t int64) int64 { return max(120*second, 6*nanos(r.spacing(t))) }

// pad is how far beyond an instant readings are taken for comparison.
func (r *run) pad(t int64) int64 { return max(60*second, 30*nanos(r.spacing(t))) }

// lasted writes a time in seconds to three figures, never with an exponent.
func lasted(s float64) string {
	if math.Abs(s) < 100 {
		return fmt.Sprintf("%.3g s", s)
	}
	return fmt.Sprintf("%.0f s", s)
}
