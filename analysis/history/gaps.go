package history

import (
	"slices"
)

// neighbourGaps returns the intervals in which a gauge left no reading though
// its neighbours' spacing says it should have, for readings of which nothing but
// the instants is known.
func neighbourGaps(h *History) []Gap {
	var per [][]Gap
	for g := range h.Rig.Gauges {
		per = append(per, wideIntervals(h.Rig.Gauges[g].Name, h.Bins(g), func(from, to int64) bool { return true }))
	}
	return joinGaps(per, h.GaugeReadings)
}

// wideIntervals looks, between successive bins of one gauge, for intervals five
// times as long as the median spacing of the bins around them, longer than a
// bin, and such as too says.
func wideIntervals(name string, bins []Bin, too func(from, to int64) bool) []Gap {
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
	var gaps []Gap
	var around [9]int64
	for i := 1; i < len(bins); i++ {
		from, to := bins[i-1].LastTime, bins[i].FirstTime
		if to-from <= bins[i].To-bins[i].From {
			continue
		}
		near := around[:copy(around[:], spacing[max(0, i-4):min(len(bins), i+5)])]
		slices.Sort(near)
		if to-from > 5*max(near[len(near)/2], 1) && too(from, to) {
			gaps = append(gaps, Gap{Gauge: name, From: from, To: to, Why: "no reading"})
		}
	}
	return gaps
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
