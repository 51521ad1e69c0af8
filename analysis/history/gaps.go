package history

import (
	"slices"
)

// findGaps returns the intervals in which a gauge left no reading though its
// neighbours' spacing says it should have: one five times as long as the
// median spacing of the bins around it. A gap that all gauges share is one
// entry without a gauge.
func findGaps(h *History) []Gap {
	var per [][]Gap
	for g := range h.Rig.Gauges {
		per = append(per, gaugeGaps(h.Rig.Gauges[g].Name, h.Bins(g), h.First, h.Last))
	}
	return joinGaps(per, h.GaugeReadings)
}

// gaugeGaps looks for gaps from bins alone: within a bin the mean spacing is
// known, and between bins the last instant of one and the first of the next.
func gaugeGaps(name string, bins []Bin, first, last int64) []Gap {
	var gaps []Gap
	if len(bins) < 4 {
		return nil
	}
	spacing := make([]int64, len(bins))
	for i, b := range bins {
		if i > 0 {
			spacing[i] = (b.LastTime - bins[i-1].LastTime) / int64(b.N)
		}
	}
	spacing[0] = spacing[1]
	for i := 1; i < len(bins); i++ {
		lo, hi := max(0, i-4), min(len(bins), i+5)
		around := slices.Clone(spacing[lo:hi])
		slices.Sort(around)
		typical := max(around[len(around)/2], 1)
		from := bins[i-1].LastTime
		to := firstTime(bins[i], typical)
		if to-from > 5*typical && to-from > (bins[i].To-bins[i].From) {
			gaps = append(gaps, Gap{Gauge: name, From: from, To: to, Why: "no reading"})
		}
	}
	return gaps
}

// firstTime estimates a bin's first instant: its readings are evenly spaced
// about their mean as near as a bin can tell.
func firstTime(b Bin, typical int64) int64 {
	if b.N == 1 {
		return b.Time
	}
	return max(b.From, b.Time-(b.LastTime-b.Time))
}

// joinGaps turns gaps that all gauges with readings share into one.
func joinGaps(per [][]Gap, readings []int64) []Gap {
	live := 0
	lead := -1
	for g, n := range readings {
		if n > 0 {
			live++
			if lead < 0 {
				lead = g
			}
		}
	}
	used := map[[2]int]bool{}
	var out []Gap
	if lead >= 0 && live > 1 {
		for k, gap := range per[lead] {
			common := gap
			common.Gauge = ""
			hit := [][2]int{{lead, k}}
			for g := range per {
				if g == lead {
					continue
				}
				for m, other := range per[g] {
					from, to := max(common.From, other.From), min(common.To, other.To)
					if to-from > (gap.To-gap.From)/2 {
						common.From, common.To = from, to
						hit = append(hit, [2]int{g, m})
						break
					}
				}
			}
			if len(hit) == live {
				out = append(out, common)
				for _, p := range hit {
					used[p] = true
				}
			}
		}
	}
	for g := range per {
		for k, gap := range per[g] {
			if !used[[2]int{g, k}] {
				out = append(out, gap)
			}
		}
	}
	slices.SortStableFunc(out, func(a, b Gap) int {
		if a.From != b.From {
			if a.From < b.From {
				return -1
			}
			return 1
		}
		return 0
	})
	return out
}
