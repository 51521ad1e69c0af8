package live

import (
	"fmt"
	"html/template"
	"math"
	"strconv"
	"strings"
	"time"

	"gaugelog/ingest/desk"
	"gaugelog/ingest/rollup"
)

// Measures of a plot, in its own units. It is drawn for a phone's width, so
// that its letters are readable there.
const (
	plotWidth, plotHeight = 380.0, 250.0
	plotLeft, plotRight   = 46.0, 58.0
	plotTop, plotBottom   = 14.0, 40.0
	mostPoints            = 260
	frameWidth            = plotWidth - plotLeft - plotRight
	frameHeight           = plotHeight - plotTop - plotBottom
	labelHeight           = 12.0
	leastSpan             = 0.01 // mm, so that a still gauge is not all noise
	leastDegrees          = 1.0
	mostCurves            = 8
)

// point is a place in a plot's own quantities.
type point struct{ x, y float64 }

// line is one curve.
type line struct {
	name   string
	points []point
}

// tick is a place on an axis with its label.
type tick struct {
	at    float64
	label string
}

// figure is one plot.
type figure struct {
	id, title, says, alt string
	xLabel, yLabel       string
	xTicks               []tick
	x0, x1               float64
	least                float64
	lines                []line
	marks                []tick // vertical lines
}

// plotsOf draws the page's plots as SVG, by our own hand: a few hundred points
// a curve and no more.
func plotsOf(d *desk.Desk, s *desk.Snapshot) template.HTML {
	if s.Curves == nil {
		return ""
	}
	var b strings.Builder
	for _, f := range []figure{sinceFigure(d, s), timeFigure(d, s), roomFigure(d, s)} {
		f.draw(&b)
	}
	return template.HTML(b.String()) // every text in it was escaped by draw
}

// beams are the curves of gauges that see the beam, at most eight.
func beams(d *desk.Desk, s *desk.Snapshot) []desk.Curve {
	var out []desk.Curve
	for i, g := range d.Rig().Gauges {
		if (g.Sees == "beam" || g.Sees == "") && len(out) < mostCurves {
			out = append(out, s.Curves.Series[i])
		}
	}
	return out
}

// sinceFigure is sag against the logarithm of the time since the load change.
func sinceFigure(d *desk.Desk, s *desk.Snapshot) figure {
	f := figure{id: "plot-log", title: "Sag against log time", xLabel: "time since the load change", yLabel: "sag, mm, uncorrected", least: leastSpan,
		says: "Straight here means that each tenfold time adds the same sag.",
		alt:  "Uncorrected sag of each gauge against the logarithm of the time since the last load change."}
	if s.Curves.Origin.IsZero() {
		f.says = "It begins with the first load change."
		return f
	}
	f.x0, f.x1 = 0, 2
	for _, c := range beams(d, s) {
		l := line{name: c.Name}
		for i := range c.Since {
			b := &c.Since[i]
			t := float64(b.Time()-s.Curves.Origin.UnixNano()) / 1e9
			if t < 1 {
				continue
			}
			l.points = append(l.points, point{math.Log10(t), (b.Mean() - c.Baseline) * c.Sign})
			f.x1 = max(f.x1, math.Log10(t))
		}
		f.lines = append(f.lines, l)
	}
	for _, k := range []struct {
		s     float64
		label string
	}{{1, "1 s"}, {10, "10 s"}, {60, "1 min"}, {600, "10 min"}, {3600, "1 h"}, {36000, "10 h"}, {86400 * 4, "4 d"}, {86400 * 40, "40 d"}, {86400 * 365.25, "1 a"}, {86400 * 3652.5, "10 a"}} {
		if x := math.Log10(k.s); x <= f.x1 {
			f.xTicks = append(f.xTicks, tick{x, k.label})
		}
	}
	return f
}

// timeFigure is sag against time over the whole run, with the marks.
func timeFigure(d *desk.Desk, s *desk.Snapshot) figure {
	f := figure{id: "plot-time", title: "Sag against time", xLabel: "date", yLabel: "sag, mm, uncorrected", least: leastSpan,
		says: "The upright lines are marks.", alt: "Uncorrected sag of each gauge over the whole run, with the marks entered."}
	f.lines, f.x0, f.x1 = overTime(beams(d, s))
	if f.x1 <= f.x0 {
		return f
	}
	f.xTicks, f.xLabel = timeTicks(d, f.x0, f.x1)
	for _, m := range s.Marks {
		if _, gone := s.Withdrawn[m.ID]; gone && m.ID != "" || m.Withdraw != "" || len(m.Loads) == 0 && m.Step == "" && m.Act == "" {
			continue
		}
		if x := float64(m.Time) / 1e9; x >= f.x0 && x <= f.x1 {
			label := m.Step
			if label == "" && len(m.Loads) > 0 {
				label = m.Loads[0].Shown
			}
			if m.Act != "" {
				label = m.Act
			}
			f.marks = append(f.marks, tick{x, label})
		}
	}
	return f
}

// roomFigure is the probes' temperatures against time.
func roomFigure(d *desk.Desk, s *desk.Snapshot) figure {
	f := figure{id: "plot-room", title: "Temperature against time", yLabel: "°C", least: leastDegrees, alt: "Temperature of each probe over the whole run."}
	var curves []desk.Curve
	for _, c := range s.Curves.Series {
		if c.Kind == desk.CelsiusCurve && len(c.Whole) > 0 && len(curves) < mostCurves {
			c.Name = strings.TrimSuffix(c.Name, " temperature")
			curves = append(curves, c)
		}
	}
	f.lines, f.x0, f.x1 = overTime(curves)
	if f.x1 > f.x0 {
		f.xTicks, f.xLabel = timeTicks(d, f.x0, f.x1)
	}
	return f
}

// overTime makes lines of whole curves, x in seconds since 1970.
func overTime(curves []desk.Curve) (lines []line, x0, x1 float64) {
	x0, x1 = math.Inf(1), math.Inf(-1)
	for _, c := range curves {
		l := line{name: c.Name}
		for _, b := range thin(c.Whole) {
			x := float64(b.Time()) / 1e9
			x0, x1 = min(x0, x), max(x1, x)
			l.points = append(l.points, point{x, (b.Mean() - c.Baseline) * c.Sign})
		}
		lines = append(lines, l)
	}
	return lines, x0, x1
}

// thin joins neighbouring bins until there are few enough.
func thin(bins []rollup.Bin) []rollup.Bin {
	for len(bins) > mostPoints {
		out := make([]rollup.Bin, 0, len(bins)/2+1)
		for i := 0; i < len(bins); i += 2 {
			b := bins[i]
			if i+1 < len(bins) {
				b = rollup.Join(b, bins[i+1])
			}
			out = append(out, b)
		}
		bins = out
	}
	return bins
}

// timeTicks puts ticks at round local times.
func timeTicks(d *desk.Desk, x0, x1 float64) ([]tick, string) {
	span := x1 - x0
	steps := []float64{1, 5, 15, 60, 300, 900, 3600, 3 * 3600, 6 * 3600, 86400, 2 * 86400, 3 * 86400, 5 * 86400, 7 * 86400, 14 * 86400, 30 * 86400, 91 * 86400, 182 * 86400, 365 * 86400}
	step := steps[len(steps)-1]
	for _, k := range steps {
		if span/k <= 4 {
			step = k
			break
		}
	}
	layout, label := "2 Jan", "date"
	switch {
	case step < 60:
		layout, label = "15:04:05", "time of day"
	case step < 86400:
		layout, label = "15:04", "time of day"
	case step >= 182*86400:
		layout, label = "Jan 2006", "date"
	}
	_, offset := d.Local(time.Unix(int64(x0), 0)).Zone()
	var out []tick
	for x := math.Ceil((x0+float64(offset))/step)*step - float64(offset); x <= x1; x += step {
		out = append(out, tick{x, d.Local(time.Unix(int64(x), 0)).Format(layout)})
	}
	return out, label
}

// draw writes the figure, or says that it is empty.
func (f *figure) draw(b *strings.Builder) {
	fmt.Fprintf(b, `<figure id="%s"><figcaption>%s</figcaption>`, f.id, esc(f.title))
	defer b.WriteString("</figure>")
	y0, y1, any := f.range_()
	if !any || f.x1 <= f.x0 {
		fmt.Fprintf(b, `<p class="quiet">Nothing to draw yet. %s</p>`, esc(f.says))
		return
	}
	x := func(v float64) float64 { return plotLeft + (v-f.x0)/(f.x1-f.x0)*frameWidth }
	y := func(v float64) float64 { return plotTop + (y1-v)/(y1-y0)*frameHeight }
	fmt.Fprintf(b, `<svg viewBox="0 0 %g %g" role="img" aria-label="%s">`, plotWidth, plotHeight, esc(f.alt))
	step, decimals := niceStep((y1 - y0) / 4)
	for v := math.Ceil(y0/step-1e-9) * step; v <= y1+1e-9*step; v += step {
		fmt.Fprintf(b, `<path class="grid" d="M%s %sH%s"/><text class="t" x="%s" y="%s" text-anchor="end">%s</text>`,
			num(plotLeft), num(y(v)), num(plotLeft+frameWidth), num(plotLeft-5), num(y(v)+4), number(v, decimals))
	}
	for _, t := range f.xTicks {
		fmt.Fprintf(b, `<path class="grid" d="M%s %sv%s"/><text class="t" x="%s" y="%s" text-anchor="middle">%s</text>`,
			num(x(t.at)), num(plotTop), num(frameHeight), num(x(t.at)), num(plotTop+frameHeight+14), esc(t.label))
	}
	f.drawMarks(b, x)
	ends := make([]tick, 0, len(f.lines))
	for i, l := range f.lines {
		if len(l.points) == 0 {
			continue
		}
		fmt.Fprintf(b, `<path class="curve c%d" d="`, i%mostCurves)
		for k, p := range l.points {
			b.WriteString(map[bool]string{true: "M", false: "L"}[k == 0])
			b.WriteString(num(x(p.x)) + " " + num(y(p.y)))
		}
		b.WriteString(`"/>`)
		ends = append(ends, tick{y(l.points[len(l.points)-1].y), l.name})
	}
	for i, at := range apart(ends) {
		fmt.Fprintf(b, `<text class="t name" x="%s" y="%s">%s</text>`, num(plotLeft+frameWidth+5), num(at+4), esc(short(ends[i].label)))
	}
	fmt.Fprintf(b, `<text class="t" x="%s" y="%s" text-anchor="middle">%s</text>`, num(plotLeft+frameWidth/2), num(plotHeight-6), esc(f.xLabel))
	fmt.Fprintf(b, `<text class="t" x="2" y="10">%s</text></svg><p class="quiet">%s</p>`, esc(f.yLabel), esc(f.says))
}

// drawMarks draws the marks, with labels as long as they do not collide.
func (f *figure) drawMarks(b *strings.Builder, x func(float64) float64) {
	free := math.Inf(-1)
	for _, m := range f.marks {
		at := x(m.at)
		fmt.Fprintf(b, `<path class="mark" d="M%s %sv%s"/>`, num(at), num(plotTop), num(frameHeight))
		label := short(m.label)
		if width := 6 * float64(len([]rune(label))); at > free && at+width < plotLeft+frameWidth {
			fmt.Fprintf(b, `<text class="t" x="%s" y="%s">%s</text>`, num(at+3), num(plotTop+frameHeight-4), esc(label))
			free = at + width + 8
		}
	}
}

// range_ is the figure's vertical range, a little wider than the curves.
func (f *figure) range_() (low, high float64, any bool) {
	low, high = math.Inf(1), math.Inf(-1)
	for _, l := range f.lines {
		for _, p := range l.points {
			low, high, any = min(low, p.y), max(high, p.y), true
		}
	}
	if !any {
		return 0, 1, false
	}
	pad := max((high-low)*0.05, (f.least-(high-low))/2)
	return low - pad, high + pad, true
}

// apart moves labels that would collide, keeping their order.
func apart(ends []tick) []float64 {
	out := make([]float64, len(ends))
	order := make([]int, len(ends))
	for i := range ends {
		out[i], order[i] = ends[i].at, i
	}
	for range ends { // a handful of labels: sort by insertion
		for i := 1; i < len(order); i++ {
			if out[order[i]] < out[order[i-1]] {
				order[i], order[i-1] = order[i-1], order[i]
			}
		}
	}
	for i := 1; i < len(order); i++ {
		out[order[i]] = max(out[order[i]], out[order[i-1]]+labelHeight)
	}
	if n := len(order); n > 0 {
		if over := out[order[n-1]] - (plotTop + frameHeight); over > 0 {
			for _, i := range order {
				out[i] -= over
			}
		}
	}
	return out
}

// niceStep is 1, 2 or 5 times a power of ten, at least v, with its decimals.
func niceStep(v float64) (step float64, decimals int) {
	p := math.Floor(math.Log10(v))
	for _, m := range []float64{1, 2, 5, 10} {
		if step = m * math.Pow(10, p); step >= v*0.999 {
			break
		}
	}
	return step, max(0, int(math.Ceil(-math.Log10(step)-1e-9)))
}

// number prints a label of an axis with the true minus sign.
func number(v float64, decimals int) string {
	s := strconv.FormatFloat(v, 'f', decimals, 64)
	if strings.Trim(s, "-0.") == "" {
		s = strings.TrimPrefix(s, "-")
	}
	return strings.Replace(s, "-", "−", 1)
}

// num prints a coordinate with a tenth of a unit.
func num(v float64) string {
	return strings.TrimSuffix(strconv.FormatFloat(v, 'f', 1, 64), ".0")
}

func esc(s string) string { return template.HTMLEscapeString(s) }

// short cuts a name to what fits beside a plot.
func short(s string) string {
	if r := []rune(s); len(r) > 9 {
		return string(r[:8]) + "…"
	}
	return s
}
