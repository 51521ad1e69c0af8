package steps

import (
	"math"
	"slices"

	"gaugelog/analysis/history"
)

// tally is what one bin's readings were: how often each count about base, or
// the values themselves where they are no counts or too far apart.
type tally struct {
	res, base   float64
	table       [1024]int32
	values      []float64
	n, lo, hi   int // of the table
	sum         float64
	first, last float64 // instants, s
	a, b        float64 // their values
}

func (c *tally) at(t, v float64) {
	if c.n == 0 {
		c.first, c.a = t, v
	}
	c.last, c.b = t, v
	c.sum += t
	c.n++
}

// count takes in a reading that is a whole number of counts; false where it is
// too far from the first.
func (c *tally) count(i int) bool {
	if uint(i) >= uint(len(c.table)) {
		return false
	}
	c.table[i]++
	c.lo, c.hi = min(c.lo, i), max(c.hi, i)
	return true
}

// summarise fills in a bin's order statistics and its standard deviation.
func (c *tally) summarise(b *history.Bin) {
	if len(c.values) > 0 || c.hi-c.lo > 100 {
		for i := c.lo; i <= c.hi && c.lo < len(c.table); i++ {
			for range c.table[i] {
				c.values = append(c.values, c.base+float64(i)*c.res)
			}
		}
		c.listed(b)
		return
	}
	var devs [256]int
	rank := func(k int) int {
		for i := c.lo; ; i++ {
			if k -= int(c.table[i]); k < 0 {
				return i
			}
		}
	}
	twice := rank((c.n-1)/2) + rank(c.n/2)
	mean, squares := 0.0, 0.0
	for i := c.lo; i <= c.hi; i++ {
		n := int(c.table[i])
		devs[max(2*i-twice, twice-2*i)] += n
		mean += float64(i-c.lo) * float64(n)
		squares += float64(i-c.lo) * float64(i-c.lo) * float64(n)
	}
	rankDev := func(k int) int {
		for i := 0; ; i++ {
			if k -= devs[i]; k < 0 {
				return i
			}
		}
	}
	b.Min, b.Max = c.base+float64(c.lo)*c.res, c.base+float64(c.hi)*c.res
	b.Median = c.base + float64(twice)*c.res/2
	b.MAD = float64(rankDev((c.n-1)/2)+rankDev(c.n/2)) * c.res / 4
	if c.n > 1 {
		b.SD = math.Sqrt(max(squares-mean*mean/float64(c.n), 0)/float64(c.n-1)) * c.res
	}
}

// listed is summarise from the values themselves.
func (c *tally) listed(b *history.Bin) {
	v := c.values
	slices.Sort(v)
	n := len(v)
	b.Min, b.Max, b.Median = v[0], v[n-1], (v[(n-1)/2]+v[n/2])/2
	mean, squares := 0.0, 0.0
	for _, x := range v {
		mean += x / float64(n)
	}
	dev := make([]float64, n)
	for i, x := range v {
		dev[i] = math.Abs(x - b.Median)
		squares += (x - mean) * (x - mean)
	}
	slices.Sort(dev)
	b.MAD = (dev[(n-1)/2] + dev[n/2]) / 2
	if n > 1 {
		b.SD = math.Sqrt(squares / float64(n-1))
	}
}
