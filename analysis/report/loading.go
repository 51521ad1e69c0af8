package report

import (
	"fmt"
	"sort"
	"strings"

	"gaugelog/analysis"
)

// steps is the step table: loads, times, sags.
func (b *builder) steps() Section {
	s := Section{ID: "steps", Title: "Load steps",
		Lead: "Sags are net of support movement and count from full load; the initial sag is read " + span(b.r.Stiffness.InitialAfterS) + " after it and always holds some creep."}
	if len(b.r.Steps) == 0 {
		s.Lead = ""
		s.Blocks = append(s.Blocks, Paragraph{"No load step was found: " + b.whyMissing("step") + "."})
		return s
	}
	s.Blocks = append(s.Blocks, b.stepTable())
	for _, t := range []struct {
		caption, says string
		of            func(g analysis.StepGauge) *analysis.Q
	}{
		{"Initial sag", "Total sag at the initial-sag time of each step.", func(g analysis.StepGauge) *analysis.Q { return g.Initial }},
		{"Increment of initial sag", "The initial sag less the older steps' creep carried forward to that instant.", func(g analysis.StepGauge) *analysis.Q { return g.Increment }},
		{"Final sag", "At the end of each step.", func(g analysis.StepGauge) *analysis.Q { return g.Final }},
	} {
		for _, part := range b.sagTables(t.caption, t.says, t.of) {
			s.Blocks = append(s.Blocks, part)
		}
	}
	if f, ok := b.loadSagFigure(); ok {
		s.Blocks = append(s.Blocks, f)
	}
	return s
}

func (b *builder) stepTable() Table {
	t := Table{Caption: "Steps and their times", Columns: []Column{
		{Name: "Step", Text: true}, {Name: "Loads", Unit: b.u.of("N"), Text: true}, {Name: "Full load", Text: true},
		{Name: "Mark less found", Unit: "s"}, {Name: "u", Unit: "s"}, {Name: "Response", Text: true}}}
	for _, st := range b.r.Steps {
		full, offset, u, response := "–", "–", "–", "baseline"
		if st.Start.Full != nil {
			full = b.local(*st.Start.Full)
		}
		if st.Start.OffsetS != nil {
			offset = fixed(*st.Start.OffsetS, 1)
		}
		if st.Start.US != nil {
			u = significant(*st.Start.US, 2)
		}
		if st.Start.Marked != nil {
			response = "cannot tell"
		}
		if st.Response != nil {
			response = map[bool]string{true: "yes", false: "none seen"}[*st.Response]
		}
		t.Rows = append(t.Rows, []string{st.Step, b.loadsOf(st), full, offset, u, response})
	}
	t.Says = "A positive offset is a mark entered late; the times used are those found in the readings."
	return t
}

// loadsOf lists a step's loads by name, in a fixed order.
func (b *builder) loadsOf(st analysis.Step) string {
	names := make([]string, 0, len(st.Loads))
	for n := range st.Loads {
		names = append(names, n)
	}
	sort.Strings(names)
	factor, _ := b.u.convert("N")
	var parts []string
	for _, n := range names {
		parts = append(parts, fmt.Sprintf("%s %s", n, fixed(st.Loads[n]*factor, 2)))
	}
	return strings.Join(parts, ", ")
}

// mostGauges is how many gauges stand side by side in a table.
const mostGauges = 8

// sagTables are one figure of every gauge (columns) in every loaded step
// (rows), in several tables where there are many gauges.
func (b *builder) sagTables(caption, says string, of func(analysis.StepGauge) *analysis.Q) []Table {
	names := b.r.Steps[0].Gauges
	var out []Table
	for from := 0; from < len(names); from += mostGauges {
		to := min(from+mostGauges, len(names))
		name := caption + ", " + b.u.of("mm")
		if len(names) > mostGauges {
			name += fmt.Sprintf(" (gauges %d to %d)", from+1, to)
		}
		out = append(out, b.sagTable(name, says, from, to, of))
	}
	return out
}

func (b *builder) sagTable(caption, says string, from, to int, of func(analysis.StepGauge) *analysis.Q) Table {
	t := Table{Caption: caption, Columns: []Column{{Name: "Step", Text: true}}}
	for _, g := range b.r.Steps[0].Gauges[from:to] {
		t.Columns = append(t.Columns, Column{Name: g.Gauge})
	}
	worst := 0.0
	for _, st := range b.r.Steps {
		if st.Response == nil && st.Start.Marked == nil {
			continue
		}
		row := []string{st.Step}
		for j := from; j < to; j++ {
			var q *analysis.Q
			if j < len(st.Gauges) {
				q = of(st.Gauges[j])
			}
			row = append(row, b.cell(q))
			if q != nil && q.U != nil {
				worst = max(worst, *q.U*b.factor("mm"))
			}
		}
		t.Rows = append(t.Rows, row)
	}
	t.Says = says
	if worst > 0 {
		t.Says = strings.TrimSpace(says + " Standard uncertainties are at most " + significant(worst, 2) + " " + b.u.of("mm") + ".")
	}
	return t
}

// shape is the elastic curve and the greatest sag.
func (b *builder) shape() Section {
	s := Section{ID: "shape", Title: "The curve along the beam"}
	if f, ok := b.curveFigure(); ok {
		s.Blocks = append(s.Blocks, f)
	}
	t := Table{Caption: "Greatest sag by step", Columns: []Column{
		{Name: "Step", Text: true}, {Name: "At", Unit: b.u.of("mm")}, {Name: "u", Unit: b.u.of("mm")},
		{Name: "Sag", Unit: b.u.of("mm")}, {Name: "u", Unit: b.u.of("mm")}}}
	for _, st := range b.r.Steps {
		if l := st.Largest; l != nil {
			t.Rows = append(t.Rows, []string{st.Step, b.cell(&l.At), b.cellU(&l.At), b.cell(&l.Sag), b.cellU(&l.Sag)})
		}
	}
	if len(t.Rows) > 0 {
		t.Says = "From the fitted curve, at the initial-sag time."
		s.Blocks = append(s.Blocks, t)
	}
	if len(s.Blocks) == 0 {
		s.Blocks = append(s.Blocks, Paragraph{"No curve was fitted: " + b.whyMissing("modulus") + "."})
	}
	return s
}

// small is the factor from mm to the unit of small deviations, and its name.
func (b *builder) small() (float64, string) {
	if b.u.of("mm") == "in" {
		return 1e3 * b.factor("mm"), "mil"
	}
	return 1000, "µm"
}
