package rollup

// Whole holds a whole run in bins of one width, which doubles when they become
// too many. Bins are aligned to multiples of the width since 1970, so that two
// of them can be merged.
type Whole struct {
	Width int64 // ns
	// From is the number of the first bin; empty intervals hold bins without readings.
	From int64
	Bins []Bin
}

// mostWhole bounds the bins of a whole run: about two to a pixel of a phone.
const mostWhole = 512

func (w *Whole) put(b Bin) {
	if b.N == 0 {
		return
	}
	id := floor(b.FirstTime, w.Width)
	for len(w.Bins) > 0 && (id-w.From >= mostWhole || w.From+int64(len(w.Bins))-id > mostWhole) {
		w.double()
		id = floor(b.FirstTime, w.Width)
	}
	if len(w.Bins) == 0 {
		w.From = id
	}
	for ; id < w.From; w.From-- {
		w.Bins = append(w.Bins, Bin{})
		copy(w.Bins[1:], w.Bins)
		w.Bins[0] = Bin{ID: w.From - 1}
	}
	for next := w.From + int64(len(w.Bins)); next <= id; next++ {
		w.Bins = append(w.Bins, Bin{ID: next})
	}
	w.Bins[id-w.From].merge(&b)
}

// double makes the bins twice as wide.
func (w *Whole) double() {
	from := floor(w.From, 2)
	out := w.Bins[:0]
	for i := range w.Bins {
		b := w.Bins[i]
		id := floor(b.ID, 2)
		if len(out) == 0 || out[len(out)-1].ID != id {
			b.ID = id
			out = append(out, b)
			continue
		}
		out[len(out)-1].merge(&b)
	}
	w.Bins, w.From, w.Width = out, from, 2*w.Width
}

// merge takes in another whole, of whatever width.
func (w *Whole) merge(o *Whole) {
	for w.Width < o.Width {
		w.double()
	}
	for i := range o.Bins {
		w.put(o.Bins[i])
	}
}
