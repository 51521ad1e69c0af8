package history

import (
	"math"
	"slices"
)

// micro is how many quanta of the format (its finest decimal) a millimetre has.
const micro = 1e6

// toMicro turns mm into millionths, the nearest where mm is finer.
func toMicro(mm float64) int64 { return int64(math.Round(mm * micro)) }

// dense is the number of quanta on either side of a bin's first reading that
// are counted in an array; rarer ones go to a map.
const dense = 128

// counter gathers one gauge's readings into bins. It allocates nothing per
// reading while readings stay within dense quanta of the bin's first.
type counter struct {
	quantum int64 // millionths of a mm
	inexact bool  // a reading was no multiple of the resolution: the quantum is 1

	n         int
	origin    int64 // quanta of the bin's first reading
	near      [2*dense + 1]int32
	low, high int64 // quanta seen
	far       map[int64]int32
	timeSum   int64 // nanoseconds after From
	sum       int64 // of quanta above origin
	squares   float64
	from, to  int64
	first     int64 // millionths, as the next three
	last      int64
	min, max  int64
	lastTime  int64
}

func newCounter(resolution float64) *counter {
	c := &counter{far: map[int64]int32{}, quantum: toMicro(resolution)}
	if c.quantum <= 0 || math.Abs(float64(c.quantum)-resolution*micro) > 1e-3 {
		c.quantum, c.inexact = 1, true
	}
	return c
}

// start opens a bin over [from, to).
func (c *counter) start(from, to int64) { c.from, c.to = from, to }

// add counts one reading (millionths of a mm) of the open bin.
func (c *counter) add(t, v int64) {
	q := v / c.quantum
	if q*c.quantum != v {
		c.toFallback()
		q = v
	}
	if c.n == 0 {
		c.origin, c.low, c.high = q, q, q
		c.first, c.min, c.max = v, v, v
		c.timeSum, c.sum, c.squares = 0, 0, 0
	}
	d := q - c.origin
	c.sum += d
	c.squares += float64(d) * float64(d)
	c.n++
	c.timeSum += t - c.from
	c.last, c.lastTime = v, t
	c.min, c.max = min(c.min, v), max(c.max, v)
	c.count(q, 1)
}

func (c *counter) count(q int64, n int32) {
	c.low, c.high = min(c.low, q), max(c.high, q)
	if d := q - c.origin; d >= -dense && d <= dense {
		c.near[d+dense] += n
	} else {
		c.far[q] += n
	}
}

// toFallback counts single millionths from here on, and what the open bin
// holds with them.
func (c *counter) toFallback() {
	kept := c.drain(nil)
	old := c.quantum
	c.quantum, c.inexact = 1, true
	if c.n == 0 {
		return
	}
	c.origin *= old
	c.low, c.high = c.origin, c.origin
	c.sum *= old
	c.squares *= float64(old) * float64(old)
	for _, k := range kept {
		c.count(k.q*old, k.n)
	}
}

type tally struct {
	q int64
	n int32
}

// drain appends the open bin's counts in rising order and clears them.
func (c *counter) drain(to []tally) []tally {
	for q := range c.far {
		if q < c.origin {
			to = append(to, tally{q, c.far[q]})
		}
	}
	slices.SortFunc(to, byQuanta)
	if c.n > 0 {
		lo, hi := max(c.low-c.origin, -dense), min(c.high-c.origin, dense)
		for d := lo; d <= hi; d++ {
			if k := c.near[d+dense]; k > 0 {
				to = append(to, tally{c.origin + d, k})
				c.near[d+dense] = 0
			}
		}
	}
	mid := len(to)
	for q := range c.far {
		if q > c.origin {
			to = append(to, tally{q, c.far[q]})
		}
	}
	slices.SortFunc(to[mid:], byQuanta)
	clear(c.far)
	return to
}

func byQuanta(a, b tally) int {
	switch {
	case a.q < b.q:
		return -1
	case a.q > b.q:
		return 1
	}
	return 0
}

// finish closes the open bin; ok is false where it holds no reading. scratch
// is reused between calls.
func (c *counter) finish(scratch *[]tally) (b Bin, ok bool) {
	if c.n == 0 {
		return Bin{}, false
	}
	*scratch = c.drain((*scratch)[:0])
	b = Bin{
		From: c.from, To: c.to, Time: c.from + c.timeSum/int64(c.n), N: c.n,
		Min: mm(c.min), Max: mm(c.max), First: mm(c.first), Last: mm(c.last), LastTime: c.lastTime,
	}
	twice := medianTwice(*scratch, c.n)
	b.Median = mm(twice*c.quantum) / 2
	b.MAD = mm(madTwice(*scratch, c.n, twice)*c.quantum) / 2
	if n := float64(c.n); c.n > 1 {
		b.SD = math.Sqrt(max(c.squares-float64(c.sum)*float64(c.sum)/n, 0)/(n-1)) * mm(c.quantum)
	}
	c.n = 0
	return b, true
}

func mm(v int64) float64 { return float64(v) / micro }

// medianTwice returns twice the median in quanta, which is whole.
func medianTwice(t []tally, n int) int64 {
	return kth(t, (n-1)/2) + kth(t, n/2)
}

func kth(t []tally, k int) int64 {
	for _, e := range t {
		if k < int(e.n) {
			return e.q
		}
		k -= int(e.n)
	}
	panic("history: counts do not add up")
}

// madTwice returns twice the median absolute deviation in quanta, from the
// counts in rising order and twice their median.
func madTwice(t []tally, n int, twice int64) int64 {
	// Walk outwards from the median; deviations then come in rising order.
	right := 0
	for right < len(t) && 2*t[right].q < twice {
		right++
	}
	left := right - 1
	lo, hi := (n-1)/2, n/2
	var loDev, hiDev int64
	seen := 0
	for seen <= hi {
		var dev int64
		var k int
		if left < 0 || right < len(t) && 2*t[right].q-twice <= twice-2*t[left].q {
			dev, k = 2*t[right].q-twice, int(t[right].n)
			right++
		} else {
			dev, k = twice-2*t[left].q, int(t[left].n)
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
