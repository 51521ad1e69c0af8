package history

import (
	"fmt"
	"math"
	"slices"
	"sort"

	"gaugelog/config"
)

// Given is what FromSamples makes a History of.
type Given struct {
	Rig        *config.Rig
	Amendments []config.Amendment
	// Samples holds the readings by gauge of the rig, in order of time.
	Samples [][]Sample
	// Ambient holds the surroundings by probe of the rig; nil for none.
	Ambient [][]AmbientSample
	Marks   []Mark // in any order
	Events  []Event
}

// FromSamples returns a History of readings held in memory: for tests, and
// for readings that were never in a folder. It fails on a reading that is not
// a number or out of order.
func FromSamples(g Given) (*History, error) {
	if len(g.Samples) != len(g.Rig.Gauges) {
		return nil, fmt.Errorf("history: %d lists of readings for %d gauges", len(g.Samples), len(g.Rig.Gauges))
	}
	h := &History{Rig: g.Rig, Amendments: g.Amendments, Events: g.Events, GaugeReadings: make([]int64, len(g.Samples))}
	h.Marks = slices.Clone(g.Marks)
	sort.SliceStable(h.Marks, func(i, j int) bool { return h.Marks[i].Time < h.Marks[j].Time })
	for i, list := range g.Samples {
		for k, s := range list {
			if math.IsNaN(s.MM) || math.IsInf(s.MM, 0) || k > 0 && s.Time <= list[k-1].Time {
				return nil, fmt.Errorf("history: reading %d of gauge %s is not a number or out of order", k, g.Rig.Gauges[i].Name)
			}
		}
		if len(list) == 0 {
			continue
		}
		h.GaugeReadings[i] = int64(len(list))
		if h.Readings == 0 || list[0].Time < h.First {
			h.First = list[0].Time
		}
		if h.Readings == 0 || list[len(list)-1].Time > h.Last {
			h.Last = list[len(list)-1].Time
		}
		h.Readings += int64(len(list))
	}
	m := &memory{samples: g.Samples, ambient: g.Ambient, rig: g.Rig}
	width := BinWidth(h.First, h.Last)
	for i := range g.Samples {
		bins, inexact := binSamples(g.Samples[i], g.Rig.Gauges[i].Resolution.Value, &grid{width: width})
		m.bins = append(m.bins, bins)
		if inexact {
			h.Notes = append(h.Notes, notMultiple(g.Rig.Gauges[i]))
		}
	}
	h.source = m
	h.Gaps = neighbourGaps(h)
	return h, nil
}

// FromSource returns a History of readings that src holds or makes up as they
// are asked for: for simulations too long to be kept in memory. Samples and
// Ambient of g do not count. First, last and the numbers of readings are those
// of the source's bins.
func FromSource(g Given, src Source) *History {
	h := &History{Rig: g.Rig, Amendments: g.Amendments, Events: g.Events, source: src, GaugeReadings: make([]int64, len(g.Rig.Gauges))}
	h.Marks = slices.Clone(g.Marks)
	sort.SliceStable(h.Marks, func(i, j int) bool { return h.Marks[i].Time < h.Marks[j].Time })
	for i := range g.Rig.Gauges {
		bins := src.Bins(i)
		if len(bins) == 0 {
			continue
		}
		for _, b := range bins {
			h.GaugeReadings[i] += int64(b.N)
		}
		first, last := bins[0].FirstTime, bins[len(bins)-1].LastTime
		if h.Readings == 0 || first < h.First {
			h.First = first
		}
		if h.Readings == 0 || last > h.Last {
			h.Last = last
		}
		h.Readings += h.GaugeReadings[i]
	}
	h.Gaps = neighbourGaps(h)
	return h
}

func notMultiple(g config.Gauge) Note {
	return Note{Code: "not-a-multiple", Gauge: g.Name, Text: fmt.Sprintf(
		"indications of gauge %s are no multiples of its resolution of %g\u202fmm; medians are exact to a nanometre all the same, but check the resolution in the rig file", g.Name, g.Resolution.Value)}
}

// memory is a Source of readings held in memory.
type memory struct {
	rig     *config.Rig
	samples [][]Sample
	bins    [][]Bin
	ambient [][]AmbientSample
}

func (m *memory) Bins(gauge int) []Bin { return m.bins[gauge] }

func (m *memory) Window(from, to int64) ([][]Sample, error) {
	out := make([][]Sample, len(m.samples))
	for i, list := range m.samples {
		lo := sort.Search(len(list), func(k int) bool { return list[k].Time >= from })
		hi := max(lo, sort.Search(len(list), func(k int) bool { return list[k].Time > to }))
		if out[i] = list[lo:hi:hi]; hi-lo > 2*WindowMost {
			w := newThinner(from, to)
			for _, s := range out[i] {
				w.add(s)
			}
			out[i] = w.samples()
		}
	}
	return out, nil
}

func (m *memory) Fine(edges []int64) ([][]Bin, error) {
	out := make([][]Bin, len(m.samples))
	if len(edges) < 2 {
		return out, nil
	}
	for i, list := range m.samples {
		lo := sort.Search(len(list), func(k int) bool { return list[k].Time >= edges[0] })
		hi := max(lo, sort.Search(len(list), func(k int) bool { return list[k].Time >= edges[len(edges)-1] }))
		out[i], _ = binSamples(list[lo:hi], m.rig.Gauges[i].Resolution.Value, &grid{edges: edges})
	}
	return out, nil
}

func (m *memory) Ambient(probe int) []AmbientSample {
	if probe >= len(m.ambient) {
		return nil
	}
	return m.ambient[probe]
}

// binSamples puts one gauge's readings, in order of time, into bins.
func binSamples(list []Sample, resolution float64, g *grid) (bins []Bin, inexact bool) {
	c, all := newCounts([]float64{resolution}, g, tolerance), newGather(tolerance)
	c.begin()
	for _, s := range list {
		c.add(0, s.Time, toMicro(s.MM))
	}
	c.finish()
	start := 0
	for i := range c.parts {
		p := &c.parts[i]
		all.take(p, c.tallies[start:p.tallies], false, tolerance)
		all.settle(false)
		start = p.tallies
	}
	return all.bins(), all.inexact
}
