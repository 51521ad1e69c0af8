package history

import "sort"

// grid says to which bin an instant belongs: bins of equal width, or those
// between edges that rise.
type grid struct {
	width int64
	edges []int64
	// only, where not nil, names by gauge the bins that count, by their From.
	only []map[int64]bool
}

// bin returns the bounds of the bin of one gauge that holds t; ok is false where
// no bin does.
func (g *grid) bin(gauge int, t int64) (from, to int64, ok bool) {
	switch {
	case g.width > 0:
		from = t - mod(t, g.width)
		to = from + g.width
	default:
		n := len(g.edges)
		if t < g.edges[0] || t >= g.edges[n-1] {
			return 0, 0, false
		}
		i := sort.Search(n, func(i int) bool { return g.edges[i] > t })
		from, to = g.edges[i-1], g.edges[i]
	}
	return from, to, g.only == nil || g.only[gauge][from]
}

// widths are the bin widths to choose from, in seconds.
var widths = []int64{1, 2, 5, 10, 20, 30, 60, 120, 300, 600}

// BinWidth returns the width of the bins of a run, in nanoseconds: the least
// of a fixed list that gives at most some 6,000 bins, and at most ten minutes.
func BinWidth(first, last int64) int64 {
	for _, w := range widths {
		if (last-first)/(w*second) <= 6000 {
			return w * second
		}
	}
	return widths[len(widths)-1] * second
}

const second = int64(1e9)

func mod(a, b int64) int64 {
	m := a % b
	if m < 0 {
		m += b
	}
	return m
}
