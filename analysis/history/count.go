package history

import (
	"cmp"
	"math"
	"math/bits"
	"slices"
)

// micro is how many quanta of the format (its finest decimal) a millimetre has.
const micro = 1e6

// toMicro turns mm into millionths, the nearest where mm is finer.
func toMicro(mm float64) int64 { return int64(math.Round(mm * micro)) }

func mm(v int64) float64 { return float64(v) / micro }

// near is the number of resolutions on either side of the first reading of a
// part that are counted in an array; rarer ones are listed one by one.
const near = 128

// tally is a value (millionths of a mm) and how often it was read.
type tally struct {
	v int64
	n uint32
}

// part is what one stretch of the folder holds of one bin.
type part struct {
	gauge           int
	from, to        int64
	n               int64
	sum             wide // of the instants, from its From
	first, last     int64
	firstMM, lastMM int64 // millionths of a mm
	tallies         int   // where its tallies end
	behind, farther int64 // readings behind a younger one of the stretch, and by more than the tolerance
	inexact         bool
}

// wide is an unsigned sum of 128 bits: nanoseconds over a long bin do not fit
// in 64.
type wide struct{ hi, lo uint64 }

func (w *wide) add(v wide) {
	var carry uint64
	w.lo, carry = bits.Add64(w.lo, v.lo, 0)
	w.hi += v.hi + carry
}

// counts turns the readings of one stretch of the folder into parts, whatever
// their order. Several count at once, each in its own; one at a time is counted
// with one value of this type, which is used again.
type counts struct {
	grid      *grid
	tolerance int64
	gauges    []tables
	parts     []part
	tallies   []tally
	strangers []int64 // readings of gauges without a table, by number less that of gauges
}

// tables is one gauge's open part.
type tables struct {
	quantum int64 // the resolution in millionths of a mm; 0: not whole
	magic   uint64
	base    int64 // value of table[0]

	from   int64
	width  uint64 // 0: none is open
	lo, hi int    // of the table in use
	p      part
	newest int64
	odd    []int64
	table  [2*near + 1]uint32
}

func newCounts(resolutions []float64, g *grid, tolerance int64) *counts {
	c := &counts{grid: g, tolerance: tolerance, gauges: make([]tables, len(resolutions))}
	for i, r := range resolutions {
		o := &c.gauges[i]
		o.lo, o.hi = len(o.table), -1
		if q := toMicro(r); q > 1 && math.Abs(float64(q)-r*micro) < 1e-3 {
			o.quantum, o.magic = q, math.MaxUint64/uint64(q)+1
		}
	}
	return c
}

// begin forgets the stretch before.
func (c *counts) begin() {
	c.parts, c.tallies = c.parts[:0], c.tallies[:0]
	clear(c.strangers)
	for i := range c.gauges {
		c.gauges[i].newest = math.MinInt64
	}
}

// rows counts readings in columns.
func (c *counts) rows(gauge []uint16, value, time []int64) {
	value, time = value[:len(gauge)], time[:len(gauge)]
	for i, g := range gauge {
		if int(g) < len(c.gauges) {
			c.add(int(g), time[i], value[i])
		} else {
			c.stranger(int(g) - len(c.gauges))
		}
	}
}

func (c *counts) stranger(i int) {
	for len(c.strangers) <= i {
		c.strangers = append(c.strangers, 0)
	}
	c.strangers[i]++
}

// add counts one reading.
func (c *counts) add(g int, t, v int64) {
	o := &c.gauges[g]
	after := uint64(t - o.from)
	if after >= o.width {
		if !c.turn(g, t, v) {
			return
		}
		after = uint64(t - o.from)
	}
	o.p.n++
	var carry uint64
	o.p.sum.lo, carry = bits.Add64(o.p.sum.lo, after, 0)
	o.p.sum.hi += carry
	if t >= o.p.last {
		o.p.last, o.p.lastMM = t, v
	}
	if t < o.p.first {
		o.p.first, o.p.firstMM = t, v
	}
	if t >= o.newest {
		o.newest = t
	} else {
		o.p.behind++
		if t < o.newest-c.tolerance {
			o.p.farther++
		}
	}
	// Division by the resolution: exact for its multiples, and checked.
	x := uint64(v - o.base)
	k, _ := bits.Mul64(x, o.magic)
	if k < uint64(len(o.table)) && k*uint64(o.quantum) == x {
		o.table[k]++
		o.lo, o.hi = min(o.lo, int(k)), max(o.hi, int(k))
		return
	}
	o.odd = append(o.odd, v)
	if o.quantum == 0 || v%o.quantum != 0 {
		o.p.inexact = true
	}
}

// converted counts one reading; of one that was shown in another unit no
// multiple of the resolution in mm is expected.
func (c *counts) converted(g int, t, v int64, other bool) {
	o := &c.gauges[g]
	from, was := o.from, o.p.inexact
	c.add(g, t, v)
	if other {
		o.p.inexact = was && o.from == from
	}
}

// turn ends the open part of a gauge and opens that which holds t; false where
// t is in no bin that counts.
func (c *counts) turn(g int, t, v int64) bool {
	c.end(g)
	o := &c.gauges[g]
	from, to, ok := c.grid.bin(g, t)
	if !ok {
		return false
	}
	o.from, o.width = from, uint64(to-from)
	o.p = part{gauge: g, from: from, to: to, first: t, firstMM: v, last: t, lastMM: v}
	if o.quantum > 0 {
		o.base = (v/o.quantum - near) * o.quantum
	}
	return true
}

// end closes the open part of a gauge, if there is one.
func (c *counts) end(g int) {
	o := &c.gauges[g]
	if o.width == 0 {
		return
	}
	start := len(c.tallies)
	for k := o.lo; k <= o.hi; k++ {
		if n := o.table[k]; n > 0 {
			c.tallies = append(c.tallies, tally{o.base + int64(k)*o.quantum, n})
			o.table[k] = 0
		}
	}
	o.lo, o.hi = len(o.table), -1
	if len(o.odd) > 0 {
		slices.Sort(o.odd)
		for i, v := range o.odd {
			if i > 0 && o.odd[i-1] == v {
				c.tallies[len(c.tallies)-1].n++
				continue
			}
			c.tallies = append(c.tallies, tally{v, 1})
		}
		o.odd = o.odd[:0]
		slices.SortFunc(c.tallies[start:], func(a, b tally) int { return cmp.Compare(a.v, b.v) })
	}
	o.p.tallies = len(c.tallies)
	c.parts = append(c.parts, o.p)
	o.width = 0
}

// finish closes all parts.
func (c *counts) finish() {
	for g := range c.gauges {
		c.end(g)
	}
}

// median returns twice the median of n values, in millionths of a mm.
func median(t []tally, n int64) int64 { return kth(t, (n-1)/2) + kth(t, n/2) }

func kth(t []tally, k int64) int64 {
	for _, e := range t {
		if k < int64(e.n) {
			return e.v
		}
		k -= int64(e.n)
	}
	panic("history: counts do not add up")
}

// deviation returns twice the median absolute deviation of n values from half
// of twice, in millionths of a mm.
func deviation(t []tally, n, twice int64) int64 {
	// Walk outwards from the median; deviations then come in rising order.
	right := 0
	for right < len(t) && 2*t[right].v < twice {
		right++
	}
	left := right - 1
	lo, hi := (n-1)/2, n/2
	var loDev, hiDev, seen int64
	for seen <= hi {
		var dev, k int64
		if left < 0 || right < len(t) && 2*t[right].v-twice <= twice-2*t[left].v {
			dev, k = 2*t[right].v-twice, int64(t[right].n)
			right++
		} else {
			dev, k = twice-2*t[left].v, int64(t[left].n)
			left--
		}
		if seen <= lo && lo < seen+k {
			loDev = dev
		}
		if seen <= hi && hi < seen+k {
			hiDev = dev
		}
		seen += k
	}
	return (loDev + hiDev) / 2
}

// spread returns the standard deviation of n values in mm, 0 for one.
func spread(t []tally, n int64) float64 {
	if n < 2 {
		return 0
	}
	var sum, squares float64
	for _, e := range t {
		d := float64(e.v - t[0].v)
		sum += d * float64(e.n)
		squares += d * d * float64(e.n)
	}
	return math.Sqrt(max(squares-sum*sum/float64(n), 0)/float64(n-1)) / micro
}
