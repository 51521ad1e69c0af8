package report

import (
	"io"

	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/vgsvg"
)

// SpanPlot is the variable-span method drawn: inverse apparent moduli Y with
// standard uncertainties U over X = (h/L)^2, and the line Intercept + Slope X,
// all but X in Unit.
type SpanPlot struct {
	X, Y, U          []float64
	Intercept, Slope float64
	Unit             string
}

// Len, XY and YError are what gonum's plotters ask for.
func (s SpanPlot) Len() int { return len(s.X) }

// XY is point i.
func (s SpanPlot) XY(i int) (x, y float64) { return s.X[i], s.Y[i] }

// YError is how far the 95 % bar of point i reaches down and up.
func (s SpanPlot) YError(i int) (down, up float64) { return 1.96 * s.U[i], 1.96 * s.U[i] }

// DrawSpans writes the plot as SVG.
func DrawSpans(w io.Writer, s SpanPlot) error {
	p := newPlot("(h/L)²", "1/E apparent, "+s.Unit)
	last := 0.0
	for _, x := range s.X {
		last = max(last, x)
	}
	addLine(p, plotter.XYs{{X: 0, Y: s.Intercept}, {X: last, Y: s.Intercept + s.Slope*last}}, lineStyle(0), "1/E + (h/L)²/κG")
	points, err := plotter.NewScatter(s)
	if err != nil {
		return err
	}
	points.GlyphStyle = glyphStyle(1)
	bars, err := plotter.NewYErrorBars(s)
	if err != nil {
		return err
	}
	bars.LineStyle = draw.LineStyle{Color: ink, Width: vg.Points(0.8)}
	p.Add(bars, points)
	p.Legend.Add("spans, with 95 % bars", points)
	p.X.Min = 0
	defer roomy(p)()
	c := vgsvg.New(140*vg.Millimeter, 90*vg.Millimeter)
	p.Draw(draw.New(c))
	_, err = c.WriteTo(w)
	return err
}
