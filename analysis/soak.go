package analysis

import (
	"math"
	"slices"

	"gaugelog/analysis/creep"
	"gaugelog/analysis/history"
	"gaugelog/analysis/lsq"
	"gaugelog/analysis/steps"
)

// A soak is the time before the first load in which the gauges stood still:
// at least five minutes of at least a hundred readings at one interval.
const (
	leastSoakS    = 300.0
	leastSoakRead = 100
	// soakEnds is how long before the load the soak ends, s: hands are near.
	soakEnds = 10.0
	// regular is by how much an interval may exceed the usual one before a
	// reading is missing in it.
	regular = 1.5
)

// soaksOf says how every gauge wandered before the first load; none where it
// was not read for long enough, or at no steady interval.
func soaksOf(h *history.History, f *steps.Findings) ([]Soak, error) {
	out := []Soak{}
	if len(f.Loads) == 0 || f.Baseline < 0 || f.Baseline >= len(f.Steps) {
		return out, nil
	}
	first := f.Loads[0]
	to := first.Full - int64((first.RampS+soakEnds+2*f.Steps[first.Step].StartU)*1e9)
	from := f.Steps[f.Baseline].From
	if seconds(to-from) < leastSoakS {
		return out, nil
	}
	all, err := h.Window(from, to)
	if err != nil {
		return nil, err
	}
	for g, list := range all {
		if s, ok := soakOf(list, h.Rig.Gauges[g].Resolution.Value); ok {
			s.Gauge = h.Rig.Gauges[g].Name
			out = append(out, s)
		}
	}
	return out, nil
}

// soakOf works on the longest stretch of one gauge's readings in which none is
// missing.
func soakOf(list []history.Sample, resolution float64) (Soak, bool) {
	interval := usualInterval(list)
	list = unbroken(list, regular*interval)
	if interval <= 0 || len(list) < leastSoakRead || seconds(list[len(list)-1].Time-list[0].Time) < leastSoakS {
		return Soak{}, false
	}
	mm := make([]float64, len(list))
	for i, v := range list {
		mm[i] = v.MM
	}
	a, err := creep.SoakOf(mm, interval, resolution)
	if err != nil {
		return Soak{}, false
	}
	s := Soak{
		From: instant(list[0].Time), To: instant(list[len(list)-1].Time), Readings: len(list), IntervalS: interval,
		AverageS: a.AverageS, Floored: a.Floored, Floor: quantity(a.FloorMM, 0, "mm"), Deviation: []SoakDeviation{},
	}
	for i, tau := range a.TauS {
		s.Deviation = append(s.Deviation, SoakDeviation{AverageS: tau, Deviation: quantity(a.DeviationMM[i], 0, "mm")})
	}
	s.Rate = soakRate(list, resolution)
	return s, true
}

// soakRate is the straight drift over the soak, mm/d, from means of a
// sixtieth of it each; its u is no less than a reading's step over the soak.
func soakRate(list []history.Sample, resolution float64) *Q {
	const parts = 60
	var x, y []float64
	for k := range parts {
		lo, hi := k*len(list)/parts, (k+1)*len(list)/parts
		var st, sy float64
		for _, v := range list[lo:hi] {
			st, sy = st+seconds(v.Time-list[0].Time)/86400, sy+v.MM-list[0].MM
		}
		n := float64(hi - lo)
		x, y = append(x, st/n), append(y, sy/n)
	}
	l, err := lsq.TheilSen(x, y, 1.96)
	if err != nil {
		return nil
	}
	floor := resolution * math.Sqrt(2.0/12) / (x[len(x)-1] - x[0])
	q := quantity(l.Slope, max((l.High-l.Low)/(2*1.96), floor), "mm/d")
	return &q
}

// usualInterval is the median interval, s; 0 for too few readings.
func usualInterval(list []history.Sample) float64 {
	if len(list) < leastSoakRead {
		return 0
	}
	d := make([]float64, len(list)-1)
	for i := range d {
		d[i] = seconds(list[i+1].Time - list[i].Time)
	}
	slices.Sort(d)
	return math.Round(d[len(d)/2]*1000) / 1000 // clocks' jitter is no interval
}

// unbroken is the longest stretch without an interval above most, s.
func unbroken(list []history.Sample, most float64) []history.Sample {
	var best []history.Sample
	for i := 0; i < len(list); {
		j := i + 1
		for j < len(list) && seconds(list[j].Time-list[j-1].Time) <= most {
			j++
		}
		if j-i > len(best) {
			best = list[i:j]
		}
		i = j
	}
	return best
}
