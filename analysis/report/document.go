package report

import (
	"gonum.org/v1/plot"

	"gaugelog/analysis"
	"gaugelog/config"
)

// Document is a report that knows no format.
type Document struct {
	// Title is the rig's title; Subtitle says what was tested and when.
	Title, Subtitle string
	Sections        []Section
}

// Section is a numbered part of the report. Lead is its first sentence: what
// the section says.
type Section struct {
	ID, Title, Lead string
	Blocks          []Block
}

// Block is a Paragraph, List, Table or Figure.
type Block interface{ block() }

// Paragraph is running text.
type Paragraph struct{ Text string }

// List is short items; Grave marks cautions that a reader must not miss.
type List struct {
	Grave bool
	Items []string
}

// Table has a caption, columns with units and rows of finished text; Says is
// the sentence under it that tells what it shows.
type Table struct {
	Caption string
	Columns []Column
	Rows    [][]string
	Says    string
}

// Column is a table's column: Unit stands in its head, Text aligns left.
type Column struct {
	Name, Unit string
	Text       bool
}

// Figure is a plot with its caption and a text for who cannot see it.
type Figure struct {
	ID, Caption, Alt string
	// Width and Height are in millimetres on paper.
	Width, Height float64
	Plot          *plot.Plot
}

func (Paragraph) block() {}
func (List) block()      {}
func (Table) block()     {}
func (Figure) block()    {}

// Options chooses how a result is shown.
type Options struct {
	// Rig is the rig as recorded with its amendments applied; nil leaves out
	// what only the rig file knows (gauges' serial numbers, details).
	Rig *config.Rig
	// Units is "si" (default) or "us"; the two are never mixed in a table.
	Units string
}

// Build makes the document of a result. The order answers a client's
// questions first, then shows how each answer came about.
func Build(r *analysis.Result, o Options) *Document {
	b := &builder{r: r, rig: o.Rig, u: unitsOf(o.Units), zone: zoneOf(o.Rig)}
	d := &Document{Title: b.title(), Subtitle: b.subtitle()}
	for _, make := range []func() Section{
		b.answers, b.jobCard, b.steps, b.shape, b.stiffness, b.creep, b.recovery,
		b.surroundings, b.corrections, b.evaluations, b.trace, b.cautions,
	} {
		if s := make(); len(s.Blocks) > 0 {
			d.Sections = append(d.Sections, s)
		}
	}
	return d
}
