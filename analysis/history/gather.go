package history

import (
	"cmp"
	"math"
	"math/bits"
	"slices"
)

// gather puts the parts of one gauge's bins together. A bin is closed once
// readings are a horizon younger than its end; what comes later still is
// remembered, so that the bin can be counted again.
type gather struct {
	horizon int64
	open    []*pending // in order of From
	spare   []*pending
	scratch []tally
	closed  [][]Bin // in blocks, so that growing copies nothing
	until   int64   // end of the last closed bin
	late    map[int64]bool

	n, first, last  int64
	behind, farther int64 // readings behind a younger one (foreign segments only), and by more than the tolerance
	inexact         bool
}

// pending is a bin that is being filled.
type pending struct {
	p       part
	tallies []tally
}

func newGather(horizon int64) *gather {
	return &gather{horizon: horizon, until: math.MinInt64, late: map[int64]bool{}}
}

// take adds a part; parts come in the order of the folder.
func (g *gather) take(p *part, tallies []tally, foreign bool, tolerance int64) {
	if g.n == 0 {
		g.first, g.last = p.first, p.first
	}
	g.first = min(g.first, p.first)
	g.n += p.n
	g.inexact = g.inexact || p.inexact
	behind, farther := p.behind, p.farther
	if p.first < g.last {
		behind = max(behind, 1)
	}
	if p.last < g.last {
		behind = p.n
	}
	if p.last < g.last-tolerance {
		farther = p.n
	}
	if foreign {
		g.behind += behind
	}
	g.farther += farther
	g.last = max(g.last, p.last)
	if p.from < g.until {
		g.late[p.from] = true
		return
	}
	b := g.find(p)
	if b.p.n == 0 {
		spare := b.tallies
		*b = pending{p: *p, tallies: append(spare[:0], tallies...)}
		return
	}
	b.merge(p, tallies, &g.scratch)
}

// find returns the open bin of p, a new one if need be.
func (g *gather) find(p *part) *pending {
	n := len(g.open)
	if n > 0 && g.open[n-1].p.from == p.from {
		return g.open[n-1]
	}
	at, found := n, false
	if n > 0 && g.open[n-1].p.from > p.from {
		at, found = slices.BinarySearchFunc(g.open, p.from, func(b *pending, from int64) int { return cmp.Compare(b.p.from, from) })
	}
	if found {
		return g.open[at]
	}
	var b *pending
	if k := len(g.spare); k > 0 {
		b, g.spare = g.spare[k-1], g.spare[:k-1]
		b.p.n = 0
	} else {
		b = &pending{}
	}
	g.open = slices.Insert(g.open, at, b)
	return b
}

func (b *pending) merge(p *part, tallies []tally, scratch *[]tally) {
	b.p.n += p.n
	b.p.sum.add(p.sum)
	if p.first < b.p.first {
		b.p.first, b.p.firstMM = p.first, p.firstMM
	}
	if p.last >= b.p.last {
		b.p.last, b.p.lastMM = p.last, p.lastMM
	}
	out, old := (*scratch)[:0], b.tallies
	i := 0
	for _, t := range tallies {
		for i < len(old) && old[i].v < t.v {
			out = append(out, old[i])
			i++
		}
		if i < len(old) && old[i].v == t.v {
			t.n += old[i].n
			i++
		}
		out = append(out, t)
	}
	out = append(out, old[i:]...)
	*scratch, b.tallies = old, out
}

// settle closes the bins that nothing is expected for any more; with all, every one.
func (g *gather) settle(all bool) {
	k := 0
	for k < len(g.open) && (all || g.open[k].p.to <= g.last-g.horizon) {
		b := g.open[k]
		g.put(b.bin())
		g.until = b.p.to
		g.spare = append(g.spare, b)
		k++
	}
	if k > 0 {
		g.open = slices.Delete(g.open, 0, k)
	}
}

// blockBins is how many bins stand in one block of memory.
const blockBins = 512

func (g *gather) put(b Bin) {
	n := len(g.closed)
	if n == 0 || len(g.closed[n-1]) == blockBins {
		g.closed = append(g.closed, make([]Bin, 0, blockBins))
		n++
	}
	g.closed[n-1] = append(g.closed[n-1], b)
}

// bins hands over all bins in order. It ends the gathering.
func (g *gather) bins() []Bin {
	g.settle(true)
	n := 0
	for _, b := range g.closed {
		n += len(b)
	}
	if n == 0 {
		return nil
	}
	out := make([]Bin, 0, n)
	for _, b := range g.closed {
		out = append(out, b...)
	}
	g.open, g.spare, g.scratch, g.closed = nil, nil, nil, nil
	return out
}

func (b *pending) bin() Bin {
	p, t := &b.p, b.tallies
	after, _ := bits.Div64(p.sum.hi, p.sum.lo, uint64(p.n))
	twice := median(t, p.n)
	return Bin{
		From: p.from, To: p.to, Time: p.from + int64(after), N: int(p.n),
		Median: mm(twice) / 2, MAD: mm(deviation(t, p.n, twice)) / 2, SD: spread(t, p.n),
		Min: mm(t[0].v), Max: mm(t[len(t)-1].v),
		First: mm(p.firstMM), Last: mm(p.lastMM), FirstTime: p.first, LastTime: p.last,
	}
}

// replace puts bins that were counted again in the place of those with the
// same bounds.
func replace(bins, again []Bin) []Bin {
	out := make([]Bin, 0, len(bins)+len(again))
	i := 0
	for _, a := range again {
		for i < len(bins) && bins[i].From < a.From {
			out = append(out, bins[i])
			i++
		}
		if i < len(bins) && bins[i].From == a.From {
			i++
		}
		out = append(out, a)
	}
	return append(out, bins[i:]...)
}
