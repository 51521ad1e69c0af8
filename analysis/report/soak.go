package report

import (
	"fmt"
	"math"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"gaugelog/analysis"
)

// soakTable is how the gauges wandered at rest and how long to average.
func (b *builder) soakTable() (Table, bool) {
	micro, unit := b.small()
	t := Table{Caption: "At rest before the first load", Columns: []Column{
		{Name: "Gauge", Text: true}, {Name: "Readings"}, {Name: "Interval", Unit: "s"}, {Name: "Allan deviation of one", Unit: unit},
		{Name: "Least deviation", Unit: unit}, {Name: "Average over", Text: true}, {Name: "Drift", Text: true}}}
	for _, s := range b.r.Drift.Soak {
		if len(s.Deviation) == 0 {
			continue
		}
		least := math.Inf(1)
		for _, d := range s.Deviation {
			least = min(least, d.Deviation.Value)
		}
		average, drift := averaging(s.AverageS), "–"
		if s.AverageS == s.Deviation[len(s.Deviation)-1].AverageS {
			average += " or more" // a longer soak would tell
		}
		if s.Floored {
			average = "no gain: steps of the gauge"
		}
		if s.Rate != nil {
			drift = b.with(s.Rate)
		}
		t.Rows = append(t.Rows, []string{s.Gauge, grouped(fmt.Sprint(s.Readings)), significant(s.IntervalS, 3),
			significant(s.Deviation[0].Deviation.Value*micro, 2), significant(least*micro, 2), average, drift})
	}
	t.Says = "The overlapping Allan deviation (NIST SP 1065) tells how means of that length differ from the next: averaging longer than advised takes drift in. Readings that never change have the gauge's resolution over the square root of 12, not nothing."
	return t, len(t.Rows) > 0
}

// averaging is a time to average over, in seconds to ten minutes.
func averaging(s float64) string {
	if s < 600 {
		return significant(s, 3) + " s"
	}
	return span(s)
}

// soakFigure plots the Allan deviations against the averaging time, both
// logarithmic.
func (b *builder) soakFigure() (Figure, bool) {
	micro, unit := b.small()
	p := newPlot("averaging time (logarithmic)", "Allan deviation, "+unit+" (logarithmic)")
	p.X.Scale, p.X.Tick.Marker = plot.LogScale{}, timeTicks{}
	p.Y.Tick.Marker = powerTicks{}
	drawn := 0
	for i, s := range b.r.Drift.Soak {
		if xy := soakLine(s, micro); len(xy) >= 2 {
			addLine(p, xy, draw.LineStyle{Color: shades[i%len(shades)], Width: vg.Points(1.1), Dashes: dashes[i%len(dashes)]}, s.Gauge)
			drawn++
		}
	}
	if drawn == 0 {
		return Figure{}, false
	}
	return Figure{ID: "soak", Width: 170, Height: 58, Plot: p,
		Caption: "How means of the gauges' readings wander at rest before the first load. Falling lines: averaging helps; level: it does not; rising: drift.",
		Alt:     "Allan deviation of every gauge against averaging time, on logarithmic axes."}, true
}

func soakLine(s analysis.Soak, scale float64) (xy plotter.XYs) {
	for _, d := range s.Deviation {
		if v := d.Deviation.Value * scale; v > 0 {
			xy = append(xy, plotter.XY{X: d.AverageS, Y: math.Log10(v)})
		}
	}
	return xy
}
