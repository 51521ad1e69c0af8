package report

import (
	"cmp"
	"maps"
	"slices"
	"strings"
)

func sortedKeys[V any](m map[string]V) []string { return slices.Sorted(maps.Keys(m)) }

// corrections lists what was corrected, left out and overruled.
func (b *builder) corrections() Section {
	s := Section{ID: "corrections", Title: "What was corrected and what was left out",
		Lead: "The recorded readings are unchanged; every correction below is made in the analysis."}
	if len(b.r.Disturbances) > 0 {
		t := Table{Caption: "Disturbances", Columns: []Column{
			{Name: "Kind", Text: true}, {Name: "Gauges", Text: true}, {Name: "From", Text: true}, {Name: "To", Text: true},
			{Name: "Size", Text: true}, {Name: "Treated", Text: true}}}
		for _, d := range b.r.Disturbances {
			to, size := "", ""
			if d.To != nil {
				to = b.local(*d.To)
			}
			switch {
			case d.Size != nil:
				size = b.short(d.Size)
			case d.Load != nil:
				size = b.short(d.Load)
			}
			kind := d.Kind
			if len(d.Candidates) > 0 {
				kind += ": " + strings.Join(d.Candidates, " or ")
			}
			t.Rows = append(t.Rows, []string{kind, strings.Join(d.Gauges, ", "), b.local(d.From), to, size, d.Treated})
		}
		s.Blocks = append(s.Blocks, t)
	} else {
		s.Blocks = append(s.Blocks, Paragraph{"No disturbance was found."})
	}
	if len(b.r.Decisions) > 0 {
		t := Table{Caption: "Overruled by a person", Columns: []Column{{Name: "What", Text: true}, {Name: "Value", Text: true}, {Name: "Why", Text: true}, {Name: "By", Text: true}}}
		for _, d := range b.r.Decisions {
			t.Rows = append(t.Rows, []string{d.Path, d.Value, d.Why, d.By})
		}
		s.Blocks = append(s.Blocks, t)
	}
	if len(b.r.Warnings) > 0 {
		var l List
		for _, w := range b.r.Warnings {
			text := w.Text
			if w.Gauge != "" && !strings.Contains(text, w.Gauge) {
				text = w.Gauge + ": " + text
			}
			l.Items = append(l.Items, text)
		}
		s.Blocks = append(s.Blocks, Paragraph{"Warnings:"}, l)
	}
	return s
}

// evaluations holds the run against the rules asked for.
func (b *builder) evaluations() Section {
	s := Section{ID: "evaluations", Title: "Evaluations",
		Lead: "Informative. The standard's text, its edition and a licensed engineer decide."}
	if len(b.r.Evaluations) == 0 {
		return s
	}
	t := Table{Caption: "Clauses", Columns: []Column{{Name: "Rule", Text: true}, {Name: "Clause", Text: true}, {Name: "Holds", Text: true}, {Name: "Measured", Text: true}, {Name: "Required", Text: true}, {Name: "Why", Text: true}}}
	for _, e := range b.r.Evaluations {
		holds := "cannot evaluate"
		switch {
		case e.Pass != nil:
			holds = map[bool]string{true: "yes", false: "NO"}[*e.Pass]
		case e.Measured != nil && e.Required == "":
			holds = "a figure"
		case e.Measured != nil:
			holds = "not decided"
		}
		measured := "–"
		if e.Measured != nil {
			measured = b.short(e.Measured)
		}
		t.Rows = append(t.Rows, []string{e.Rule, e.Clause, holds, measured, e.Required, e.Why})
	}
	s.Blocks = append(s.Blocks, t)
	return s
}

// trace is what a reader needs to make every number again.
func (b *builder) trace() Section {
	run := b.r.Run
	t := Table{Caption: "Traceability", Columns: []Column{{Name: "Item", Text: true}, {Name: "Value", Text: true}}}
	t.Rows = [][]string{
		{"Program", "gaugelog " + cmp.Or(run.Program, "unknown version")},
		{"Result layout", b.r.Schema},
		{"SHA-256 of the rig file", run.RigSHA256},
		{"First reading", b.local(run.First)},
		{"Last reading", b.local(run.Last)},
		{"Indications", grouped(whole(run.Readings))},
		{"Amendments applied", whole(int64(run.Amendments))},
		{"Damaged blocks left out", whole(int64(run.DamagedBlocks))},
		{"Raw data", "unchanged; check with: gaugelog verify, or sha256sum -c SHA256SUMS in the run folder"},
	}
	sign := Table{Caption: "Signed", Columns: []Column{{Name: "Name", Text: true}, {Name: "Date", Text: true}, {Name: "Signature", Text: true}}, Rows: [][]string{{" ", " ", " "}}}
	return Section{ID: "trace", Title: "Where the numbers come from", Blocks: []Block{t, sign}}
}

// Cautions are the warnings about suspended loads that stand in every report
// (common practice; local codes go before them).
var Cautions = []string{
	"Suspended loads can hurt and kill. Nobody reaches or stands under the load; barrier and sign it.",
	"Hang it low, over a catcher that stops the fall before the beam breaks fully, with a second, slack sling on the hanger.",
	"Brittle breaks give no warning. If the creep speeds up, clear the area; do not go near to check.",
	"A software alarm is no safety device.",
	"Nothing here approves a design. Local codes and a licensed engineer decide.",
}

// cautions closes the report.
func (b *builder) cautions() Section {
	return Section{ID: "cautions", Title: "Cautions", Blocks: []Block{List{Grave: true, Items: Cautions}}}
}
