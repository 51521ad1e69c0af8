package rollup

// Bin sums up the readings of one channel in one interval. Values are in the
// channel's unit: mm of indication, degree Celsius or percent.
type Bin struct {
	// ID is the number of the interval in its set; N counts its readings.
	ID, N    int64
	Sum      float64
	Min, Max float64
	// Last is the value of the latest reading; FirstTime and LastTime bound
	// the readings' instants, in ns since 1970 UTC.
	Last                float64
	FirstTime, LastTime int64
}

// Mean is the mean of the bin's readings; it must hold one.
func (b *Bin) Mean() float64 { return b.Sum / float64(b.N) }

// Time is the middle of the bin's readings, in ns since 1970 UTC.
func (b *Bin) Time() int64 { return b.FirstTime + (b.LastTime-b.FirstTime)/2 }

func one(id, t int64, v float64) Bin {
	return Bin{ID: id, N: 1, Sum: v, Min: v, Max: v, Last: v, FirstTime: t, LastTime: t}
}

// merge takes in another bin of the same interval.
func (b *Bin) merge(o *Bin) {
	switch {
	case o.N == 0:
		return
	case b.N == 0:
		id := b.ID
		*b = *o
		b.ID = id
		return
	}
	b.N += o.N
	b.Sum += o.Sum
	b.Min, b.Max = min(b.Min, o.Min), max(b.Max, o.Max)
	b.FirstTime = min(b.FirstTime, o.FirstTime)
	if o.LastTime >= b.LastTime {
		b.LastTime, b.Last = o.LastTime, o.Last
	}
}

// Ring holds the newest bins of equal width; a bin's place is its number
// modulo the ring's length.
type Ring struct {
	Width int64 // ns
	Bins  []Bin
}

func newRing(width int64, n int) Ring { return Ring{width, make([]Bin, n)} }

func (r *Ring) put(b Bin) {
	at := &r.Bins[modulo(b.ID, int64(len(r.Bins)))]
	switch {
	case at.N == 0 || at.ID < b.ID:
		*at = b
	case at.ID == b.ID:
		at.merge(&b)
	}
}

// Near returns the bin whose readings lie nearest to the instant t, no farther
// than one width away; false where there is none.
func (r *Ring) Near(t int64) (Bin, bool) {
	var best Bin
	far := r.Width + 1
	for id := floor(t, r.Width) - 1; id <= floor(t, r.Width)+1; id++ {
		b := &r.Bins[modulo(id, int64(len(r.Bins)))]
		if b.N == 0 || b.ID != id {
			continue
		}
		if d := max(b.FirstTime-t, t-b.LastTime, 0); d < far {
			best, far = *b, d
		}
	}
	return best, best.N > 0
}

// since returns the bins that begin at t or later, in no order.
func (r *Ring) since(t int64) []Bin {
	var out []Bin
	for i := range r.Bins {
		if b := &r.Bins[i]; b.N > 0 && b.FirstTime >= t {
			out = append(out, *b)
		}
	}
	return out
}

func floor(t, width int64) int64 {
	id := t / width
	if t < 0 && id*width != t {
		id--
	}
	return id
}

func modulo(a, n int64) int64 { return (a%n + n) % n }

// Join sums up two bins; the number is that of the first.
func Join(a, b Bin) Bin {
	a.merge(&b)
	return a
}
