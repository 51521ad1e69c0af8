package terminal

import (
	"fmt"
	"strings"

	"charm.land/lipgloss/v2"

	"gaugelog/ingest/answer"
)

// page is what the body of the screen shows.
type page uint8

const (
	overview page = iota
	plot
	gauges
	forecast
	alarms
	recording
	pages
)

var pageNames = [pages]string{"overview", "plot", "gauges", "forecast", "alarms", "recording"}

// wide is the width, in cells, from which two pages stand side by side.
const wide = 120

// header is the rows above the body: the title with the instant, the alarms,
// what is wrong with the connection, and the pages.
func (m *Model) header() []row {
	v := &m.frame.View
	out := []row{between(v.Title, v.At, m.width)}
	if m.frame.Lost != "" {
		out = append(out, paragraph(m.width, 2, tag(answer.Abnormal), m.frame.Lost+": what stands below is old.", plain)...)
	}
	if len(v.Alarms) > 0 {
		rows := paragraph(m.width, 2, tag(v.Banner.Tone), v.Banner.Short, strong)
		if len(rows) > 2 {
			rows = rows[:2]
		}
		out = append(out, rows...)
	}
	var tabs row
	for i, name := range pageNames {
		if page(i) == m.page {
			tabs = append(tabs, piece{"(" + name + ")", strong})
		} else {
			tabs = append(tabs, piece{" " + name + " ", quiet})
		}
	}
	if tabs.width() > m.width { // letters, and the name of the page that is shown
		tabs = nil
		for i, name := range pageNames {
			if page(i) == m.page {
				tabs = append(tabs, piece{"(" + name + ")", strong})
			} else {
				tabs = append(tabs, piece{" " + name[:1] + " ", quiet})
			}
		}
	}
	return append(out, tabs)
}

// between sets two texts at the ends of a row, the second only where it fits.
func between(left, right string, width int) row {
	left = cut(left, width)
	gap := width - row{{left, strong}}.width() - row{{right, quiet}}.width()
	if gap < 2 {
		return row{{left, strong}}
	}
	return row{{left, strong}, {strings.Repeat(" ", gap), plain}, {right, quiet}}
}

// keys is the rows at the bottom that say what can be pressed.
func (m *Model) keys() []row {
	words := []string{"←→ page", "↑↓ scroll"}
	switch {
	case m.page == alarms:
		words = append(words, "n next alarm", "s seen by me")
	case m.page == plot:
		words = append(words, "n next gauge", "t "+map[bool]string{true: "even time", false: "log time"}[m.even == 0])
	case m.page == overview:
		switch {
		case m.full:
			words = append(words, "d what fits")
		case m.partly:
			words = append(words, "d in full")
		}
		if m.width >= wide {
			words = append(words, "n next gauge", "t time axis")
		}
	}
	var out []row
	if m.said != "" {
		out = append(out, paragraph(m.width, 0, nil, m.said, strong)...)
	}
	line := ""
	for _, w := range append(words, "q quit") {
		if line == "" {
			line = w
		} else if longer := line + " · " + w; lipgloss.Width(longer) <= m.width {
			line = longer
		} else {
			out, line = append(out, row{{line, quiet}}), w
		}
	}
	return append(out, row{{line, quiet}})
}

// body is the rows of the page shown, as many as there are.
func (m *Model) body(height int) []row {
	if m.frame.View.At == "" {
		return []row{{{"Waiting for the first look at the run …", plain}}}
	}
	switch m.page {
	case plot:
		return m.plotRows(m.width, height)
	case gauges:
		return gaugeRows(&m.frame.View, m.width)
	case forecast:
		return forecastRows(&m.frame.View, m.width)
	case alarms:
		return m.alarmRows(m.width)
	case recording:
		return recordingRows(&m.frame.View, m.width)
	}
	if m.width < wide {
		return m.answerRows(m.width, height)
	}
	left := m.width/2 - 2
	out := beside(m.answerRows(left, height), m.plotRows(m.width-left-3, min(height, 3*(m.width-left)/8)), left)
	if table := gaugeRows(&m.frame.View, m.width); len(out)+1+len(table) <= height {
		out = append(append(out, row{}), table...)
	}
	return out
}

// beside sets two columns of rows next to each other.
func beside(a, b []row, left int) []row {
	var out []row
	for i := range max(len(a), len(b)) {
		var l, r row
		if i < len(a) {
			l = a[i]
		}
		if i < len(b) {
			r = b[i]
		}
		out = append(out, append(append(l.padded(left), piece{" │ ", quiet}), r...))
	}
	return out
}

// column is the width of the questions' column where there is one.
const column = 31

// said is one answer as rows: its short words, and each line that says more.
type said struct {
	short []row
	more  [][]row
}

// answers is the five answers and what hangs; terse sets each question before
// its answer, in a word or two.
func (m *Model) answers(width int, terse bool) []said {
	var out []said
	for _, q := range m.frame.View.Questions() {
		if terse {
			q.Text = q.Brief
		}
		out = append(out, saidOf(q.Text, q.Answer, width, terse))
	}
	l := m.frame.View.Load
	return append(out, saidOf("Under load", answer.Answer{Short: l.Headline, More: l.Lines}, width, terse))
}

func saidOf(question string, a answer.Answer, width int, terse bool) (s said) {
	indent := column
	if terse {
		indent = 2
		lead := []piece{{question + " ", quiet}}
		s.short = paragraph(width, indent, append(lead, tag(a.Tone)...), a.Short, strong)
	} else if width < 2*column {
		indent = 2
		s.short = append(s.short, row{{question, quiet}})
		s.short = append(s.short, paragraph(width, indent, append([]piece{{"  ", plain}}, tag(a.Tone)...), a.Short, strong)...)
	} else {
		lead := []piece{{fmt.Sprintf("%-*s", column, question), quiet}}
		s.short = paragraph(width, indent, append(lead, tag(a.Tone)...), a.Short, strong)
	}
	for _, line := range a.More {
		s.more = append(s.more, paragraph(width, indent, []piece{{strings.Repeat(" ", indent), plain}}, line, plain))
	}
	return s
}

func heightOf(all []said) (n int) {
	for _, s := range all {
		n += len(s.short)
	}
	return n
}

// answerRows is the answers, with all they say where that was asked for, else
// with as much of it as there is room for: first lines before second ones.
func (m *Model) answerRows(width, height int) []row {
	all := m.answers(width, false)
	if !m.full && width < 2*column && heightOf(all) > height {
		all = m.answers(width, true)
	}
	shown, used, whole := make([]int, len(all)), heightOf(all), true
	for depth, more := 0, true; more; depth++ {
		more = false
		for i, s := range all {
			if depth >= len(s.more) || shown[i] < depth {
				continue
			}
			if !m.full && used+len(s.more[depth]) > height {
				whole = false
				continue
			}
			shown[i], more = depth+1, true
			used += len(s.more[depth])
		}
	}
	m.partly = !whole
	var out []row
	for i, s := range all {
		out = append(out, s.short...)
		for _, more := range s.more[:shown[i]] {
			out = append(out, more...)
		}
	}
	return out
}

// plotRows is the plot of the gauge chosen, by log time or by time.
func (m *Model) plotRows(width, height int) []row {
	if m.even >= len(m.frame.Figures) {
		return []row{{{"Nothing to draw yet.", quiet}}}
	}
	f := &m.frame.Figures[m.even]
	name, from := "", 0 // the gauge the answers speak of comes first
	for i := range f.Lines {
		if f.Lines[i].Name == m.frame.View.Lead {
			from = i
		}
	}
	if n := len(f.Lines); n > 0 {
		name = f.Lines[(from+m.gauge)%n].Name
	}
	return plotOf(f, name, width, height)
}
