package history

import (
	"fmt"
	"sort"

	"gaugelog/ingest/segment"
)

// addMarks takes over marks as they stand in marks.lp, withdrawals among them.
func (h *History) addMarks(records []segment.Record) {
	for i := range records {
		h.addMark(&records[i])
	}
}

// addMark takes over one line; it returns false where the line is no mark.
func (h *History) addMark(r *segment.Record) bool {
	if r.Point == nil {
		return false
	}
	p := r.Point
	m := Mark{ID: text(p, "id"), By: text(p, "by"), Time: r.Time}
	switch r.Kind {
	case segment.Load:
		m.Kind, m.Load, m.Step, m.Shown = "load", r.Name, text(p, "step"), text(p, "shown")
		newton, hasN := number(p, "newton")
		kg, hasKg := number(p, "kilogram")
		if !hasN && !hasKg {
			h.Notes = append(h.Notes, Note{Code: "load-without-value", Time: r.Time, Text: fmt.Sprintf(
				"a mark of load %s states neither newton nor kilogram; it was left out", r.Name)})
			return true
		}
		m.Newton = newton
		if hasKg {
			m.Kilogram = &kg
		}
	case segment.Touch:
		m.Kind, m.Gauge, m.Act = "touch", r.Name, text(p, "act")
	case segment.Note:
		m.Kind, m.Text = "note", text(p, "text")
	case segment.StepMark:
		m.Kind, m.Step = "step", text(p, "name")
	case segment.Withdraw:
		if h.withdrawn == nil {
			h.withdrawn = map[string]string{}
		}
		h.withdrawn[m.ID] = text(p, "why")
		return true
	default:
		return false
	}
	h.Marks = append(h.Marks, m)
	return true
}

// closeMarks applies the withdrawals and puts the marks in order of time.
func (h *History) closeMarks() {
	kept := h.Marks[:0]
	for _, m := range h.Marks {
		if _, gone := h.withdrawn[m.ID]; gone && m.ID != "" {
			continue
		}
		kept = append(kept, m)
	}
	h.Marks = kept
	sort.SliceStable(h.Marks, func(i, j int) bool { return h.Marks[i].Time < h.Marks[j].Time })
	sort.SliceStable(h.Events, func(i, j int) bool { return h.Events[i].Time < h.Events[j].Time })
}

func (h *History) addEvent(r *segment.Record) {
	if r.Kind != segment.Event || r.Point == nil {
		return
	}
	e := Event{Kind: r.Name, Gauge: r.Point.Tag("gauge"), Time: r.Time, Detail: text(r.Point, "detail"),
		From: whole(r.Point, "from"), N: whole(r.Point, "n")}
	// The beginning was stamped by the same clock, unless a recorder before
	// this one saw it.
	if e.From != 0 && (e.Kind != "gap" || e.Gauge != "") {
		e.From += r.Time - r.Raw
	}
	if e.Kind == "fetched" {
		h.fetched = true
		h.Notes = append(h.Notes, Note{Code: "fetched", Time: e.Time, Text: "this run was " + e.Detail})
	}
	h.Events = append(h.Events, e)
}

func text(p *segment.Point, key string) string {
	v, _ := p.Value(key)
	s, _ := v.(string)
	return s
}

// whole is an integer field, 0 where there is none.
func whole(p *segment.Point, key string) int64 {
	v, _ := p.Value(key)
	n, _ := v.(int64)
	return n
}

func number(p *segment.Point, key string) (float64, bool) {
	v, _ := p.Value(key)
	switch n := v.(type) {
	case float64:
		return n, true
	case int64:
		return float64(n), true
	case uint64:
		return float64(n), true
	}
	return 0, false
}
