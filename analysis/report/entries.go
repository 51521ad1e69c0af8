package report

import (
	"cmp"
	"fmt"

	"gaugelog/analysis/unitsystem"
)

// mostEvents is how many events of the recording are listed one by one.
const mostEvents = 60

// entries lists what people entered and what happened to the recording.
func (b *builder) entries() Section {
	s := Section{ID: "entries", Title: "Who entered what",
		Lead: "Marks are never edited: a wrong one is withdrawn and stays in this list."}
	if len(b.o.Marks) > 0 {
		s.Blocks = append(s.Blocks, b.markTable())
	} else {
		s.Blocks = append(s.Blocks, Paragraph{"No mark is at hand: nobody entered a load, an act or a note."})
	}
	if len(b.o.Amendments) > 0 {
		s.Blocks = append(s.Blocks, b.amendmentTable())
	} else {
		s.Blocks = append(s.Blocks, Paragraph{"The rig file was not amended after the start."})
	}
	if len(b.r.Decisions) > 0 {
		t := Table{Caption: "Overruled by a person", Columns: []Column{
			{Name: "What", Text: true}, {Name: "Value", Text: true}, {Name: "Why", Text: true}, {Name: "By", Text: true}, {Name: "Since", Text: true}}}
		for _, d := range b.r.Decisions {
			t.Rows = append(t.Rows, []string{d.Path, unitsystem.Typed(d.Value), d.Why, cmp.Or(d.By, "not stated"), b.local(d.Since)})
		}
		t.Says = "Decisions of the analysis that an amendment changed; the figures of this report follow the person."
		s.Blocks = append(s.Blocks, t)
	} else {
		s.Blocks = append(s.Blocks, Paragraph{"No decision of the analysis was overruled."})
	}
	if len(b.o.Events) > 0 {
		s.Blocks = append(s.Blocks, b.eventTable())
	}
	return s
}

func (b *builder) markTable() Table {
	t := Table{Caption: "Marks", Columns: []Column{
		{Name: "Mark", Text: true}, {Name: "When", Text: true}, {Name: "What", Text: true}, {Name: "Entered by", Text: true}, {Name: "Counts", Text: true}}}
	for _, m := range b.o.Marks {
		counts := "yes"
		if m.Withdrawn != "" {
			counts = "no, withdrawn: " + m.Withdrawn
		}
		t.Rows = append(t.Rows, []string{cmp.Or(m.ID, "–"), b.localTime(m.Time), m.What, cmp.Or(m.By, "not stated"), counts})
	}
	t.Says = "When is the time entered; the times that count are found in the readings (Load steps)."
	return t
}

func (b *builder) amendmentTable() Table {
	t := Table{Caption: "Amendments to the rig file", Columns: []Column{
		{Name: "Path", Text: true}, {Name: "Value", Text: true}, {Name: "Since", Text: true}, {Name: "Why", Text: true}, {Name: "By", Text: true}, {Name: "Entered", Text: true}}}
	for _, a := range b.o.Amendments {
		since := "the start"
		if a.Since != "" {
			since = b.local(a.Since)
		}
		value := a.Shown
		if value == "" {
			value = fmt.Sprint(a.Value)
		}
		t.Rows = append(t.Rows, []string{a.Path, unitsystem.Typed(value), since, a.Why, cmp.Or(a.By, "not stated"), b.local(a.Entered)})
	}
	t.Says = "Learned after the start and applied in the analysis; the recorded rig file is unchanged."
	return t
}

// eventTable lists the first and last events, and counts the rest.
func (b *builder) eventTable() Table {
	t := Table{Caption: "What happened to the recording", Columns: []Column{
		{Name: "When", Text: true}, {Name: "What", Text: true}, {Name: "Gauge", Text: true}, {Name: "Detail", Text: true}}}
	for i, e := range b.o.Events {
		if left := len(b.o.Events) - mostEvents; left > 0 && i >= mostEvents/2 && i < mostEvents/2+left {
			continue
		}
		t.Rows = append(t.Rows, []string{b.localTime(e.Time), e.Kind, cmp.Or(e.Gauge, "–"), e.Detail})
	}
	t.Says = "From the recorder's own log."
	if left := len(b.o.Events) - mostEvents; left > 0 {
		t.Says += fmt.Sprintf(" %d events between the first %d and the last %d are left out here; events.lp holds all.", left, mostEvents/2, mostEvents/2)
	}
	return t
}
