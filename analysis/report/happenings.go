package report

import (
	"fmt"
	"image/color"
	"time"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// happening is a disturbance as a plot against time shows it, in the units of
// the plot's axis: a band from one instant to another, a line where it took no
// time worth drawing, and its number in the table of disturbances.
type happening struct {
	from, to float64
	number   int
}

// happenings draws disturbances behind the lines of a plot, and their numbers
// above it; numbers too near to be read apart are drawn as one
// range.
type happenings []happening

var shadow = color.NRGBA{0x8a, 0x90, 0x98, 0x40}

// Plot draws them on c in p's coordinates.
func (hs happenings) Plot(c draw.Canvas, p *plot.Plot) {
	x, _ := p.Transforms(&c)
	line := draw.LineStyle{Color: color.NRGBA{0x8a, 0x90, 0x98, 0xff}, Width: vg.Points(0.6), Dashes: []vg.Length{vg.Points(1.5), vg.Points(1.5)}}
	style := text.Style{Color: ink, Font: font.Font{Typeface: face, Variant: "Sans", Size: 7}, XAlign: text.XCenter, YAlign: text.YBottom,
		Handler: p.Title.TextStyle.Handler}
	for _, h := range hs {
		from, to := x(h.from), x(h.to)
		if to-from > vg.Points(1) {
			c.FillPolygon(shadow, []vg.Point{{X: from, Y: c.Min.Y}, {X: to, Y: c.Min.Y}, {X: to, Y: c.Max.Y}, {X: from, Y: c.Max.Y}})
			continue
		}
		c.StrokeLine2(line, from, c.Min.Y, from, c.Max.Y)
	}
	for i := 0; i < len(hs); {
		j, end := i, x(hs[i].from)+vg.Points(14)
		for j+1 < len(hs) && x(hs[j+1].from) < end {
			j++
			end = x(hs[j].from) + vg.Points(14)
		}
		label := fmt.Sprint(hs[i].number)
		if j > i {
			label = fmt.Sprintf("%d–%d", hs[i].number, hs[j].number)
		}
		c.FillText(style, vg.Point{X: (x(hs[i].from) + x(hs[j].from)) / 2, Y: c.Max.Y + vg.Points(1)}, label)
		i = j + 1
	}
}

// GlyphBoxes keeps room for the numbers above the plot.
func (hs happenings) GlyphBoxes(p *plot.Plot) (out []plot.GlyphBox) {
	for _, h := range hs {
		out = append(out, plot.GlyphBox{X: p.X.Norm(h.from), Y: 1, Rectangle: vg.Rectangle{Max: vg.Point{Y: vg.Points(9)}}})
	}
	return out
}

// disturbed lists the run's disturbances for a plot whose axis counts per
// seconds from the first reading. They are in the order of their time, as in
// the table.
func (b *builder) disturbed(per float64) (out happenings) {
	first, err := time.Parse(time.RFC3339Nano, b.r.Run.First)
	if err != nil {
		return nil
	}
	since := func(stamp string) (float64, bool) {
		t, err := time.Parse(time.RFC3339Nano, stamp)
		return t.Sub(first).Seconds() / per, err == nil
	}
	for i, d := range b.r.Disturbances {
		from, ok := since(d.From)
		if !ok {
			continue
		}
		h := happening{from: from, to: from, number: i + 1}
		if d.To != nil {
			if to, ok := since(*d.To); ok && to > from {
				h.to = min(to, b.lastS()/per)
			}
		}
		out = append(out, h)
	}
	return out
}
