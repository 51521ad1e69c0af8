package report

import (
	"image"
	"image/color"
	"math"

	"codeberg.org/go-pdf/fpdf"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/vg"
)

// pdfCanvas draws a plot as vectors at a place on a PDF page. It keeps the
// transformations itself and hands finished page coordinates on, so that text
// stays text in the report's own fonts.
type pdfCanvas struct {
	f *fpdf.Fpdf
	// text makes a string printable with the fonts at hand.
	text  func(string) string
	state pdfState
	stack []pdfState
}

// pdfState is what Push saves. The matrix takes a point of the plot, in
// points from its bottom left, to mm on the page, from its top left:
// x' = m[0] x + m[2] y + m[4], y' = m[1] x + m[3] y + m[5].
type pdfState struct {
	m      [6]float64
	width  vg.Length
	dashes []vg.Length
	offset vg.Length
	color  color.Color
}

const mmPerPoint = 25.4 / 72

// newPDFCanvas places a plot of the given height, with its top left at x, y,
// all in mm.
func newPDFCanvas(f *fpdf.Fpdf, text func(string) string, x, y, height float64) *pdfCanvas {
	c := &pdfCanvas{f: f, text: text}
	c.state.m = [6]float64{mmPerPoint, 0, 0, -mmPerPoint, x, y + height}
	vg.Initialize(c)
	return c
}

func (c *pdfCanvas) SetLineWidth(w vg.Length) { c.state.width = w }

func (c *pdfCanvas) SetLineDash(pattern []vg.Length, offset vg.Length) {
	c.state.dashes, c.state.offset = pattern, offset
}

func (c *pdfCanvas) SetColor(v color.Color) {
	if v == nil {
		v = color.Black
	}
	c.state.color = v
}

// join puts a transformation before the ones in force.
func (c *pdfCanvas) join(a, b, d, e, tx, ty float64) {
	m := c.state.m
	c.state.m = [6]float64{
		m[0]*a + m[2]*b, m[1]*a + m[3]*b,
		m[0]*d + m[2]*e, m[1]*d + m[3]*e,
		m[0]*tx + m[2]*ty + m[4], m[1]*tx + m[3]*ty + m[5],
	}
}

func (c *pdfCanvas) Rotate(rad float64) {
	sin, cos := math.Sincos(rad)
	c.join(cos, sin, -sin, cos, 0, 0)
}

func (c *pdfCanvas) Translate(p vg.Point) { c.join(1, 0, 0, 1, float64(p.X), float64(p.Y)) }
func (c *pdfCanvas) Scale(x, y float64)   { c.join(x, 0, 0, y, 0, 0) }
func (c *pdfCanvas) Push()                { c.stack = append(c.stack, c.state) }
func (c *pdfCanvas) Pop()                 { c.state, c.stack = c.stack[len(c.stack)-1], c.stack[:len(c.stack)-1] }
func (c *pdfCanvas) at(p vg.Point) (x, y float64) {
	m, px, py := c.state.m, float64(p.X), float64(p.Y)
	return m[0]*px + m[2]*py + m[4], m[1]*px + m[3]*py + m[5]
}

// scale is mm on the page per point of the plot.
func (c *pdfCanvas) scale() float64 { return math.Hypot(c.state.m[0], c.state.m[1]) }

// pen sets colours and line as the state has them.
func (c *pdfCanvas) pen() {
	v := color.NRGBAModel.Convert(c.state.color).(color.NRGBA)
	r, g, b := int(v.R), int(v.G), int(v.B)
	c.f.SetDrawColor(r, g, b)
	c.f.SetFillColor(r, g, b)
	c.f.SetAlpha(float64(v.A)/0xff, "Normal")
	k := c.scale()
	c.f.SetLineWidth(float64(c.state.width) * k)
	var dashes []float64
	for _, d := range c.state.dashes {
		dashes = append(dashes, float64(d)*k)
	}
	c.f.SetDashPattern(dashes, float64(c.state.offset)*k)
}

func (c *pdfCanvas) Stroke(p vg.Path) {
	if c.state.width > 0 {
		c.draw(p, "D")
	}
}

func (c *pdfCanvas) Fill(p vg.Path) { c.draw(p, "F") }

func (c *pdfCanvas) draw(p vg.Path, style string) {
	if len(p) == 0 {
		return
	}
	c.pen()
	for _, s := range p {
		x, y := c.at(s.Pos)
		switch s.Type {
		case vg.MoveComp:
			c.f.MoveTo(x, y)
		case vg.LineComp:
			c.f.LineTo(x, y)
		case vg.CloseComp:
			c.f.ClosePath()
		case vg.ArcComp:
			c.arc(s)
		case vg.CurveComp:
			x1, y1 := c.at(s.Control[0])
			if len(s.Control) == 1 {
				c.f.CurveTo(x1, y1, x, y)
			} else {
				x2, y2 := c.at(s.Control[1])
				c.f.CurveBezierCubicTo(x1, y1, x2, y2, x, y)
			}
		}
	}
	c.f.DrawPath(style)
	c.f.SetAlpha(1, "Normal")
	c.f.SetDashPattern(nil, 0)
}

// arc draws a circle's part by cubic curves of at most a quarter turn each
// (control points at 4/3 tan(angle/4) of the radius, textbook).
func (c *pdfCanvas) arc(s vg.PathComp) {
	n := int(math.Ceil(math.Abs(s.Angle)/(math.Pi/2) - 1e-9))
	if n < 1 {
		n = 1
	}
	step := s.Angle / float64(n)
	k := 4.0 / 3 * math.Tan(step/4)
	on := func(a, dx, dy float64) (float64, float64) {
		sin, cos := math.Sincos(a)
		r := float64(s.Radius)
		return c.at(vg.Point{X: s.Pos.X + vg.Length(r*(cos+dx)), Y: s.Pos.Y + vg.Length(r*(sin+dy))})
	}
	x, y := on(s.Start, 0, 0)
	c.f.LineTo(x, y)
	for i := range n {
		a := s.Start + float64(i)*step
		sa, ca := math.Sincos(a)
		sb, cb := math.Sincos(a + step)
		x1, y1 := on(a, -k*sa, k*ca)
		x2, y2 := on(a+step, k*sb, -k*cb)
		x, y = on(a+step, 0, 0)
		c.f.CurveBezierCubicTo(x1, y1, x2, y2, x, y)
	}
}

func (c *pdfCanvas) FillString(face font.Face, p vg.Point, s string) {
	if face.Font.Size <= 0 || s == "" {
		return
	}
	v := color.NRGBAModel.Convert(c.state.color).(color.NRGBA)
	c.f.SetTextColor(int(v.R), int(v.G), int(v.B))
	x, y := c.at(p)
	c.f.SetFont(pdfFont, "", float64(face.Font.Size)*c.scale()/mmPerPoint)
	// The page's y grows downwards, fpdf's angles anticlockwise.
	angle := -math.Atan2(c.state.m[1], c.state.m[0]) * 180 / math.Pi
	if math.Abs(angle) > 1e-6 {
		c.f.TransformBegin()
		c.f.TransformRotate(angle, x, y)
		defer c.f.TransformEnd()
	}
	c.f.Text(x, y, c.text(s))
}

// DrawImage is not needed by any plot of the report.
func (c *pdfCanvas) DrawImage(vg.Rectangle, image.Image) {
	panic("report: a plot draws an image; the PDF canvas has none")
}
