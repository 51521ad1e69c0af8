package report

import (
	"bytes"
	_ "embed"
	"encoding/base64"
	"fmt"
	"html/template"
	"io"
	"regexp"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/vgsvg"
)

//go:embed page.html
var page string

//go:embed page.css
var style string

var pageTemplate = template.Must(template.New("report").Funcs(template.FuncMap{
	"kind":  kindOf,
	"glue":  glue,
	"svg":   svgOf,
	"src":   dataURI,
	"label": columnLabel,
	"add":   func(a, b int) int { return a + b },
}).Parse(page))

// HTML writes the document as one self-contained page: style and plots
// inline, no script, nothing fetched.
func HTML(w io.Writer, d *Document) error {
	var buf bytes.Buffer
	err := pageTemplate.Execute(&buf, struct {
		*Document
		Style template.CSS
	}{d, template.CSS(style)})
	if err != nil {
		return fmt.Errorf("report page: %w", err)
	}
	_, err = w.Write(buf.Bytes())
	return err
}

// kindOf names a block for the template.
func kindOf(b Block) string {
	switch b.(type) {
	case Paragraph:
		return "paragraph"
	case List:
		return "list"
	case Table:
		return "table"
	case Figure:
		return "figure"
	case Picture:
		return "picture"
	}
	panic(fmt.Sprintf("report: unknown block %T", b))
}

var valueAndUnit = regexp.MustCompile(`(\d) (%|°|(?:mm|µm|s|min|h|d|a|N|kg|MPa|in|psi|lbf|lb|mil)\b)`)

// glue keeps a value and its unit on one line.
func glue(s string) string { return valueAndUnit.ReplaceAllString(s, "$1\u00a0$2") }

func columnLabel(c Column) string {
	if c.Unit == "" {
		return c.Name
	}
	return c.Name + ", " + c.Unit
}

// legendWidth is kept free beside a plot that has a legend, so that the legend
// never lies on the data.
const legendWidth = 34 * vg.Millimeter

// drawFigure draws a figure's plots with their legends on the right, the
// second under the first with the frames' sides in line.
func drawFigure(f Figure, c draw.Canvas) {
	if f.Below == nil {
		drawPlot(f.Plot, c)
		return
	}
	h := c.Max.Y - c.Min.Y
	upper, lower := draw.Crop(c, 0, 0, h*0.45, 0), draw.Crop(c, 0, 0, 0, -h*0.57)
	defer roomy(f.Plot)()
	defer roomy(f.Below)()
	side := draw.Crop(upper, 0, -legendWidth, 0, 0)
	side2 := draw.Crop(lower, 0, -legendWidth, 0, 0)
	left := max(f.Plot.DataCanvas(side).Min.X, f.Below.DataCanvas(side2).Min.X)
	drawAligned(f.Plot, upper, left)
	drawAligned(f.Below, lower, left)
}

// drawAligned draws a plot whose frame begins at left.
func drawAligned(p *plot.Plot, c draw.Canvas, left vg.Length) {
	legend := p.Legend
	defer func() { p.Legend = legend }()
	p.Legend = plot.NewLegend()
	part := draw.Crop(c, 0, -legendWidth, 0, 0)
	part = draw.Crop(part, left-p.DataCanvas(part).Min.X, 0, 0, 0)
	p.Draw(part)
	legend.Draw(draw.Crop(c, c.Max.X-c.Min.X-legendWidth+vg.Points(6), 0, 0, -vg.Points(4)))
}

// drawPlot draws a plot with its legend on the right.
func drawPlot(p *plot.Plot, c draw.Canvas) {
	legend := p.Legend
	defer func() { p.Legend = legend }()
	defer roomy(p)()
	box := legend.Rectangle(c)
	if box.Max.X-box.Min.X <= 0 {
		p.Draw(c)
		return
	}
	p.Legend = plot.NewLegend()
	p.Draw(draw.Crop(c, 0, -legendWidth, 0, 0))
	legend.Draw(draw.Crop(c, c.Max.X-c.Min.X-legendWidth+vg.Points(6), 0, 0, -vg.Points(4)))
}

var (
	svgHead = regexp.MustCompile(`(?s)^.*?<svg [^>]*viewBox="([^"]*)"[^>]*>`)
	svgFont = regexp.MustCompile(`font-family:[^;"]*`)
)

// svgOf draws a figure as inline SVG that scales to the page and uses a stack
// of metric-compatible fonts in place of an embedded one.
func svgOf(f Figure) (template.HTML, error) {
	w, h := vg.Length(f.Width)*vg.Millimeter, vg.Length(f.Height)*vg.Millimeter
	c := vgsvg.New(w, h)
	drawFigure(f, draw.New(c))
	var buf bytes.Buffer
	if _, err := c.WriteTo(&buf); err != nil {
		return "", fmt.Errorf("plot %s: %w", f.ID, err)
	}
	head := svgHead.FindSubmatch(buf.Bytes())
	if head == nil {
		return "", fmt.Errorf("plot %s: no viewBox in its SVG", f.ID)
	}
	body := buf.Bytes()[len(head[0]):]
	body = svgFont.ReplaceAll(body, []byte(`font-family:Liberation Sans,Arimo,Helvetica,Arial,sans-serif`))
	open := fmt.Sprintf(`<svg xmlns="http://www.w3.org/2000/svg" role="img" aria-label="%s" viewBox="%s">`,
		template.HTMLEscapeString(f.Alt), head[1])
	return template.HTML(open + string(body)), nil
}

// dataURI is a photograph as the page holds it.
func dataURI(p Picture) template.URL {
	return template.URL("data:" + p.Type + ";base64," + base64.StdEncoding.EncodeToString(p.Data))
}
