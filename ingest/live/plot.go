package live

import (
	"fmt"
	"html/template"
	"math"
	"strconv"
	"strings"

	"gaugelog/ingest/answer"
	"gaugelog/ingest/desk"
)

// Measures of a plot, in its own units. It is drawn for a phone's width, so
// that its letters are readable there.
const (
	plotWidth, plotHeight = 380.0, 254.0
	plotLeft, plotRight   = 46.0, 58.0
	plotTop, plotBottom   = 22.0, 40.0
	frameWidth            = plotWidth - plotLeft - plotRight
	frameHeight           = plotHeight - plotTop - plotBottom
	labelHeight           = 12.0
	curveStyles           = 8 // c0 to c7 of the style sheet
)

// plotsOf draws the page's plots as SVG, by our own hand: a few hundred points
// a curve and no more.
func plotsOf(d *desk.Desk, s *desk.Snapshot) template.HTML {
	var b strings.Builder
	for _, f := range answer.Figures(d, s) {
		draw(&b, &f)
	}
	return template.HTML(b.String()) // every text in it was escaped by draw
}

// draw writes the figure, or says that it is empty.
func draw(b *strings.Builder, f *answer.Figure) {
	fmt.Fprintf(b, `<figure id="%s"><figcaption>%s</figcaption>`, f.ID, esc(f.Title))
	defer b.WriteString("</figure>")
	y0, y1, any := f.Range()
	if !any {
		fmt.Fprintf(b, `<p class="quiet">Nothing to draw yet. %s</p>`, esc(f.Says))
		return
	}
	x := func(v float64) float64 { return plotLeft + (v-f.X0)/(f.X1-f.X0)*frameWidth }
	y := func(v float64) float64 { return plotTop + (y1-v)/(y1-y0)*frameHeight }
	fmt.Fprintf(b, `<svg viewBox="0 0 %g %g" role="img" aria-label="%s">`, plotWidth, plotHeight, esc(f.Alt))
	for _, t := range answer.YTicks(y0, y1, 4) {
		fmt.Fprintf(b, `<path class="grid" d="M%s %sH%s"/><text class="t" x="%s" y="%s" text-anchor="end">%s</text>`,
			num(plotLeft), num(y(t.At)), num(plotLeft+frameWidth), num(plotLeft-5), num(y(t.At)+4), t.Label)
	}
	for _, t := range f.XTicks {
		fmt.Fprintf(b, `<path class="grid" d="M%s %sv%s"/><text class="t" x="%s" y="%s" text-anchor="middle">%s</text>`,
			num(x(t.At)), num(plotTop), num(frameHeight), num(x(t.At)), num(plotTop+frameHeight+14), esc(t.Label))
	}
	drawMarks(b, f, x)
	ends := make([]answer.Tick, 0, len(f.Lines))
	for i, l := range f.Lines {
		if len(l.Points) == 0 {
			continue
		}
		fmt.Fprintf(b, `<path class="curve c%d" d="`, i%curveStyles)
		for k, p := range l.Points {
			b.WriteString(map[bool]string{true: "M", false: "L"}[k == 0])
			b.WriteString(num(x(p[0])) + " " + num(y(p[1])))
		}
		b.WriteString(`"/>`)
		ends = append(ends, answer.Tick{At: y(l.Points[len(l.Points)-1][1]), Label: l.Name})
	}
	for i, at := range apart(ends) {
		fmt.Fprintf(b, `<text class="t name" x="%s" y="%s">%s</text>`, num(plotLeft+frameWidth+5), num(at+4), esc(short(ends[i].Label)))
	}
	fmt.Fprintf(b, `<text class="t" x="%s" y="%s" text-anchor="middle">%s</text>`, num(plotLeft+frameWidth/2), num(plotHeight-6), esc(f.XLabel))
	fmt.Fprintf(b, `<text class="t" x="2" y="10">%s</text></svg><p class="quiet">%s</p>`, esc(f.YLabel), esc(f.Says))
}

// drawMarks draws the marks, with labels as long as they do not collide.
func drawMarks(b *strings.Builder, f *answer.Figure, x func(float64) float64) {
	free := math.Inf(-1)
	for _, m := range f.Marks {
		at := x(m.At)
		fmt.Fprintf(b, `<path class="mark" d="M%s %sv%s"/>`, num(at), num(plotTop), num(frameHeight))
		label := short(m.Label)
		if width := 6 * float64(len([]rune(label))); at > free && at+width < plotLeft+frameWidth {
			fmt.Fprintf(b, `<text class="t" x="%s" y="%s">%s</text>`, num(at+3), num(plotTop+frameHeight-4), esc(label))
			free = at + width + 8
		}
	}
}

// apart moves labels that would collide, keeping their order.
func apart(ends []answer.Tick) []float64 {
	out := make([]float64, len(ends))
	order := make([]int, len(ends))
	for i := range ends {
		out[i], order[i] = ends[i].At, i
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
