package answer

import (
	"strings"
	"time"

	"gaugelog/config"
	"gaugelog/ingest"
)

// lastMark is the mark entered last that counts; nil where there is none.
func (w speaker) lastMark() *ingest.Mark {
	for i := len(w.s.Marks) - 1; i >= 0; i-- {
		m := &w.s.Marks[i]
		if _, gone := w.s.Withdrawn[m.ID]; m.Withdraw == "" && (m.ID == "" || !gone) {
			return m
		}
	}
	return nil
}

// MarkRow is one mark of the list; Withdrawn says why it does not count, and is
// empty where it does.
type MarkRow struct {
	ID        string `json:"id,omitempty"`
	Words     string `json:"words"`
	When      string `json:"when"`
	By        string `json:"by,omitempty"`
	Withdrawn string `json:"withdrawn,omitempty"`
}

// mostMarks bounds the marks listed on the page.
const mostMarks = 30

func (w speaker) marks() []MarkRow {
	var out []MarkRow
	for i := len(w.s.Marks) - 1; i >= 0 && len(out) < mostMarks; i-- {
		m := w.s.Marks[i]
		if m.Withdraw != "" {
			continue
		}
		r := MarkRow{ID: m.ID, Words: MarkWords(m), When: w.day(time.Unix(0, m.Time)), By: m.By}
		if why, gone := w.s.Withdrawn[m.ID]; gone && m.ID != "" {
			r.Withdrawn = why
			if why == "" {
				r.Withdrawn = "no reason given"
			}
		}
		out = append(out, r)
	}
	return out
}

// MarkWords says what a mark says.
func MarkWords(m ingest.Mark) string {
	var parts []string
	if m.Step != "" {
		parts = append(parts, "step "+m.Step)
	}
	for _, l := range m.Loads {
		parts = append(parts, l.Name+" "+l.Shown)
	}
	if m.Act != "" {
		parts = append(parts, m.Gauge+" "+m.Act)
	}
	if m.Note != "" {
		parts = append(parts, m.Note)
	}
	return strings.Join(parts, ", ")
}

// Step is a planned step: what it sets, how long it is held, and whether it
// goes on or comes next.
type Step struct {
	Name string `json:"name"`
	Set  string `json:"set,omitempty"`
	Hold string `json:"hold,omitempty"`
	Now  bool   `json:"now,omitempty"`
	Next bool   `json:"next,omitempty"`
}

func (w speaker) steps() []Step {
	var out []Step
	for i, p := range w.d.Rig().Plan {
		out = append(out, Step{Name: p.Step, Set: strings.TrimPrefix(setWords(p), ": "), Hold: p.Hold.Shown,
			Now: i == w.s.Loads.Planned, Next: i == w.s.Loads.Planned+1})
	}
	return out
}

// setWords says what a planned step sets, behind a colon; empty for nothing.
func setWords(p config.PlanStep) string {
	var parts []string
	for _, s := range p.Set {
		parts = append(parts, s.Load+" "+s.Weight.Shown)
	}
	if len(parts) == 0 {
		return ""
	}
	return ": " + strings.Join(parts, ", ")
}
