package report

import (
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"gaugelog/analysis"
)

// secondsPerDay turns slopes per second into slopes per day.
const secondsPerDay = 86400

// lawSlope is the law's slope between two drawn points, mm/d, at their
// geometric mean.
func lawSlope(a, b analysis.LawPoint) (after, mmPerDay float64) {
	return math.Sqrt(a.AfterS * b.AfterS), (b.SagMM - a.SagMM) / (b.AfterS - a.AfterS) * secondsPerDay
}

// rateAt is the law's slope at a time within the data, "–" elsewhere: between
// the slopes of the drawn law a power of time is taken, which most laws nearly
// follow over so short a way.
func (b *builder) rateAt(after float64) string {
	var x, y []float64
	end := 0.0
	for i := 1; i < len(b.r.Series.Law); i++ {
		p, q := b.r.Series.Law[i-1], b.r.Series.Law[i]
		if p.AfterS <= 0 || q.AfterS <= p.AfterS || q.Beyond {
			continue
		}
		if at, r := lawSlope(p, q); r > 0 {
			x, y, end = append(x, math.Log(at)), append(y, math.Log(r)), q.AfterS
		}
	}
	if len(x) < 2 || after > end*1.001 {
		return "–"
	}
	at := math.Log(after)
	k := 1
	for k < len(x)-1 && x[k] < at {
		k++
	}
	if at < x[0]-(x[1]-x[0]) {
		return "–"
	}
	v := y[k-1] + (at-x[k-1])*(y[k]-y[k-1])/(x[k]-x[k-1])
	return significant(math.Exp(v)*b.factor("mm/d"), 3)
}

// ambientAt reads a probe's quantity at a time after full load of the creep
// step, from the first probe that has it.
func (b *builder) ambientAt(after float64, of func(analysis.ProbeSeries) []float64) (float64, bool) {
	for _, p := range b.r.Series.Ambient {
		if v := of(p); len(v) == len(p.TimeS) && len(v) > 1 {
			return interpolate(p.TimeS, v, b.r.Series.CreepFullS+after)
		}
	}
	return 0, false
}

func (b *builder) celsiusAt(after float64) string {
	v, ok := b.ambientAt(after, func(p analysis.ProbeSeries) []float64 { return p.Celsius })
	if !ok {
		return "–"
	}
	return fixed(b.temperature(v), 1)
}

func (b *builder) humidityAt(after float64) string {
	v, ok := b.ambientAt(after, func(p analysis.ProbeSeries) []float64 { return p.HumidityPercent })
	if !ok {
		return "–"
	}
	return fixed(v, 0)
}

// rateFigure plots the rate against time, both logarithmic: slopes of the
// readings over a third of a decade each, and the law's slope.
func (b *builder) rateFigure() (Figure, bool) {
	k := b.factor("mm/d")
	var law, points plotter.XYs
	for i := 1; i < len(b.r.Series.Law); i++ {
		p, q := b.r.Series.Law[i-1], b.r.Series.Law[i]
		if p.AfterS > 0 && q.AfterS > p.AfterS && !q.Beyond {
			if at, r := lawSlope(p, q); r > 0 {
				law = append(law, plotter.XY{X: at, Y: math.Log10(r * k)})
			}
		}
	}
	falling := 0
	for _, w := range slopes(b.r.Series.Creep) {
		if w.Y > 0 {
			points = append(points, plotter.XY{X: w.X, Y: math.Log10(w.Y * k)})
		} else {
			falling++
		}
	}
	if len(points) < 2 {
		return Figure{}, false
	}
	p := newPlot("time after full load (logarithmic)", "rate, "+b.u.of("mm/d")+" (logarithmic)")
	p.X.Scale, p.X.Tick.Marker = plot.LogScale{}, timeTicks{}
	// The logarithm is taken here: plot makes room for the label of a
	// logarithmic axis as if it stood elsewhere.
	p.Y.Tick.Marker = powerTicks{}
	addLine(p, law, draw.LineStyle{Color: shades[1], Width: vg.Points(1.4)}, "law")
	addPoints(p, points, draw.GlyphStyle{Color: ink, Radius: vg.Points(2), Shape: draw.CircleGlyph{}}, "readings")
	caption := "How fast it creeps, on two logarithmic axes: a straight falling line is a power law slowing down; a line that turns up is the warning of failure."
	if falling > 0 {
		caption += fmt.Sprintf(" %d of the slopes are not positive and cannot be drawn.", falling)
	}
	return Figure{ID: "rate", Width: 170, Height: 58, Plot: p, Caption: caption,
		Alt: "Rate of creep against time on logarithmic axes, from the readings and from the law."}, true
}

// slopes are least-squares slopes, mm/d, over a third of a decade of time each
// with at least four points.
func slopes(points []analysis.CreepPoint) plotter.XYs {
	var out plotter.XYs
	const width = 1.0 / 3
	for from := 0; from < len(points); {
		bin := math.Floor(math.Log10(points[from].AfterS) / width)
		to := from
		var x, y []float64
		for to < len(points) && math.Floor(math.Log10(points[to].AfterS)/width) == bin {
			x, y = append(x, points[to].AfterS), append(y, points[to].CompensatedMM)
			to++
		}
		if len(x) >= 4 {
			out = append(out, plotter.XY{X: math.Sqrt(x[0] * x[len(x)-1]), Y: slope(x, y) * secondsPerDay})
		}
		from = to
	}
	return out
}

func slope(x, y []float64) float64 {
	var mx, my, sxy, sxx float64
	for i := range x {
		mx, my = mx+x[i]/float64(len(x)), my+y[i]/float64(len(x))
	}
	for i := range x {
		sxy, sxx = sxy+(x[i]-mx)*(y[i]-my), sxx+(x[i]-mx)*(x[i]-mx)
	}
	return sxy / sxx
}

// powerTicks marks an axis of decimal logarithms with the powers of ten, and 2
// and 5 between them where they are few.
type powerTicks struct{}

// Ticks returns the marks between lo and hi, both decimal logarithms.
func (powerTicks) Ticks(lo, hi float64) []plot.Tick {
	var out []plot.Tick
	for e := math.Floor(lo); e <= math.Ceil(hi); e++ {
		for _, m := range []float64{1, 2, 5} {
			if v := e + math.Log10(m); v >= lo && v <= hi && (m == 1 || hi-lo < 2.5) {
				out = append(out, plot.Tick{Value: v, Label: significant(m*math.Pow(10, e), 1)})
			}
		}
	}
	return out
}

// complianceFigure plots sag per load: as measured in the creep step, and as
// the law has it for one load placed alone.
func (b *builder) complianceFigure() (Figure, bool) {
	load := 0.0
	for _, st := range b.r.Steps {
		if st.Step == b.r.Creep.Step {
			load = total(st)
		}
	}
	k := b.factor("mm/N") * 1000
	var points, law plotter.XYs
	for _, c := range b.r.Series.Creep {
		if c.AfterS > 0 && load > 0 {
			points = append(points, plotter.XY{X: c.AfterS, Y: c.CompensatedMM / load * k})
		}
	}
	for _, l := range b.r.Series.Law {
		if j, ok := compliance(b.r.Creep, l.AfterS/3600); ok && l.AfterS > 0 && !l.Beyond {
			law = append(law, plotter.XY{X: l.AfterS, Y: j * k})
		}
	}
	if len(points) < 2 || len(law) < 2 {
		return Figure{}, false
	}
	unit := "mm/kN"
	if b.u.of("mm") == "in" {
		unit = "in/kip"
	}
	p := newPlot("time after full load (logarithmic)", "compliance, "+unit)
	p.X.Scale, p.X.Tick.Marker = plot.LogScale{}, timeTicks{}
	addPoints(p, points, draw.GlyphStyle{Color: ink, Radius: vg.Points(1.1), Shape: draw.CircleGlyph{}}, "as loaded")
	addLine(p, law, draw.LineStyle{Color: shades[1], Width: vg.Points(1.4), Dashes: dashes[1]}, "single load")
	return Figure{ID: "compliance", Width: 170, Height: 60, Plot: p,
		Caption: "Sag per total load. Points: the creep step as it was loaded, with the earlier steps' creep in it; dashed: one load placed alone, by the law. They meet once the steps before have faded.",
		Alt:     "Compliance against logarithmic time, as measured and for a single load by the law."}, true
}

// compliance is the law's sag per newton t hours after a load placed alone.
func compliance(c analysis.Creep, t float64) (float64, bool) {
	v := func(name string) float64 { return c.Parameters[name].Value }
	switch c.Model {
	case "power":
		return v("d0") + v("d1")*math.Pow(t, v("n")), true
	case "log":
		return v("d0") + v("d1")*math.Log1p(t/v("tau")), true
	case "standard-solid", "burgers":
		j := v("d0") - v("d1")*math.Expm1(-t/v("tau"))
		if c.Model == "burgers" {
			j += v("flow") * t
		}
		return j, true
	case "kelvin-chain":
		j := v("d0")
		for i := 1; ; i++ {
			d, ok := c.Parameters[fmt.Sprintf("d%d", i)]
			if !ok {
				return j, i > 1
			}
			j -= d.Value * math.Expm1(-t/v(fmt.Sprintf("tau%d", i)))
		}
	}
	return 0, false
}

// overlayFigure shows the creep gauge's reading less the law before and after
// compensation, over the temperature.
func (b *builder) overlayFigure() (Figure, bool) {
	micro, unit := b.small()
	var raw, clean, warm plotter.XYs
	per, name := secondsPerDay*1.0, "d"
	if b.r.Series.CreepEndS-b.r.Series.CreepFullS < 2*secondsPerDay {
		per, name = 3600, "h"
	}
	var lx, ly []float64
	for _, l := range b.r.Series.Law {
		if l.AfterS > 0 && !l.Beyond {
			lx, ly = append(lx, math.Log(l.AfterS)), append(ly, l.SagMM)
		}
	}
	const settled = 600 // s: before, the ramp would dwarf the rest
	for _, q := range b.creepPoints(1) {
		if v, ok := interpolate(lx, ly, math.Log(q.X)); ok && q.X > settled {
			raw = append(raw, plotter.XY{X: q.X / per, Y: (q.Y - v) * micro})
		}
	}
	for _, c := range b.r.Series.Creep {
		if c.AfterS > settled {
			clean = append(clean, plotter.XY{X: c.AfterS / per, Y: c.ResidualMM * micro})
		}
	}
	for _, a := range b.r.Series.Ambient {
		if len(a.Celsius) < 2 || len(warm) > 0 {
			continue
		}
		for j, t := range a.TimeS {
			if after := t - b.r.Series.CreepFullS; after >= 0 && t <= b.r.Series.CreepEndS {
				warm = append(warm, plotter.XY{X: after / per, Y: b.temperature(a.Celsius[j])})
			}
		}
	}
	if len(clean) < 2 || len(warm) < 2 || len(raw) < 2 {
		return Figure{}, false
	}
	end := slices.MaxFunc(warm, func(a, b plotter.XY) int { return int(math.Copysign(1, a.X-b.X)) }).X
	p := newPlot("", "less the law, "+unit)
	addLine(p, raw, draw.LineStyle{Color: shades[1], Width: vg.Points(0.6)}, "as read")
	addPoints(p, clean, draw.GlyphStyle{Color: shades[0], Radius: vg.Points(1.1), Shape: draw.CircleGlyph{}}, "compensated")
	q := newPlot("time after full load, "+name, "air, "+b.temperatureUnit())
	addLine(q, warm, draw.LineStyle{Color: ink, Width: vg.Points(1)}, "temperature")
	for _, a := range []*plot.Plot{p, q} {
		a.X.Min, a.X.Max = 0, end
	}
	return Figure{ID: "overlay", Width: 170, Height: 88, Plot: p, Below: q,
		Caption: "What the temperature does to the creep gauge. Above: its sag less the law, as read (thin line) and with the fitted temperature term taken out (points); below: the temperature over the same time.",
		Alt:     "Sag of the creep gauge less the law, as read and compensated, above the temperature over the same time."}, true
}
