package export

import (
	"cmp"
	"io"
	"slices"

	"gaugelog/analysis/history"
)

// Marks writes the marks that count, one row each, in the columns that
// importing reads:
//
//	time_utc, seconds_s, load, value, step, gauge, act, note, by
func Marks(w io.Writer, h *history.History) (Summary, error) {
	t, err := newTable(w, []string{"time_utc", "seconds_s", "load", "value", "step", "gauge", "act", "note", "by"})
	if err != nil {
		return Summary{}, err
	}
	marks := slices.Clone(h.Marks)
	slices.SortStableFunc(marks, func(a, b history.Mark) int { return cmp.Compare(a.Time, b.Time) })
	for _, m := range marks {
		t.when(m.Time, h.First)
		value, note := "", m.Text
		if m.Kind == "load" {
			if value = number(m.Newton) + " N"; m.Kilogram != nil {
				value = number(*m.Kilogram) + " kg"
			}
			note = ""
		}
		copy(t.cells[2:], []string{m.Load, value, m.Step, m.Gauge, m.Act, note, m.By})
		if err := t.flushRow(); err != nil {
			return Summary{}, err
		}
	}
	return Summary{Rows: t.rows}, t.end()
}
