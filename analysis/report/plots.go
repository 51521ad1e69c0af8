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

// loadSagFigure plots total load against sag, one line a gauge: the fitted
// beam as the line, the readings as points. Both are free of the older steps'
// creep, or a straight beam would seem bent.
func (b *builder) loadSagFigure() (Figure, bool) {
	mm, n := b.factor("mm"), b.factor("N")
	p := newPlot("sag, "+b.u.of("mm"), "total load, "+b.u.of("N"))
	loads := map[string]float64{}
	for _, st := range b.r.Steps {
		loads[st.Step] = total(st) * n
	}
	any := false
	for i, g := range b.spanGauges() {
		model, points := plotter.XYs{{}}, plotter.XYs{}
		for _, c := range b.r.Series.Curve {
			at := b.placeOf(g)
			for j, x := range c.PointAtMM {
				if x == at {
					points = append(points, plotter.XY{X: c.PointMM[j] * mm, Y: loads[c.Step]})
				}
			}
			if v, ok := interpolate(c.AtMM, c.SagMM, at); ok {
				model = append(model, plotter.XY{X: v * mm, Y: loads[c.Step]})
			}
		}
		if len(points) == 0 {
			continue
		}
		any = true
		addLine(p, model, lineStyle(i), "")
		addPoints(p, points, glyphStyle(i), named(g, i, len(b.spanGauges())))
	}
	return Figure{ID: "load-sag", Width: 170, Height: 85, Plot: p,
		Caption: fmt.Sprintf("Load against sag, %s after full load of each step, without the older steps' creep. Points: readings; lines: the fitted beam.", span(b.r.Stiffness.InitialAfterS)),
		Alt:     "Total load against the sag of each gauge at every step, with the fitted beam as lines."}, any
}

// placeOf is where a gauge stands along the beam.
func (b *builder) placeOf(gauge string) float64 {
	for _, g := range b.r.Series.Gauges {
		if g.Gauge == gauge {
			return g.AtMM
		}
	}
	return math.NaN()
}

// spanGauges are the gauges that see the beam, in order along it.
func (b *builder) spanGauges() []string {
	var out []string
	for _, g := range b.r.Series.Gauges {
		if g.Sees == "beam" || g.Sees == "" {
			out = append(out, g.Gauge)
		}
	}
	return out
}

func total(st analysis.Step) float64 {
	sum := 0.0
	for _, k := range sortedKeys(st.Loads) {
		sum += st.Loads[k]
	}
	return sum
}

// interpolate reads y at x on a line through points sorted by x.
func interpolate(xs, ys []float64, x float64) (float64, bool) {
	for i := 1; i < len(xs); i++ {
		if x >= xs[i-1] && x <= xs[i] && xs[i] > xs[i-1] {
			f := (x - xs[i-1]) / (xs[i] - xs[i-1])
			return ys[i-1] + f*(ys[i]-ys[i-1]), true
		}
	}
	return 0, false
}

// curveFigure plots the beam's shape in every loaded step.
func (b *builder) curveFigure() (Figure, bool) {
	mm := b.factor("mm")
	p := newPlot("along the beam, "+b.u.of("mm"), "sag, "+b.u.of("mm"))
	sagDown(p)
	for i, c := range b.r.Series.Curve {
		var line, points plotter.XYs
		for j := range c.AtMM {
			line = append(line, plotter.XY{X: c.AtMM[j] * mm, Y: c.SagMM[j] * mm})
		}
		for j := range c.PointAtMM {
			points = append(points, plotter.XY{X: c.PointAtMM[j] * mm, Y: c.PointMM[j] * mm})
		}
		addLine(p, line, lineStyle(i), named(c.Step, i, len(b.r.Series.Curve)))
		addPoints(p, points, glyphStyle(i), "")
	}
	b.addSupports(p, mm)
	b.addGreatest(p, mm)
	return Figure{ID: "curve", Width: 170, Height: 78, Plot: p,
		Caption: "The beam's shape, much exaggerated. Lines: the fitted beam; markers: gauges; triangles on the zero line: supports; crosses: where it sags most.",
		Alt:     "Sag along the beam for each load step with the gauges' readings on the fitted curves."}, len(b.r.Series.Curve) > 0
}

func (b *builder) addSupports(p *plot.Plot, mm float64) {
	if b.rig == nil {
		return
	}
	var at plotter.XYs
	for _, s := range b.rig.Supports {
		at = append(at, plotter.XY{X: s.At.Value * mm, Y: 0})
	}
	addPoints(p, at, draw.GlyphStyle{Color: ink, Radius: vg.Points(4), Shape: draw.PyramidGlyph{}}, "")
}

// addGreatest marks where the fitted curve sags most in each step.
func (b *builder) addGreatest(p *plot.Plot, mm float64) {
	var at plotter.XYs
	for _, st := range b.r.Steps {
		for _, c := range b.r.Series.Curve {
			if l := st.Largest; l != nil && c.Step == st.Step {
				if y, ok := interpolate(c.AtMM, c.SagMM, l.At.Value); ok {
					at = append(at, plotter.XY{X: l.At.Value * mm, Y: y * mm})
				}
			}
		}
	}
	addPoints(p, at, draw.GlyphStyle{Color: ink, Radius: vg.Points(4), Shape: draw.PlusGlyph{}}, "")
}

// historyFigure plots every gauge's sag over the whole run.
func (b *builder) historyFigure() (Figure, bool) {
	mm := b.factor("mm")
	unit, per := "d", 86400.0
	if last := b.lastS(); last < 2*86400 {
		unit, per = "h", 3600
	}
	p := newPlot("time from the first reading, "+unit, "sag, "+b.u.of("mm"))
	sagDown(p)
	caption := "Sag of every gauge over the whole run, net of support movement and of disturbances' offsets."
	if hs := b.disturbed(per); len(hs) > 0 {
		p.Add(hs)
		caption += " Grey lines and bands: the disturbances, by their numbers in the table of disturbances."
	}
	for i, g := range b.r.Series.Gauges {
		var line plotter.XYs
		for j := range g.TimeS {
			line = append(line, plotter.XY{X: g.TimeS[j] / per, Y: g.SagMM[j] * mm})
		}
		name := g.Gauge
		if g.Sees != "beam" && g.Sees != "" {
			name += ", " + g.Sees
		}
		addLine(p, line, lineStyle(i), named(name, i, len(b.r.Series.Gauges)))
	}
	return Figure{ID: "history", Width: 170, Height: 66, Plot: p,
		Caption: caption,
		Alt:     "Sag of all gauges against time over the whole run."}, len(b.r.Series.Gauges) > 0
}

func (b *builder) lastS() float64 {
	last := 0.0
	for _, g := range b.r.Series.Gauges {
		if n := len(g.TimeS); n > 0 {
			last = max(last, g.TimeS[n-1])
		}
	}
	return last
}

// creepFigure plots the creep gauge over logarithmic time with the law.
func (b *builder) creepFigure() (Figure, bool) {
	mm := b.factor("mm")
	points := b.creepPoints(mm)
	law := b.r.Series.Law
	if len(points) < 2 {
		return Figure{}, false
	}
	p := newPlot("time after full load (logarithmic)", "sag, "+b.u.of("mm"))
	p.X.Scale, p.X.Tick.Marker = plot.LogScale{}, timeTicks{}
	sagDown(p)
	var inside, beyond plotter.XYs
	var x, lo, hi []float64
	for _, l := range law {
		if l.AfterS <= 0 {
			continue
		}
		x, lo, hi = append(x, l.AfterS), append(lo, l.Lo95*mm), append(hi, l.Hi95*mm)
		pt := plotter.XY{X: l.AfterS, Y: l.SagMM * mm}
		if l.Beyond {
			beyond = append(beyond, pt)
		} else {
			inside = append(inside, pt)
		}
	}
	if len(inside) > 0 && len(beyond) > 0 {
		beyond = append(plotter.XYs{inside[len(inside)-1]}, beyond...)
	}
	addBand(p, x, lo, hi)
	addPoints(p, points, draw.GlyphStyle{Color: ink, Radius: vg.Points(1.1), Shape: draw.CircleGlyph{}}, "readings")
	addLine(p, inside, draw.LineStyle{Color: shades[1], Width: vg.Points(1.4)}, "law")
	addLine(p, beyond, draw.LineStyle{Color: shades[1], Width: vg.Points(1.4), Dashes: dashes[1]}, "beyond the data")
	return Figure{ID: "creep-log", Width: 170, Height: 82, Plot: p,
		Caption: "Creep against logarithmic time after full load. Shaded: 95 % band of the law; dashed: beyond the data.",
		Alt:     "Sag of the creep gauge against logarithmic time with the fitted law and its band."}, true
}

// creepPoints is the creep gauge's thinned sag, s after full load of the
// creep step, within that step.
func (b *builder) creepPoints(mm float64) plotter.XYs {
	s := b.r.Series
	var out plotter.XYs
	for _, g := range s.Gauges {
		if g.Gauge != b.r.Creep.Gauge {
			continue
		}
		for j, t := range g.TimeS {
			if after := t - s.CreepFullS; after > 0 && t <= s.CreepEndS {
				out = append(out, plotter.XY{X: after, Y: g.SagMM[j] * mm})
			}
		}
	}
	return out
}

// residualFigure plots readings less law over logarithmic time.
func (b *builder) residualFigure() (Figure, bool) {
	micro, unit := b.small()
	p := newPlot("time after full load (logarithmic)", "reading less law, "+unit)
	p.X.Scale, p.X.Tick.Marker = plot.LogScale{}, timeTicks{}
	var pts plotter.XYs
	for _, c := range b.r.Series.Creep {
		if c.AfterS > 0 {
			pts = append(pts, plotter.XY{X: c.AfterS, Y: c.ResidualMM * micro})
		}
	}
	if len(pts) < 2 {
		return Figure{}, false
	}
	addPoints(p, pts, residualDots, "")
	return Figure{ID: "residuals", Width: 170, Height: 52, Plot: p,
		Caption: "What the law leaves over, temperature and offsets taken out: scatter without a pattern says that the law fits; a bend or a wave is something it does not know.",
		Alt:     "Residuals of the creep law against logarithmic time."}, true
}

var residualDots = draw.GlyphStyle{Color: shades[0], Radius: vg.Points(1.2), Shape: draw.CircleGlyph{}}

// warmthFigure plots readings less law over the air's temperature.
func (b *builder) warmthFigure() (Figure, bool) {
	micro, unit := b.small()
	p := newPlot("air, "+b.temperatureUnit(), "reading less law, "+unit)
	var pts plotter.XYs
	for _, c := range b.r.Series.Creep {
		if t, ok := b.ambientAt(c.AfterS, func(p analysis.ProbeSeries) []float64 { return p.Celsius }); ok && c.AfterS > 0 {
			pts = append(pts, plotter.XY{X: b.temperature(t), Y: c.ResidualMM * micro})
		}
	}
	if len(pts) < 2 {
		return Figure{}, false
	}
	addPoints(p, pts, residualDots, "")
	return Figure{ID: "residuals-warmth", Width: 170, Height: 46, Plot: p,
		Caption: "The same over the temperature of the air: a slope here would be an answer to it that was not taken out.",
		Alt:     "Residuals of the creep law against the temperature of the air."}, true
}

// ambientFigure plots temperature and humidity over the run.
func (b *builder) ambientFigure() (Figure, bool) {
	p := newPlot("time from the first reading, d", "temperature, "+b.temperatureUnit()+" · humidity, %")
	any := false
	for i, a := range b.r.Series.Ambient {
		for k, v := range [][]float64{a.Celsius, a.HumidityPercent} {
			var line plotter.XYs
			for j := range v {
				y := v[j]
				if k == 0 {
					y = b.temperature(y)
				}
				line = append(line, plotter.XY{X: a.TimeS[j] / 86400, Y: y})
			}
			any = any || len(line) > 1
			addLine(p, line, lineStyle(2*i+k), a.Probe+[]string{" temperature", " humidity"}[k])
		}
	}
	return Figure{ID: "ambient", Width: 170, Height: 65, Plot: p,
		Caption: "Temperature and relative humidity by the rig's probes.",
		Alt:     "Temperature and humidity against time."}, any
}
