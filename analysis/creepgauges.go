package analysis

import (
	"math"

	"gaugelog/analysis/creep"
	"gaugelog/analysis/history"
	"gaugelog/analysis/steps"
)

// leastShare is the sag, as a share of the creep gauge's, below which a gauge
// tells nothing of the law: its errors of place weigh too much.
const leastShare = 0.2

// influenceU is the relative standard uncertainty of each load's effect on a
// gauge as worked out from places and stiffness: common practice for places
// known to half a millimetre. The readings fix it far better.
const influenceU = 0.005

// addSeries hands over the creep gauge, then every other gauge on the beam
// that sags enough.
func (t *creepTask) addSeries(h *history.History, f *steps.Findings, shares [][]float64, pattern float64) {
	if d := grain(h, t.gauge); d > h.Rig.Gauges[t.gauge].Resolution.Value {
		t.note("coarser-than-stated", "its readings come in steps of %.3g\u202fmm, coarser than the resolution stated of it, %.3g\u202fmm; so much less they tell", d, h.Rig.Gauges[t.gauge].Resolution.Value)
	}
	t.in.Series, t.gauges = []creep.Series{t.series(h, f, t.gauge, shares[t.gauge], pattern)}, []int{t.gauge}
	t.share = []float64{1}
	for g, gauge := range h.Rig.Gauges {
		if g == t.gauge || !touches(gauge) || g >= len(f.Tracks) || g == f.Chord.Left || g == f.Chord.Right {
			continue
		}
		own, _ := patternShare(h.Rig, f, t.step, shares[g])
		if math.Abs(own) < leastShare*math.Abs(pattern) {
			continue
		}
		if s := thinned(t.series(h, f, g, shares[g], pattern), mostBeside); len(s.TimeH) >= leastBins {
			t.in.Series, t.gauges = append(t.in.Series, s), append(t.gauges, g)
			t.share = append(t.share, own/pattern)
		}
	}
}

// leastBins is what a gauge beside the creep gauge must have to be of use.
const leastBins = 20

// mostBeside is how many bins of a gauge beside the creep gauge enter the fit:
// they tell drift from creep and loads from each other, which needs few.
const mostBeside = 200

// perDecade is how many bins a decade of time since a change of load keeps.
const perDecade = 8

// thinned keeps some most bins of a series, and more of each change's early
// ones. Bins are left out, not merged: a merged one would average the day's
// temperature away. Which stay depends on the time since the last change
// alone, so that an instant told a little otherwise leaves the choice as it is.
func thinned(s creep.Series, most int) creep.Series {
	n := len(s.TimeH)
	if n <= most {
		return s
	}
	width := (s.TimeH[n-1] - s.TimeH[0]) / (0.75 * float64(most))
	out := s
	out.TimeH, out.SagMM, out.U, out.N = nil, nil, nil, nil
	last, from := math.Inf(-1), math.Inf(-1)
	for i, t := range s.TimeH {
		began := s.TimeH[0]
		for _, c := range s.Changes {
			if c.AtH <= t {
				began = c.AtH
			}
		}
		age := t - began
		// A third of a cell off, lest boundaries fall on round times.
		cell := math.Floor(age/width + perDecade*math.Log10(1+60*max(age, 0)) + 1.0/3)
		if cell == last && began == from {
			continue
		}
		last, from = cell, began
		out.TimeH, out.SagMM = append(out.TimeH, t), append(out.SagMM, s.SagMM[i])
		out.U, out.N = append(out.U, s.U[i]), append(out.N, s.N[i])
	}
	return out
}

// series is a gauge's track, without what was read while a load was being
// placed. The baseline is in it: it ties the zero and the temperature. pattern
// is the creep gauge's sag per newton, in which the law is told.
func (t *creepTask) series(h *history.History, f *steps.Findings, g int, share []float64, pattern float64) creep.Series {
	gauge := h.Rig.Gauges[g]
	s := creep.Series{Name: gauge.Name, PartU: influenceU}
	for _, c := range f.Loads {
		newton := 0.0
		parts := make([]float64, len(c.Delta))
		for j, n := range c.Delta {
			parts[j] = n * share[j] / pattern
			newton += parts[j]
		}
		s.Changes = append(s.Changes, creep.Change{AtH: t.hours(c.Full) - c.RampS/3600, RampH: c.RampS / 3600, Newton: newton,
			U: f.Steps[c.Step].StartU / 3600})
		s.Parts = append(s.Parts, parts)
	}
	track := f.Tracks[g]
	s.ZeroU, s.ResolutionMM = track.Baseline.U, grain(h, g)
	b := creepBin{floor: s.ResolutionMM / math.Sqrt(12), into: &s}
	for _, p := range track.Points {
		if placing(f, p.Time) || t.inDoubt(f, p.Time) || !(p.NetU > 0) || math.IsNaN(p.Net) {
			continue
		}
		b.add(t.hours(p.Time), t.hours(changeBefore(f, p.Time)), p)
	}
	b.close()
	return s
}

// inDoubt reports whether a reading came so soon after a change of load that
// nobody can say whether the change was complete.
func (t *creepTask) inDoubt(f *steps.Findings, at int64) bool {
	for _, c := range f.Loads {
		if u := int64(2 * f.Steps[c.Step].StartU * 1e9); u > 0 && at > c.Full-int64(c.RampS*1e9)-u && at < c.Full+u {
			return true
		}
	}
	return false
}

// grain is the step in which a gauge's readings really come, mm: the rig's
// resolution, or the least difference among them where that is plainly coarser.
func grain(h *history.History, g int) float64 {
	stated := h.Rig.Gauges[g].Resolution.Value
	least, n, last := math.Inf(1), 0, math.NaN()
	for _, b := range h.Bins(g) {
		for _, v := range []float64{b.First, b.Min, b.Max, b.Last} {
			if d := math.Abs(v - last); d > stated/2 {
				least = min(least, d)
				n++
			}
			last = v
		}
	}
	if n < leastSteps || least < 2.5*stated {
		return stated
	}
	return least
}

// leastSteps is how many steps of the readings tell their grain.
const leastSteps = 10

// addOffsets hands on the jumps that were taken off the gauges' tracks: what
// is left of them is 0 with the uncertainty they were found with.
func (t *creepTask) addOffsets(f *steps.Findings) {
	for i, g := range t.gauges {
		for _, o := range f.Tracks[g].Offsets {
			if o.Value.U > 0 {
				t.in.Offsets = append(t.in.Offsets, creep.Offset{Name: string(o.Kind) + " on " + t.in.Series[i].Name, Series: i,
					AtH: t.hours(o.Time), Prior: &creep.Knowledge{U: o.Value.U}})
			}
		}
	}
}

// addDrifts gives every gauge a straight drift of its own that over the whole
// record comes to no more than the standard uncertainty the rig states of one
// of its indications, gauges over the supports by their share: it is all the
// rig file says of how steady a gauge is.
func (t *creepTask) addDrifts(h *history.History, f *steps.Findings) {
	days := float64(h.Last-h.First) / 86400e9
	own := instrument{h.Rig, f.Chord, true}
	for i, g := range t.gauges {
		u := own.net(g, 0) / math.Sqrt2
		if days > 0 && u > 0 {
			t.in.Drifts = append(t.in.Drifts, creep.Drift{Name: "drift of " + t.in.Series[i].Name, Series: i, AtH: t.hours(h.First),
				Prior: &creep.Knowledge{U: u / days}})
		}
	}
}
