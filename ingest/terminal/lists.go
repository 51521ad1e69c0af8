package terminal

import (
	"fmt"
	"strings"

	"charm.land/lipgloss/v2"

	"gaugelog/ingest/answer"
)

// gaugeRows is the table of gauges, or a paragraph each where it is too wide.
func gaugeRows(v *answer.View, width int) []row {
	type cell struct {
		head  string
		value func(g *answer.GaugeRow) string
	}
	columns := []cell{
		{"gauge", func(g *answer.GaugeRow) string { return g.Name }},
		{"at", func(g *answer.GaugeRow) string { return g.At }},
		{"shows", func(g *answer.GaugeRow) string { return g.Reading }},
		{"age", func(g *answer.GaugeRow) string { return g.Age }},
		{"sag, uncorr.", func(g *answer.GaugeRow) string { return g.Sag }},
		{"sag, corr.", func(g *answer.GaugeRow) string { return g.Net }},
		{"in 24 h", func(g *answer.GaugeRow) string { return g.Day }},
		{"travel left", func(g *answer.GaugeRow) string { return g.Left }},
		{"runs out", func(g *answer.GaugeRow) string { return g.Until }},
	}
	widths, total := make([]int, len(columns)), len("[answers]")
	for i, c := range columns {
		widths[i] = lipgloss.Width(c.head)
		for k := range v.Gauges {
			widths[i] = max(widths[i], lipgloss.Width(or(c.value(&v.Gauges[k]))))
		}
		total += widths[i] + 2
	}
	var out []row
	if total <= width {
		head := row{}
		for i, c := range columns {
			head = append(head, piece{aligned(c.head, widths[i], i > 1) + "  ", quiet})
		}
		out = append(out, head)
		for k := range v.Gauges {
			g := &v.Gauges[k]
			r := row{}
			for i, c := range columns {
				r = append(r, piece{aligned(or(c.value(g)), widths[i], i > 1) + "  ", plain})
			}
			out = append(out, append(r, tag(g.Tone)...))
		}
	} else {
		for k := range v.Gauges {
			g := &v.Gauges[k]
			out = append(out, append(row{{g.Name + " ", strong}}, tag(g.Tone)...))
			var parts []string
			for _, c := range columns[1:] {
				if s := c.value(g); s != "" {
					parts = append(parts, c.head+" "+s)
				}
			}
			out = append(out, paragraph(width, 2, []piece{{"  ", plain}}, strings.Join(parts, ", "), plain)...)
		}
	}
	note := "Lengths in mm; down is positive. Uncorrected: the change of the indication since before the first load, with its sense and nothing else. " + v.Corrected
	out = append(out, row{}, nil)
	out = append(out[:len(out)-1], paragraph(width, 0, nil, note, quiet)...)
	for _, line := range v.Room {
		out = append(out, paragraph(width, 2, nil, line, plain)...)
	}
	return out
}

func or(s string) string {
	if s == "" {
		return "–"
	}
	return s
}

func aligned(s string, width int, right bool) string {
	pad := strings.Repeat(" ", max(0, width-lipgloss.Width(s)))
	if right {
		return pad + s
	}
	return s + pad
}

// forecastRows is what the analysis foretells, and what more time would buy.
func forecastRows(v *answer.View, width int) []row {
	out := paragraph(width, 0, nil, v.Outlook.State, plain)
	for _, f := range v.Outlook.Forecasts {
		line := ""
		if f.Sag != "" {
			line = f.Sag + " mm"
		}
		if f.Band != "" {
			line += " (" + f.Band + ")"
		}
		if f.Label != "" {
			line = strings.TrimSpace(line + " " + f.Label)
		}
		out = append(out, paragraph(width, 2, nil, f.After+" after full load, "+f.Date+": "+line, strong)...)
	}
	if v.Outlook.Note != "" {
		out = append(out, paragraph(width, 0, nil, v.Outlook.Note, quiet)...)
	}
	if len(v.Outlook.MayStop) > 0 {
		out = append(out, row{}, row{{"May we stop?", strong}})
	}
	for _, line := range v.Outlook.MayStop {
		out = append(out, paragraph(width, 2, nil, line, plain)...)
	}
	return out
}

// alarmRows is the alarms raised, the one chosen marked, and those that ended.
func (m *Model) alarmRows(width int) []row {
	v := &m.frame.View
	var out []row
	for i, a := range v.Alarms {
		sign := "  "
		if i == m.alarm%len(v.Alarms) {
			sign = "> "
		}
		out = append(out, paragraph(width, 2, append([]piece{{sign, strong}}, tag(a.Tone)...), a.Cause+": "+a.Text, strong)...)
		seen := "Not seen yet."
		if a.Seen != "" {
			seen = "Seen " + a.Seen + "."
		}
		out = append(out, paragraph(width, 2, []piece{{"  ", plain}}, a.Advice+" Raised "+a.Raised+". "+seen, plain)...)
	}
	if len(v.Alarms) == 0 {
		out = append(out, append(row{{"No alarm ", strong}}, tag(v.Banner.Tone)...))
	}
	for i, a := range v.Past {
		if i == 0 {
			out = append(out, row{}, row{{fmt.Sprintf("Over in the last week: %d", len(v.Past)), strong}})
		}
		out = append(out, paragraph(width, 2, nil, a.Cause+": "+a.Text+". "+a.Raised+" to "+a.Over+".", quiet)...)
	}
	out = append(out, row{})
	return append(out, paragraph(width, 0, nil, "Alarms come from software and can fail or be late. They are no safety device: catch the load, keep people away from it, and never go near to check.", quiet)...)
}

// recordingRows is the recording itself, the plan and the marks.
func recordingRows(v *answer.View, width int) []row {
	var out []row
	for _, f := range v.Machine {
		lead := append([]piece{{fmt.Sprintf("%-24s", f.Name), quiet}}, tag(f.Tone)...)
		out = append(out, paragraph(width, min(24, width/2), lead, f.Value, plain)...)
	}
	for i, s := range v.Steps {
		if i == 0 {
			out = append(out, row{}, row{{"The plan", strong}})
		}
		line := s.Name + ": " + or(s.Set)
		if s.Hold != "" {
			line += ", hold " + s.Hold
		}
		switch {
		case s.Now:
			line += " (going on)"
		case s.Next:
			line += " (next)"
		}
		out = append(out, paragraph(width, 2, nil, line, plain)...)
	}
	for i, k := range v.Marks {
		if i == 0 {
			out = append(out, row{}, row{{"Marks, the newest first", strong}})
		}
		line := or(k.ID) + " " + k.Words + ", " + k.When
		if k.By != "" {
			line += ", " + k.By
		}
		if k.Withdrawn != "" {
			line += ". Withdrawn: " + k.Withdrawn
		}
		out = append(out, paragraph(width, 2, nil, line, plain)...)
	}
	return out
}
