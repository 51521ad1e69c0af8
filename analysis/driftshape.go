package analysis

import (
	"math"

	"gaugelog/analysis/creep"
	"gaugelog/analysis/lsq"
)

// A gauge that drifts breaks the shape of the beam, which creep obeys: what it
// leaves over runs away from what the others do. A joint fit that holds drifts
// to what the rig file states would take it for slow noise of that gauge, so
// the odd one out is looked for and its drift set free.

// leastForShape is how many gauges it takes to tell which one is odd.
const leastForShape = 3

// oddOnes returns which series drift away from the others by more than the
// rig file allows, with by how much, mm/d: against the median of all, each as
// the creep gauge would have it.
func (t *creepTask) oddOnes(f *creep.Fit) map[int]float64 {
	if f == nil || len(t.in.Series) < leastForShape {
		return nil
	}
	trend := make([]float64, len(t.in.Series))
	for i := range trend {
		trend[i] = (t.trendOf(f, i) + driftIn(f, i)) / t.share[i]
	}
	middle := lsq.Median(trend)
	odd := map[int]float64{}
	for i, v := range trend {
		if d := (v - middle) * t.share[i]; math.Abs(d) > mostDrift*t.statedDrift(i) {
			odd[i] = d
		}
	}
	return odd
}

// mostDrift is how many standard uncertainties stated of a gauge's steadiness
// its drift may reach before it counts as a drift of its own.
const mostDrift = 4

// trendOf is the straight trend of what a law leaves over of a series under
// the creep step's load, mm/d.
func (t *creepTask) trendOf(f *creep.Fit, i int) float64 {
	var x, y []float64
	for k, at := range f.TimeH[i] {
		if at > t.in.FullH && at < t.in.EndH {
			x, y = append(x, at/24), append(y, f.ResidualMM[i][k])
		}
	}
	if len(x) < leastBins {
		return 0
	}
	n := float64(len(x))
	var sx, sy, sxx, sxy float64
	for k := range x {
		sx, sy = sx+x[k]/n, sy+y[k]/n
	}
	for k := range x {
		sxx, sxy = sxx+(x[k]-sx)*(x[k]-sx), sxy+(x[k]-sx)*(y[k]-sy)
	}
	return sxy / sxx
}

// driftIn is the drift a fit gave a series, mm/d.
func driftIn(f *creep.Fit, i int) float64 {
	for _, n := range f.Nuisance {
		if n.Kind == "drift" && n.Series == i {
			return n.Value
		}
	}
	return 0
}

// statedDrift is what the rig file allows a series, mm/d.
func (t *creepTask) statedDrift(i int) float64 {
	for _, d := range t.in.Drifts {
		if d.Series == i && d.Prior != nil {
			return d.Prior.U
		}
	}
	return math.Inf(1)
}

// freed is the task's input with the drifts of odd series as unsure as they
// are great.
func (t *creepTask) freed(odd map[int]float64) creep.Input {
	in := t.in
	in.Drifts = append([]creep.Drift(nil), t.in.Drifts...)
	for k := range in.Drifts {
		if d := odd[in.Drifts[k].Series]; d != 0 {
			in.Drifts[k].Prior = &creep.Knowledge{U: math.Abs(d)}
		}
	}
	return in
}
