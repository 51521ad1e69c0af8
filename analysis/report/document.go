package report

import (
	"io/fs"
	"time"

	"gonum.org/v1/plot"

	"gaugelog/analysis"
	"gaugelog/config"
)

// Document is a report that knows no format.
type Document struct {
	// Title is the rig's title; Subtitle says what was tested and when.
	Title, Subtitle string
	// Last is the instant of the last reading: the only date a writer may put
	// into a file, so that the same run gives the same bytes. Zero: unknown.
	Last     time.Time
	Sections []Section
}

// Section is a numbered part of the report. Lead is its first sentence: what
// the section says.
type Section struct {
	ID, Title, Lead string
	Blocks          []Block
}

// Block is a Paragraph, List, Table, Figure or Picture.
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
	// Below is a second plot under the first over the same axis, or nil; its
	// Height is within that of the figure.
	Below *plot.Plot
}

// Picture is a photograph as it was handed in.
type Picture struct {
	Caption, Alt string
	// Type is its media type, image/jpeg or image/png; Width and Height are in
	// pixels.
	Type          string
	Data          []byte
	Width, Height int
}

func (Paragraph) block() {}
func (List) block()      {}
func (Table) block()     {}
func (Figure) block()    {}
func (Picture) block()   {}

// Options chooses how a result is shown.
type Options struct {
	// Rig is the rig as recorded with its amendments applied; nil leaves out
	// what only the rig file knows (gauges' serial numbers, details).
	Rig *config.Rig
	// Units is "si" (default) or "us"; the two are never mixed in a table.
	Units string
	// Marks are the run's marks in the order in which they were entered.
	Marks []Mark
	// Amendments are what was learned after the start.
	Amendments []config.Amendment
	// Events are what happened to the recording, in order of time.
	Events []Event
	// Files is the run folder, from which the marks' photographs are read; nil
	// leaves them out and says so.
	Files fs.FS
}

// Mark is one entry of an operator, withdrawn ones among them.
type Mark struct {
	ID   string
	Time time.Time
	// What says it in words; By names who entered it, "" where nobody did.
	What, By string
	// Withdrawn says why the mark does not count; "" where it does.
	Withdrawn string
	// Photo is the path of its picture within the run folder, or "".
	Photo string
}

// Event is something that happened to the recording.
type Event struct {
	Time                time.Time
	Kind, Gauge, Detail string
}

// Build makes the document of a result. The order answers a client's
// questions first, then shows how each answer came about.
func Build(r *analysis.Result, o Options) *Document {
	b := &builder{r: r, rig: o.Rig, o: o, u: unitsOf(o.Units), zone: zoneOf(o.Rig)}
	d := &Document{Title: b.title(), Subtitle: b.subtitle()}
	d.Last, _ = time.Parse(time.RFC3339Nano, r.Run.Last)
	for _, make := range []func() Section{
		b.answers, b.jobCard, b.steps, b.shape, b.stiffness, b.creep, b.recovery,
		b.surroundings, b.corrections, b.entries, b.photographs, b.evaluations, b.trace, b.cautions,
	} {
		if s := make(); len(s.Blocks) > 0 {
			d.Sections = append(d.Sections, s)
		}
	}
	d.clean(b.u)
	return d
}
