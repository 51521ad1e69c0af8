package steps

import (
	"math"
	"slices"
	"sort"

	"gaugelog/analysis/history"
	"gaugelog/analysis/lsq"
)

// perDecade is how many cells of a track a decade of time after full load has.
const perDecade = 40

// A track's evenly spaced part has at most about mostPoints cells, none of
// them of fewer than wideBins bins: so that medians of bins tell it and no
// reading is read back again.
const (
	mostPoints = 1400
	wideBins   = 4
)

// tracks builds every gauge's corrected history.
func (r *run) tracks() error {
	n := len(r.gauges)
	r.out.Tracks = make([]Track, n)
	for g := range r.gauges {
		r.out.Tracks[g] = Track{Gauge: g, Noise: r.gauges[g].noise}
	}
	for _, p := range r.pending {
		t := &r.out.Tracks[p.gauge]
		t.Offsets = append(t.Offsets, p.offset)
	}
	for g := range r.out.Tracks {
		o := r.out.Tracks[g].Offsets
		sort.SliceStable(o, func(a, b int) bool { return o[a].Time < o[b].Time })
	}
	for k := range r.out.Steps {
		cells, err := r.stepCells(k)
		if err != nil {
			return err
		}
		for g := range cells {
			for _, p := range cells[g] {
				r.out.Tracks[g].Points = append(r.out.Tracks[g].Points, Point{
					Time: p.t, Raw: p.raw, Gross: p.y, U: r.gauges[g].pointU(p), N: p.n, Step: k,
				})
			}
		}
	}
	if err := r.baseline(); err != nil {
		return err
	}
	for g := range r.out.Tracks {
		t := &r.out.Tracks[g]
		for i := range t.Points {
			p := &t.Points[i]
			p.Gross -= t.Baseline.MM + t.shift(p.Time)
		}
	}
	for g := range r.out.Tracks {
		r.netTrack(g)
	}
	return nil
}

// shift is the sum of the offsets before t.
func (t *Track) shift(at int64) float64 {
	s := 0.0
	for _, o := range t.Offsets {
		if o.Time <= at {
			s += o.Value.MM
		}
	}
	return s
}

// shiftU is the standard uncertainty of the offsets between two instants.
func (t *Track) shiftU(from, to int64) float64 {
	s := 0.0
	for _, o := range t.Offsets {
		if o.Time > from && o.Time <= to {
			s += sq(o.Value.U)
		}
	}
	return math.Sqrt(s)
}

// stepCells returns each gauge's cells in one step: single readings' medians
// where the cells are narrow, medians of bins where they are wide.
func (r *run) stepCells(k int) ([][]point, error) {
	s := r.out.Steps[k]
	width := history.BinWidth(r.h.First, r.h.Last)
	edges := r.edges(k)
	// From here on every cell holds at least that many bins. The zero step's cells
	// narrow towards its end, the others' towards their beginning.
	split := len(edges) - 1
	if s.Full != 0 {
		for split > 0 && edges[split]-edges[split-1] >= wideBins*width {
			split--
		}
		fine, err := r.fineCells(edges[:split+1])
		if err != nil {
			return nil, err
		}
		for g := range fine {
			fine[g] = append(fine[g], r.wideCells(g, edges[split:])...)
		}
		return fine, nil
	}
	first := 0
	for first < len(edges)-1 && edges[first+1]-edges[first] >= wideBins*width {
		first++
	}
	fine, err := r.fineCells(edges[first:])
	if err != nil {
		return nil, err
	}
	for g := range fine {
		fine[g] = append(r.wideCells(g, edges[:first+1]), fine[g]...)
	}
	return fine, nil
}

// edges are the limits of a step's cells.
func (r *run) edges(k int) []int64 {
	s := r.out.Steps[k]
	widest := max((r.h.Last-r.h.First)/mostPoints, wideBins*history.BinWidth(r.h.First, r.h.Last))
	least := max(nanos(r.spacing(max(s.Full, s.From))), second)
	end := s.To
	if k == len(r.out.Steps)-1 {
		end++ // the last reading counts
	}
	if s.Full == 0 {
		// Backwards from the end, so that the baseline is resolved.
		back := []int64{}
		for _, d := range spread(end-s.From, least, widest) {
			back = append(back, end-d)
		}
		slices.Reverse(back)
		return back
	}
	var out []int64
	for _, d := range spread(end-s.Full, least, widest) {
		out = append(out, s.Full+d)
	}
	return out
}

// spread returns rising distances from 0 to length: log-spaced from least,
// and nowhere farther apart than widest.
func spread(length, least, widest int64) []int64 {
	out := []int64{0}
	if length <= 0 {
		return out
	}
	d := least
	for d < length {
		out = append(out, d)
		next := int64(float64(d) * math.Pow(10, 1.0/perDecade))
		d = min(max(next, d+least), d+max(widest, least))
	}
	// What is left over is no cell of its own.
	if n := len(out); n > 2 && length-out[n-1] < out[n-1]-out[n-2] {
		out = out[:n-1]
	}
	return append(out, length)
}

func (r *run) fineCells(edges []int64) ([][]point, error) {
	out := make([][]point, len(r.gauges))
	if len(edges) < 2 {
		return out, nil
	}
	bins, err := r.h.Fine(edges)
	if err != nil {
		return nil, err
	}
	for g := range bins {
		for _, b := range bins[g] {
			if r.excluded(g, b.From, b.To) {
				continue
			}
			out[g] = append(out[g], r.gauges[g].fromBin(b))
		}
	}
	return out, nil
}

// wideCells gathers a gauge's bins into cells.
func (r *run) wideCells(g int, edges []int64) []point {
	gg := &r.gauges[g]
	var out []point
	if len(edges) < 2 {
		return nil
	}
	i := sort.Search(len(gg.seq), func(i int) bool { return gg.seq[i].t >= edges[0] })
	for c := 1; c < len(edges); c++ {
		var in []point
		for i < len(gg.seq) && gg.seq[i].t < edges[c] {
			if !r.excluded(g, gg.seq[i].from, gg.seq[i].to) {
				in = append(in, gg.seq[i])
			}
			i++
		}
		if len(in) > 0 {
			out = append(out, joined(in))
		}
	}
	return out
}

// joined makes one point of several bins: the median of their medians.
func joined(in []point) point {
	y, raw := make([]float64, len(in)), make([]float64, len(in))
	var p point
	sum, mad := 0.0, make([]float64, len(in))
	for i, b := range in {
		y[i], raw[i], mad[i] = b.y, b.raw, b.mad
		p.n += b.n
		sum += seconds(b.t-in[0].t) * float64(b.n)
	}
	p.t = in[0].t + nanos(sum/float64(p.n))
	p.y, p.raw, p.mad = lsq.Median(y), lsq.Median(raw), lsq.Median(mad)
	p.from, p.to, p.f = in[0].from, in[len(in)-1].to, in[0].f
	return p
}

// excluded says whether any of [from, to) is left out for the gauge.
func (r *run) excluded(g int, from, to int64) bool {
	for _, s := range r.out.Excluded {
		if (s.Gauge == g || s.Gauge < 0) && from < s.To && to > s.From {
			return true
		}
	}
	return false
}

// netTrack fills in a track's net sags.
func (r *run) netTrack(g int) {
	t := &r.out.Tracks[g]
	c := r.out.Chord
	left, right := walker{t: r.track(c.Left)}, walker{t: r.track(c.Right)}
	for i := range t.Points {
		p := &t.Points[i]
		v := r.net(g, Value{p.Gross, p.U}, left.at(p.Time), right.at(p.Time))
		p.Net, p.NetU = v.MM, v.U
	}
}

func (r *run) track(g int) *Track {
	if g < 0 {
		return nil
	}
	return &r.out.Tracks[g]
}

// walker reads a track between its points, at rising instants.
type walker struct {
	t *Track
	i int
}

func (w *walker) at(t int64) Value {
	if w.t == nil || len(w.t.Points) == 0 {
		return Value{}
	}
	p := w.t.Points
	for w.i+1 < len(p) && p[w.i+1].Time <= t {
		w.i++
	}
	a := p[w.i]
	if w.i+1 == len(p) || t <= a.Time {
		return Value{a.Gross, a.U}
	}
	b := p[w.i+1]
	if a.Step != b.Step {
		// Nothing is interpolated across a change of load.
		if b.Time-t < t-a.Time {
			return Value{b.Gross, b.U}
		}
		return Value{a.Gross, a.U}
	}
	f := float64(t-a.Time) / float64(b.Time-a.Time)
	return Value{a.Gross + f*(b.Gross-a.Gross), max(a.U, b.U)}
}
