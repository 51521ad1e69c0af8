package history

import (
	"math"
	"slices"
)

// nanometre is the quantum of the fallback: the finest the format writes.
const nanometre = 1e-6

// dense is the number of quanta on either side of a bin's first reading that
// are counted in an array; rarer ones go to a map.
const dense = 128

// counter gathers one gauge's readings into bins. It allocates nothing per
// reading while readings stay within dense quanta of the bin's first.
type counter struct {
	quantum, perMM float64
	inexact        bool // the fallback is in force

	n           int
	origin      int64 // quanta of the bin's first reading
	near        [2*dense + 1]int32
	low, high   int64 // quanta seen
	far         map[int64]int32
	timeSum     int64 // nanoseconds after From
	from, to    int64
	first, last float64
	lastTime    int64
	min, max    float64
}

func newCounter(resolution float64) *counter {
	c := &counter{far: map[int64]int32{}}
	c.setQuantum(resolution)
	return c
}

func (c *counter) setQuantum(q float64) {
	if !(q > 0) || math.IsInf(q, 0) {
		q = nanometre
		c.inexact = true
	}
	c.quantum, c.perMM = q, 1/q
}

// start opens a bin over [from, to).
func (c *counter) start(from, to int64) { c.from, c.to = from, to }

// add counts one reading of the open bin.
func (c *counter) add(t int64, mm float64) {
	q := c.toQuanta(mm)
	if c.n == 0 {
		c.origin, c.low, c.high = q, q, q
		c.first, c.min, c.max = mm, mm, mm
		c.timeSum = 0
	}
	c.n++
	c.count(q, 1)
	c.timeSum += t - c.from
	c.last, c.lastTime = mm, t
	c.min, c.max = min(c.min, mm), max(c.max, mm)
}

func (c *counter) count(q int64, n int32) {
	c.low, c.high = min(c.low, q), max(c.high, q)
	if d := q - c.origin; d >= -dense && d <= dense {
		c.near[d+dense] += n
	} else {
		c.far[q] += n
	}
}

// toQuanta turns mm into whole quanta; a reading that is none switches to the
// fallback, and what the open bin holds with it.
func (c *counter) toQuanta(mm float64) int64 {
	q := math.Round(mm * c.perMM)
	if !c.inexact && math.Abs(q*c.quantum-mm) > nanometre/2 {
		c.toFallback()
		q = math.Round(mm * c.perMM)
	}
	return int64(q)
}

func (c *counter) toFallback() {
	kept := c.drain(nil)
	old := c.quantum
	c.setQuantum(nanometre)
	c.inexact = true
	if c.n == 0 {
		return
	}
	requantum := func(q int64) int64 { return int64(math.Round(float64(q) * old * c.perMM)) }
	c.origin = requantum(c.origin)
	c.low, c.high = c.origin, c.origin
	for _, k := range kept {
		c.count(requantum(k.q), k.n)
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
		Min: c.min, Max: c.max, First: c.first, Last: c.last, LastTime: c.lastTime,
	}
	twice := medianTwice(*scratch, c.n)
	b.Median = float64(twice) * c.quantum / 2
	b.MAD = float64(madTwice(*scratch, c.n, twice)) * c.quantum / 2
	c.n = 0
	return b, true
}

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
