package steps

import (
	"math"
	"slices"

	"gaugelog/analysis/history"
	"gaugelog/analysis/lsq"
	"gaugelog/config"
)

// second is one second in the unit of instants.
const second = int64(1e9)

func seconds(ns int64) float64 { return float64(ns) / 1e9 }

func nanos(s float64) int64 { return int64(math.Round(s * 1e9)) }

// point is one reading or bin of a gauge, as sag: calibrated and down
// positive, but no baseline subtracted.
type point struct {
	t        int64
	y, raw   float64
	n        int
	mad, sd  float64 // of its readings, mm
	from, to int64   // of its readings
	min, max float64 // as sag
	f        float64 // how many times coarser a unit key made it: 1 usually
}

// gauge is what the finder knows of one gauge.
type gauge struct {
	cfg      *config.Gauge
	index    int
	lines    []line // its calibrations, the one from the beginning first
	res      float64
	noise    float64 // sd of one reading, mm
	interval float64 // typical spacing of readings, s
	seq      []point // the whole run in bins
	scales   []scale
}

// scale is a stretch in which the indication must be multiplied, a unit key
// having been pressed.
type scale struct {
	from, to int64 // to 0: to the end
	factor   float64
}

func newGauge(h *history.History, i int) gauge {
	cfg := &h.Rig.Gauges[i]
	g := gauge{cfg: cfg, index: i, lines: []line{newLine(cfg)}, res: cfg.Resolution.Value}
	g.recalibrate(h)
	g.refresh(h)
	return g
}

// refresh rebuilds the sequence after scales changed.
func (g *gauge) refresh(h *history.History) {
	bins := h.Bins(g.index)
	g.seq = make([]point, 0, len(bins))
	for _, b := range bins {
		g.seq = append(g.seq, g.fromBin(b))
	}
	var loads []int64
	for _, m := range h.Marks {
		if m.Kind == "load" {
			loads = append(loads, m.Time)
		}
	}
	g.noise, g.interval = g.scatter(loads)
}

func (g *gauge) fromBin(b history.Bin) point {
	p := point{t: b.Time, raw: b.Median, n: b.N, from: b.From, to: b.LastTime}
	f := g.factor(b.Time)
	p.f = max(f, 1)
	p.y = g.sag(b.Median*f, b.Time)
	gain := math.Abs(g.line(b.Time).gain)
	p.mad, p.sd = b.MAD*f/gain, b.SD*f/gain
	p.min, p.max = g.sag(b.Min*f, b.Time), g.sag(b.Max*f, b.Time)
	if p.min > p.max {
		p.min, p.max = p.max, p.min
	}
	if b.N == 1 {
		p.from = b.Time
	}
	return p
}

func (g *gauge) fromSample(s history.Sample) point {
	f := g.factor(s.Time)
	y := g.sag(s.MM*f, s.Time)
	return point{t: s.Time, y: y, raw: s.MM, n: 1, from: s.Time, to: s.Time, min: y, max: y, f: max(f, 1)}
}

func (g *gauge) factor(t int64) float64 {
	for _, s := range g.scales {
		if t >= s.from && (s.to == 0 || t < s.to) {
			return s.factor
		}
	}
	return 1
}

// scatter estimates the standard deviation of one reading and the typical
// interval. Within bins of several readings it is their standard deviation, of
// all bins the median, which no spike enters; otherwise second differences of
// neighbours tell, which no steady trend enters. It is never below the
// resolution's floor. Few neighbours are told of where a load was marked
// between them: its jump is no scatter.
func (g *gauge) scatter(loads []int64) (noise, interval float64) {
	var spread, second, calm, gaps []float64
	held := g.held()
	free := 0
	for i, p := range g.seq {
		if !held[i] {
			free++
		}
		if p.n >= 5 && !held[i] {
			spread = append(spread, p.sd)
		}
		if i > 0 {
			gaps = append(gaps, seconds(p.to-g.seq[i-1].to)/float64(p.n))
		}
		if i > 1 && !held[i] {
			d := g.seq[i-2].y - 2*g.seq[i-1].y + p.y
			second = append(second, math.Abs(d)*math.Sqrt(float64(p.n)))
			if !slices.ContainsFunc(loads, func(t int64) bool { return t >= g.seq[i-2].from && t <= p.to }) {
				calm = append(calm, second[len(second)-1])
			}
		}
	}
	if len(second) < fewBins && len(calm) >= 3 {
		second = calm
	}
	floor := floorU(g.res)
	interval = lsq.Median(gaps)
	if 2*len(spread) > free && free > 0 {
		return max(lsq.Median(spread), floor), interval
	}
	return max(trimmedSigma(second)/math.Sqrt(6), floor), interval
}

// heldBins is how many bins in a row may be of one value before they are taken
// for those of a gauge on hold or at its stop, which tell nothing of scatter.
const heldBins = 10

// held says which bins lie in a row of at least heldBins of one value.
func (g *gauge) held() []bool {
	out := make([]bool, len(g.seq))
	for i := 0; i < len(g.seq); {
		j := i + 1
		for j < len(g.seq) && g.seq[i].min == g.seq[i].max && g.seq[j].min == g.seq[i].min && g.seq[j].max == g.seq[i].min {
			j++
		}
		if j-i >= heldBins {
			for k := i; k < j; k++ {
				out[k] = true
			}
		}
		i = j
	}
	return out
}

// fewBins is of how few deviations a single change of load may be a tenth.
const fewBins = 300

// trimmedSigma estimates a standard deviation from absolute deviations: the
// mean of their lower nine tenths over what it is for normal ones, 0.6573
// (from the normal density). Unlike a median it does not stick at a count. Of
// few deviations a single load change is more than a tenth: then the lower
// three quarters are taken, whose mean is 0.5149.
func trimmedSigma(abs []float64) float64 {
	s := slices.Clone(abs)
	slices.Sort(s)
	n, mean := len(s)*9/10, 0.6573
	if len(s) < fewBins {
		n, mean = len(s)*3/4, 0.5149
	}
	if n == 0 {
		return 0
	}
	return total(s[:n]) / float64(n) / mean
}

// pointU is the standard uncertainty of a point from scatter and resolution.
func (g *gauge) pointU(p point) float64 {
	s := g.noise * p.f
	if p.n >= 5 {
		s = max(s, lsq.MADScale*p.mad)
	}
	return max(1.253*s/math.Sqrt(float64(p.n)), floorU(g.res*p.f))
}

// inSpan says whether the gauge stands between the outermost supports.
func (r *run) inSpan(g int) bool {
	lo, hi := math.Inf(1), math.Inf(-1)
	for _, s := range r.h.Rig.Supports {
		lo, hi = min(lo, s.At.Value), max(hi, s.At.Value)
	}
	at := r.h.Rig.Gauges[g].At.Value
	return at > lo && at < hi || len(r.h.Rig.Supports) < 2
}

func (r *run) seesBeam(g int) bool {
	s := r.h.Rig.Gauges[g].Sees
	return s == "" || s == "beam"
}
