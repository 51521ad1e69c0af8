package report

import (
	"fmt"
	"image/color"
	"math"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// The plots must read in grey, so each series has its own dashes and marker
// beside its shade; shades differ in lightness, not only in hue.
var (
	ink    = color.NRGBA{0x1a, 0x1f, 0x26, 0xff}
	faint  = color.NRGBA{0xd9, 0xdd, 0xe2, 0xff}
	band   = color.NRGBA{0x6b, 0x8f, 0xb5, 0x55}
	shades = []color.NRGBA{
		{0x12, 0x3f, 0x6b, 0xff}, {0xa3, 0x4a, 0x12, 0xff}, {0x2f, 0x6e, 0x4f, 0xff}, {0x6f, 0x4a, 0x86, 0xff},
		{0x55, 0x5b, 0x63, 0xff}, {0x8a, 0x6d, 0x00, 0xff}, {0x1f, 0x7f, 0x8c, 0xff}, {0x8c, 0x2f, 0x4f, 0xff},
	}
	dashes = [][]vg.Length{nil, points(6, 2), points(2, 2), points(8, 2, 2, 2), points(12, 4), points(1, 3), points(6, 2, 1, 2, 1, 2), points(3, 5)}
	marks  = []draw.GlyphDrawer{draw.CircleGlyph{}, draw.BoxGlyph{}, draw.TriangleGlyph{}, draw.RingGlyph{}, draw.SquareGlyph{}, draw.PyramidGlyph{}, draw.CrossGlyph{}, draw.PlusGlyph{}}
)

// points are lengths of dashes and gaps in points.
func points(lengths ...float64) (out []vg.Length) {
	for _, l := range lengths {
		out = append(out, vg.Points(l))
	}
	return out
}

const face = font.Typeface("Liberation")

// newPlot makes an empty plot in the report's style.
func newPlot(x, y string) *plot.Plot {
	p := plot.New()
	sans := func(size vg.Length) font.Font { return font.Font{Typeface: face, Variant: "Sans", Size: size} }
	p.Title.TextStyle.Font = sans(9)
	for _, a := range []*plot.Axis{&p.X, &p.Y} {
		a.Label.TextStyle.Font = sans(9)
		a.Tick.Label.Font = sans(8)
		a.LineStyle.Color, a.Tick.LineStyle.Color = ink, ink
		a.LineStyle.Width, a.Tick.LineStyle.Width = vg.Points(0.6), vg.Points(0.6)
		a.Label.TextStyle.Color, a.Tick.Label.Color = ink, ink
		a.Padding = vg.Points(3)
	}
	p.X.Label.Text, p.Y.Label.Text = x, y
	p.X.Tick.Marker, p.Y.Tick.Marker = niceTicks{}, niceTicks{}
	p.Legend.TextStyle.Font = sans(8)
	p.Legend.TextStyle.Color = ink
	p.Legend.ThumbnailWidth = vg.Points(20)
	p.Legend.Padding = vg.Points(3)
	p.Legend.Top, p.Legend.Left = true, true
	grid := plotter.NewGrid()
	grid.Horizontal.Color, grid.Vertical.Color = faint, faint
	grid.Horizontal.Width, grid.Vertical.Width = vg.Points(0.4), vg.Points(0.4)
	p.Add(grid)
	return p
}

// niceTicks marks about six round values: 1, 2 or 5 times a power of ten.
type niceTicks struct{}

// Ticks returns the marks between lo and hi.
func (niceTicks) Ticks(lo, hi float64) []plot.Tick {
	if !(hi > lo) {
		return []plot.Tick{{Value: lo, Label: fmt.Sprintf("%.4g", lo)}}
	}
	raw := (hi - lo) / 6
	power := math.Pow(10, math.Floor(math.Log10(raw)))
	step := 10 * power
	for _, m := range []float64{1, 2, 5} {
		if m*power >= raw {
			step = m * power
			break
		}
	}
	decimals := max(0, -int(math.Floor(math.Log10(step)+1e-9)))
	var out []plot.Tick
	for k := math.Ceil(lo/step - 1e-9); k*step <= hi+1e-9*step; k++ {
		out = append(out, plot.Tick{Value: k * step, Label: fixed(k*step, decimals)})
	}
	return out
}

// roomy widens the ranges a little, so that no marker is cut by the frame; the
// function it returns puts them back, so that a plot may be drawn again.
func roomy(p *plot.Plot) func() {
	x, y := [2]float64{p.X.Min, p.X.Max}, [2]float64{p.Y.Min, p.Y.Max}
	for _, a := range []*plot.Axis{&p.X, &p.Y} {
		if _, logarithmic := a.Scale.(plot.LogScale); logarithmic {
			f := math.Pow(a.Max/a.Min, 0.03)
			a.Min, a.Max = a.Min/f, a.Max*f
			continue
		}
		d := 0.03 * (a.Max - a.Min)
		a.Min, a.Max = a.Min-d, a.Max+d
	}
	return func() { p.X.Min, p.X.Max, p.Y.Min, p.Y.Max = x[0], x[1], y[0], y[1] }
}

// sagDown turns the axis so that sag grows downwards, as the beam goes.
func sagDown(p *plot.Plot) { p.Y.Scale = plot.InvertedScale{Normalizer: plot.LinearScale{}} }

func lineStyle(i int) draw.LineStyle {
	return draw.LineStyle{Color: shades[i%len(shades)], Width: vg.Points(1.1), Dashes: dashes[i%len(dashes)]}
}

func glyphStyle(i int) draw.GlyphStyle {
	return draw.GlyphStyle{Color: shades[i%len(shades)], Radius: vg.Points(2.2), Shape: marks[i%len(marks)]}
}

// addLine adds a line with its name in the legend; an empty name stays out.
func addLine(p *plot.Plot, xy plotter.XYs, st draw.LineStyle, name string) {
	xy = finite(xy)
	if len(xy) < 2 {
		return
	}
	l := &plotter.Line{XYs: xy, LineStyle: st}
	p.Add(l)
	if name != "" {
		p.Legend.Add(shortName(name), l)
	}
}

// shortName cuts a name to what the room beside a plot holds.
func shortName(name string) string {
	const most = 17
	if r := []rune(name); len(r) > most {
		return string(r[:most-1]) + "…"
	}
	return name
}

// mostNames is how many names a legend has room for.
const mostNames = 14

// named is the legend's name of the i-th of n series: where there are too many
// the last one named says how many more there are.
func named(name string, i, n int) string {
	switch {
	case n <= mostNames || i < mostNames-1:
		return name
	case i == mostNames-1:
		return fmt.Sprintf("and %d more", n-i)
	}
	return ""
}

// addPoints adds markers with their name in the legend.
func addPoints(p *plot.Plot, xy plotter.XYs, st draw.GlyphStyle, name string) {
	xy = finite(xy)
	if len(xy) == 0 {
		return
	}
	s := &plotter.Scatter{XYs: xy, GlyphStyle: st}
	p.Add(s)
	if name != "" {
		p.Legend.Add(shortName(name), s)
	}
}

// addBand shades between two lines over the same places.
func addBand(p *plot.Plot, x, lo, hi []float64) {
	if len(x) < 2 {
		return
	}
	var ring plotter.XYs
	for i := range x {
		ring = append(ring, plotter.XY{X: x[i], Y: lo[i]})
	}
	for i := len(x) - 1; i >= 0; i-- {
		ring = append(ring, plotter.XY{X: x[i], Y: hi[i]})
	}
	poly, err := plotter.NewPolygon(ring)
	if err != nil {
		return // not finite: the line alone is drawn
	}
	poly.Color, poly.LineStyle.Width = band, 0
	p.Add(poly)
}

// finite drops what cannot be drawn.
func finite(xy plotter.XYs) plotter.XYs {
	out := xy[:0:0]
	for _, p := range xy {
		if !math.IsNaN(p.X) && !math.IsInf(p.X, 0) && !math.IsNaN(p.Y) && !math.IsInf(p.Y, 0) {
			out = append(out, p)
		}
	}
	return out
}

// timeTicks marks a logarithmic axis of seconds with the times people use.
type timeTicks struct{}

func (timeTicks) Ticks(lo, hi float64) []plot.Tick {
	var out []plot.Tick
	for _, s := range []float64{1, 10, 60, 600, 3600, 6 * 3600, 86400, 7 * 86400, 30 * 86400, 365.25 * 86400, 3652.5 * 86400, 18262.5 * 86400} {
		if s >= lo*0.999 && s <= hi*1.001 {
			out = append(out, plot.Tick{Value: s, Label: span(s)})
		}
	}
	return out
}
