package report

import (
	"bytes"
	"cmp"
	"crypto/sha256"
	"fmt"
	"io/fs"
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
			{Name: "No."}, {Name: "Kind", Text: true}, {Name: "Gauges", Text: true}, {Name: "From", Text: true}, {Name: "To", Text: true},
			{Name: "Size", Text: true}, {Name: "Treated", Text: true}, {Name: "Evidence", Text: true}}}
		for i, d := range b.r.Disturbances {
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
			t.Rows = append(t.Rows, []string{whole(int64(i + 1)), kind, strings.Join(d.Gauges, ", "), b.local(d.From), to, size, d.Treated, d.Evidence})
		}
		t.Says = "Size is the disturbance's own effect on the apparent sag."
		s.Blocks = append(s.Blocks, t)
	} else {
		s.Blocks = append(s.Blocks, Paragraph{"No disturbance was found."})
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
		{"Clock", b.clockWords()},
		{"Raw data", "unchanged; check with: gaugelog verify, or sha256sum -c SHA256SUMS in the run folder"},
	}
	if sum, n := b.checksums(); n > 0 {
		t.Rows = append(t.Rows, []string{"SHA-256 of SHA256SUMS, which lists " + fmt.Sprint(n) + " files", sum})
	}
	sign := Table{Caption: "Signed", Columns: []Column{{Name: "Name", Text: true}, {Name: "Date", Text: true}, {Name: "Signature", Text: true}}, Rows: [][]string{{" ", " ", " "}}}
	return Section{ID: "trace", Title: "Where the numbers come from", Blocks: []Block{t, sign}}
}

// clockWords says what is on record of the clock.
func (b *builder) clockWords() string {
	var said []string
	for _, w := range b.r.Warnings {
		if strings.HasPrefix(w.Code, "clock") {
			said = append(said, w.Text)
		}
	}
	for _, e := range b.o.Events {
		if e.Kind == "clock-stepped" {
			said = append(said, "stepped at "+b.localTime(e.Time)+" "+e.Detail)
		}
	}
	if len(said) == 0 {
		return "the recording machine's; no step and no unset clock on record"
	}
	return strings.Join(said, "; ")
}

// checksums is the hash of the run's list of hashes and how many it holds.
func (b *builder) checksums() (string, int) {
	if b.o.Files == nil {
		return "", 0
	}
	list, err := fs.ReadFile(b.o.Files, "SHA256SUMS")
	if err != nil {
		return "", 0
	}
	return fmt.Sprintf("%x", sha256.Sum256(list)), bytes.Count(list, []byte("\n"))
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
