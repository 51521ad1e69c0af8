package terminal

import (
	"math"
	"strings"

	"charm.land/lipgloss/v2"

	"gaugelog/ingest/answer"
)

// Measures of a plot, in cells.
const (
	leastPlotWidth  = 24
	leastPlotHeight = 6
	yTickRows       = 4 // about a label every so many rows
)

// quadrants are the blocks by which of a cell's quarters are filled: bit 0 upper
// left, 1 upper right, 2 lower left, 3 lower right.
var quadrants = []rune(" ▘▝▀▖▌▞▛▗▚▐▜▄▙▟█")

// plotOf draws one line of a figure in blocks, with its axes.
func plotOf(f *answer.Figure, name string, width, height int) []row {
	title := f.Title
	if name != "" {
		title += ": " + name
	}
	out := paragraph(width, 0, nil, title, strong)
	one := *f
	one.Lines = nil
	for _, l := range f.Lines {
		if l.Name == name {
			one.Lines = []answer.Line{l}
		}
	}
	low, high, any := one.Range()
	if !any {
		return append(out, paragraph(width, 0, nil, "Nothing to draw yet. "+f.Says, quiet)...)
	}
	rows := height - len(out) - 3 // the axis, its labels, its name
	if width < leastPlotWidth || rows < leastPlotHeight-2 {
		return append(out, paragraph(width, 0, nil, "The terminal is too small for the plot.", quiet)...)
	}
	ticks := answer.YTicks(low, high, max(2, rows/yTickRows))
	margin := 0
	for _, t := range ticks {
		margin = max(margin, lipgloss.Width(t.Label))
	}
	columns := width - margin - 2
	c := newCanvas(columns, rows, one.X0, one.X1, low, high)
	c.curve(one.Lines[0].Points)
	labels := make([]string, rows)
	for _, t := range ticks {
		if k := c.rowOf(t.At); k >= 0 && k < rows {
			labels[k] = t.Label
		}
	}
	for k := range rows {
		edge := "│"
		if labels[k] != "" {
			edge = "┤"
		}
		pad := strings.Repeat(" ", margin-lipgloss.Width(labels[k]))
		out = append(out, row{{pad + labels[k] + " " + edge, quiet}, {c.text(k), plain}})
	}
	axis, below := c.xAxis(f.XTicks)
	lead := strings.Repeat(" ", margin+1)
	out = append(out, row{{lead + "└" + axis, quiet}}, row{{lead + " " + below, quiet}})
	return append(out, row{{cut(lead+" "+f.YLabel+"; "+f.XLabel, width), quiet}})
}

// canvas holds a grid of quarters of cells.
type canvas struct {
	columns, rows  int
	x0, x1, y0, y1 float64
	filled         []bool // 2*columns wide, 2*rows high
}

func newCanvas(columns, rows int, x0, x1, y0, y1 float64) *canvas {
	return &canvas{columns, rows, x0, x1, y0, y1, make([]bool, 4*columns*rows)}
}

func (c *canvas) column(x float64) float64 {
	return (x - c.x0) / (c.x1 - c.x0) * float64(2*c.columns-1)
}
func (c *canvas) line(y float64) float64 { return (c.y1 - y) / (c.y1 - c.y0) * float64(2*c.rows-1) }

// rowOf is the row of a value.
func (c *canvas) rowOf(y float64) int { return int(math.Round(c.line(y))) / 2 }

func (c *canvas) fill(i, k int) {
	if i >= 0 && i < 2*c.columns && k >= 0 && k < 2*c.rows {
		c.filled[k*2*c.columns+i] = true
	}
}

// curve joins the points.
func (c *canvas) curve(points []answer.Point) {
	for n, p := range points {
		x, y := c.column(p[0]), c.line(p[1])
		c.fill(int(math.Round(x)), int(math.Round(y)))
		if n == 0 {
			continue
		}
		fromX, fromY := c.column(points[n-1][0]), c.line(points[n-1][1])
		steps := math.Ceil(max(math.Abs(x-fromX), math.Abs(y-fromY)))
		if !(steps <= float64(2*(c.columns+c.rows))) {
			continue // a point far outside: nothing of ours
		}
		for s := 1.0; s < steps; s++ {
			c.fill(int(math.Round(fromX+(x-fromX)*s/steps)), int(math.Round(fromY+(y-fromY)*s/steps)))
		}
	}
}

// text is one row of cells.
func (c *canvas) text(k int) string {
	out := make([]rune, c.columns)
	for i := range out {
		bits := 0
		for q := range 4 {
			if c.filled[(2*k+q/2)*2*c.columns+2*i+q%2] {
				bits |= 1 << q
			}
		}
		out[i] = quadrants[bits]
	}
	return string(out)
}

// xAxis is the axis with its ticks, and the labels below that find room.
func (c *canvas) xAxis(ticks []answer.Tick) (axis, below string) {
	line := []rune(strings.Repeat("─", c.columns))
	labels := []rune(strings.Repeat(" ", c.columns))
	free := 0
	for _, t := range ticks {
		at := int(math.Round(c.column(t.At))) / 2
		if at < 0 || at >= c.columns {
			continue
		}
		line[at] = '┬'
		label := []rune(t.Label)
		from := at - len(label)/2
		if at == 0 {
			from = 0
		}
		if from >= free && from+len(label) <= c.columns {
			copy(labels[from:], label)
			free = from + len(label) + 1
		}
	}
	return string(line), strings.TrimRight(string(labels), " ")
}
