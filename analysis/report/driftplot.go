package report

import (
	"math"

	"gonum.org/v1/plot/plotter"

	"gaugelog/analysis"
)

// driftFigure plots what is to stand still: gauges on a fixed reference, and those
// at the supports, as read, over the whole run.
func (b *builder) driftFigure() (Figure, bool) {
	micro, unit := b.small()
	per, name := 86400.0, "d"
	if b.lastS() < 2*86400 {
		per, name = 3600, "h"
	}
	p := newPlot("time from the first reading, "+name, "moved, "+unit)
	sagDown(p)
	drawn := 0
	for _, g := range b.r.Series.Gauges {
		sense, still := b.standsStill(g)
		if !still || len(g.TimeS) < 2 {
			continue
		}
		var line plotter.XYs
		for j, t := range g.TimeS {
			line = append(line, plotter.XY{X: t / per, Y: sense * (g.RawMM[j] - g.RawMM[0]) * micro})
		}
		label := g.Gauge
		if g.Sees != "beam" && g.Sees != "" {
			label += ", " + g.Sees
		}
		addLine(p, line, lineStyle(drawn), named(label, drawn, len(b.r.Series.Gauges)))
		drawn++
	}
	return Figure{ID: "drift", Width: 170, Height: 52, Plot: p,
		Caption: "What should stand still: gauges on a fixed reference, and those at the supports, as read since the first reading; down is positive. A reference shows the drift of gauge and stand, a gauge at a support its settlement too.",
		Alt:     "Change of the indications of reference gauges and of gauges at the supports against time over the whole run."}, drawn > 0
}

// standsStill says whether a gauge sees a reference, a seat or the beam at a
// support, and the sign that turns its growing indication into a way down.
func (b *builder) standsStill(g analysis.GaugeSeries) (sense float64, still bool) {
	if b.rig == nil {
		return 0, false
	}
	sense = 1
	for _, r := range b.rig.Gauges {
		if r.Name == g.Gauge && r.Sense == "up" {
			sense = -1
		}
	}
	still = g.Sees == "reference" || g.Sees == "seat"
	for _, s := range b.rig.Supports {
		still = still || math.Abs(s.At.Value-g.AtMM) < 1e-6
	}
	return sense, still
}
