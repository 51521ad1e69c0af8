package steps

import (
	"math"
	"math/rand/v2"

	"gaugelog/analysis/history"
)

// stream is a history.Source that makes up its readings as they are asked
// for: a month of seconds is never held. Every reading is a function of the
// seed, the gauge and its number, so each question gets the same answer. It
// counts its bins by itself and shares no code with what reads a folder back.
type stream struct {
	seed   uint64
	gauges []streamGauge
	every  float64 // s
	length float64 // s
	silent [][2]float64
	sharp  []float64 // instants behind which the level may bend, s
	bins   [][]history.Bin
}

type streamGauge struct {
	noise, res float64
	per        float64 // 1/res
	sign       float64
	phase      float64                 // of its readings, s
	level      func(t float64) float64 // sag, mm
	// shows is what faults make of an indication; whole where it is not to be
	// rounded any more.
	shows func(t, v float64) (shown float64, whole bool)
	sharp []float64 // instants of its own faults, s
}

// normals are drawn once, of standard deviation 1.
var normals = func() []float32 {
	rng := rand.New(rand.NewPCG(3, 4))
	out := make([]float32, 1<<20)
	for i := range out {
		out[i] = float32(rng.NormFloat64())
	}
	return out
}()

// noiseBlock is how many successive readings take successive normals.
const noiseBlock = 256

// noise is the noise of a gauge's k-th reading and its neighbours up to the
// end of their block: a stretch of the normals that depends on the arguments
// (Steele, Lea and Flood's SplitMix64 finaliser mixes them).
func noise(seed uint64, g, k int) []float32 {
	z := seed*0x9e3779b97f4a7c15 + uint64(g)*0xd1342543de82ef95 + uint64(k/noiseBlock)*0xbf58476d1ce4e5b9
	z = (z ^ z>>30) * 0xbf58476d1ce4e5b9
	z = (z ^ z>>27) * 0x94d049bb133111eb
	z ^= z >> 31
	off := int(z % uint64(len(normals)-noiseBlock))
	return normals[off+k%noiseBlock : off+noiseBlock]
}

// when is the instant of a gauge's k-th reading, s.
func (s *stream) when(g, k int) float64 { return s.gauges[g].phase + float64(k)*s.every }

// lost says that a stretch of silence holds t.
func (s *stream) lost(t float64) bool {
	for _, q := range s.silent {
		if t > q[0] && t < q[1] {
			return true
		}
	}
	return false
}

// counts rounds an indication, given in counts, to a whole one.
func counts(x float64) int { return int(x+1<<30+0.5) - 1<<30 }

// reading is the indication of gauge g at t as its k-th reading, given its level.
func (s *stream) reading(g, k int, t, level float64) float64 {
	gg := &s.gauges[g]
	v := gg.sign * (level + gg.noise*float64(noise(s.seed, g, k)[0]))
	if gg.shows != nil {
		var whole bool
		if v, whole = gg.shows(t, v); whole {
			return v
		}
	}
	return float64(counts(v*gg.per)) * gg.res
}

// smooth is how long from t on gauge g's level is a smooth curve that a
// parabola follows: an eighth of the time since it last bent, at most ten
// minutes; 0 where it may bend within.
func (s *stream) smooth(g int, t float64) float64 {
	span := 600.0
	for _, q := range s.silent {
		if q[0] >= t {
			span = min(span, q[0]-t)
		}
	}
	for _, list := range [][]float64{s.sharp, s.gauges[g].sharp} {
		for _, q := range list {
			if q >= t {
				span = min(span, q-t)
			} else {
				span = min(span, (t-q)/8)
			}
		}
	}
	if span < 16*s.every {
		return 0
	}
	return span
}

func (s *stream) numbers(g int, a, b float64) (lo, hi int) {
	n := int(math.Floor((s.length-s.gauges[g].phase)/s.every)) + 1
	lo = max(0, int(math.Ceil((a-s.gauges[g].phase)/s.every-1e-9)))
	hi = min(n, int(math.Ceil((b-s.gauges[g].phase)/s.every-1e-9)))
	return lo, max(lo, hi)
}

// bin counts the readings of gauge g in [from, to).
func (s *stream) bin(g int, from, to int64, c *tally) (history.Bin, bool) {
	lo, hi := s.numbers(g, seconds(from-epoch), seconds(to-epoch))
	if lo >= hi {
		return history.Bin{}, false
	}
	gg := &s.gauges[g]
	*c = tally{res: gg.res, lo: len(c.table), values: c.values[:0]}
	base := counts(s.reading(g, lo, s.when(g, lo), gg.level(s.when(g, lo)))*gg.per) - len(c.table)/2
	c.base = float64(base) * gg.res
	for k := lo; k < hi; {
		t := s.when(g, k)
		if len(s.silent) > 0 && s.lost(t) {
			k++
			continue
		}
		span := s.smooth(g, t)
		if span == 0 {
			v := s.reading(g, k, t, gg.level(t))
			c.at(t, v)
			c.values = append(c.values, v)
			k++
			continue
		}
		end := min(hi, k+int(span/s.every)+1)
		for k < end {
			k = s.even(g, k, end, base, c)
		}
	}
	if c.n == 0 {
		return history.Bin{}, false
	}
	out := history.Bin{From: from, To: to, N: c.n, First: c.a, Last: c.b, FirstTime: at(c.first), LastTime: at(c.last), Time: at(c.sum / float64(c.n))}
	c.summarise(&out)
	return out, true
}

// even counts the readings from k up to end, within one block of noise, where
// the level is a parabola; it returns the first one not counted.
func (s *stream) even(g, k, end, base int, c *tally) int {
	gg := &s.gauges[g]
	list := noise(s.seed, g, k)
	if n := end - k; n < len(list) {
		list = list[:n]
	}
	t := s.when(g, k)
	span := float64(len(list)-1) * s.every
	la, lm, lb := gg.level(t), gg.level(t+span/2), gg.level(t+span)
	unit := gg.sign * gg.per
	p, q := (4*lm-3*la-lb)*unit, (2*la+2*lb-4*lm)*unit
	la *= unit
	sd, step := gg.noise*unit, 1/max(float64(len(list)-1), 1)
	shown := 0.0
	for j, e := range list {
		f := float64(j) * step
		x := la + f*(p+f*q) + sd*float64(e)
		whole := false
		if gg.shows != nil {
			x, whole = gg.shows(t+float64(j)*s.every, x*gg.res)
			shown = x
			x *= gg.per
		}
		if i := counts(x); !whole {
			shown = float64(i) * gg.res
			whole = !c.count(i - base)
		}
		if whole {
			c.values = append(c.values, shown)
		}
		if c.n == 0 && j == 0 {
			c.first, c.a = t, shown
		}
	}
	c.last, c.b = t+span, shown
	c.n += len(list)
	c.sum += float64(len(list)) * (t + span/2)
	return k + len(list)
}

// Bins returns a gauge's bins of history.BinWidth.
func (s *stream) Bins(g int) []history.Bin {
	if s.bins == nil {
		s.bins = make([][]history.Bin, len(s.gauges))
	}
	if s.bins[g] != nil {
		return s.bins[g]
	}
	width := history.BinWidth(at(0), at(s.length))
	var c tally
	out := make([]history.Bin, 0, int(nanos(s.length)/width)+2)
	for from := at(0) - at(0)%width; from <= at(s.length); from += width {
		if b, ok := s.bin(g, from, from+width, &c); ok {
			out = append(out, b)
		}
	}
	s.bins[g] = out
	return out
}

// Window returns every reading in [from, to]; none of these is so long that a
// folder's would be thinned.
func (s *stream) Window(from, to int64) ([][]history.Sample, error) {
	out := make([][]history.Sample, len(s.gauges))
	for g := range s.gauges {
		lo, hi := s.numbers(g, seconds(from-epoch), seconds(to-epoch)+1e-6)
		step := max(1, (hi-lo)/(2*history.WindowMost)+1)
		for k := lo; k < hi; k += step {
			if t := s.when(g, k); !s.lost(t) {
				out[g] = append(out[g], history.Sample{Time: at(t), MM: s.reading(g, k, t, s.gauges[g].level(t))})
			}
		}
	}
	return out, nil
}

// Fine returns the bins between the edges.
func (s *stream) Fine(edges []int64) ([][]history.Bin, error) {
	out := make([][]history.Bin, len(s.gauges))
	var c tally
	for g := range s.gauges {
		for i := 1; i < len(edges); i++ {
			if b, ok := s.bin(g, edges[i-1], edges[i], &c); ok {
				out[g] = append(out[g], b)
			}
		}
	}
	return out, nil
}

// Ambient: no probe was read.
func (s *stream) Ambient(int) []history.AmbientSample { return nil }

var _ history.Source = (*stream)(nil)
