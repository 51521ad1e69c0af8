package report

import (
	"math"
	"strings"
)

// laidTable is a table with its columns' widths and every cell wrapped.
type laidTable struct {
	t       Table
	caption []string
	widths  []float64
	size    float64
	head    [][]string
	rows    [][][]string
	says    []string
	bold    int // leading columns in bold
}

const (
	columnGap = 3.2 // mm between columns
	rowPad    = 0.9 // mm above and below a row's text
	signRow   = 11  // mm of an empty row, for a signature
)

// layTable fits a table into the page's width: the columns get what their
// text needs, and where that is too much the widest give way and wrap. Where
// not even the longest words fit, the type gets smaller and words are broken.
func (s *sheet) layTable(t Table, answers bool) *laidTable {
	l := &laidTable{t: t, size: tableSize}
	if answers {
		l.size, l.bold = 9, 2
		room := s.width - 2*columnGap
		l.widths = []float64{0.22 * room, 0.33 * room, 0.45 * room}
	}
	for ; !answers; l.size -= 0.4 {
		if s.fit(l) || l.size < 6.2 {
			break
		}
	}
	s.style("B", l.size, dark)
	for j, c := range t.Columns {
		l.head = append(l.head, s.wrap(columnLabel(c), l.widths[j]))
	}
	for _, row := range t.Rows {
		var cells [][]string
		for j, cell := range row {
			s.style(l.weight(j), l.size, dark)
			cells = append(cells, s.wrap(cell, l.widths[j]))
		}
		l.rows = append(l.rows, cells)
	}
	s.style("B", bodySize, dark)
	if t.Caption != "" {
		l.caption = s.wrap(t.Caption, s.width)
	}
	s.style("", smallSize, soft)
	if t.Says != "" {
		l.says = s.wrap(t.Says, s.width)
	}
	return l
}

func (l *laidTable) weight(column int) string {
	if column < l.bold {
		return "B"
	}
	return ""
}

// fit sets the widths at the present size; false where words must be broken.
func (s *sheet) fit(l *laidTable) bool {
	n := len(l.t.Columns)
	least, most := make([]float64, n), make([]float64, n)
	measure := func(j int, text, weight string) {
		s.style(weight, l.size, dark)
		text = glue(printable(text))
		most[j] = max(most[j], s.f.GetStringWidth(text)+0.2)
		for _, w := range strings.Split(text, " ") {
			least[j] = max(least[j], s.f.GetStringWidth(w)+0.2)
		}
	}
	for j, c := range l.t.Columns {
		measure(j, columnLabel(c), "B")
	}
	for _, row := range l.t.Rows {
		for j, cell := range row {
			measure(j, cell, l.weight(j))
		}
	}
	room := s.width - columnGap*float64(n-1)
	l.widths = shareWidth(least, most, room)
	return total64(least) <= room
}

// shareWidth divides the room among columns that need at least and at most so
// much.
func shareWidth(least, most []float64, room float64) []float64 {
	out := make([]float64, len(least))
	sumLeast, sumMost := total64(least), total64(most)
	switch {
	case sumMost <= room: // all fits: the rest goes to all alike
		for j := range out {
			out[j] = most[j] + (room-sumMost)/float64(len(out))
		}
	case sumLeast <= room: // short columns come to all they need first, long texts share the rest
		copy(out, least)
		for left := room - sumLeast; left > 1e-6; {
			weight := 0.0
			for j := range out {
				if out[j] < most[j]-1e-9 {
					weight += math.Sqrt(most[j])
				}
			}
			if weight == 0 {
				break
			}
			part := left / weight
			for j := range out {
				if out[j] < most[j]-1e-9 {
					add := min(part*math.Sqrt(most[j]), most[j]-out[j])
					out[j], left = out[j]+add, left-add
				}
			}
		}
	default: // not even words fit: columns below an even share keep their words
		share := room / float64(len(out))
		free, over := room, 0.0
		for _, w := range least {
			if w <= share {
				free -= w
			} else {
				over += w
			}
		}
		for j, w := range least {
			out[j] = w
			if w > share {
				out[j] = free * w / over
			}
		}
	}
	return out
}

func total64(v []float64) float64 {
	sum := 0.0
	for _, x := range v {
		sum += x
	}
	return sum
}

// height is what a row of wrapped cells needs.
func (l *laidTable) height(cells [][]string) float64 {
	n := 1
	for _, c := range cells {
		n = max(n, len(c))
	}
	for _, c := range cells {
		if len(c) > 1 || strings.TrimSpace(c[0]) != "" {
			return float64(n)*lineHeight(l.size) + 2*rowPad
		}
	}
	return signRow
}

func (l *laidTable) top() float64 {
	return float64(len(l.caption))*lineHeight(bodySize) + l.height(l.head)
}

func (l *laidTable) bottom() float64 { return float64(len(l.says)) * lineHeight(smallSize) }

func (l *laidTable) whole() float64 {
	h := l.top() + l.bottom()
	for _, r := range l.rows {
		h += l.height(r)
	}
	return h
}

// smallTable is the height up to which a table is never cut.
func (s *sheet) smallTable() float64 { return 0.4 * (s.floor - topMargin) }

// leastOf is the height of the table's beginning: its head and two rows, or all
// of a small table.
func (s *sheet) leastOf(l *laidTable) float64 {
	h := l.top() + 2.2
	if w := l.whole(); w < s.smallTable() {
		return w + 2.2
	}
	for _, r := range l.rows[:min(2, len(l.rows))] {
		h += l.height(r)
	}
	return h
}

// table draws a table: a small one never over two pages, a long one with its
// head repeated, and the sentence under it never alone.
func (s *sheet) table(l *laidTable) {
	s.y += 2.2
	page := s.floor - topMargin
	if w := l.whole(); w < s.smallTable() {
		s.ensure(w)
	} else {
		s.ensure(min(s.leastOf(l), page))
	}
	s.tableHead(l, false)
	for i, r := range l.rows {
		h := l.height(r)
		need := h
		if i == len(l.rows)-1 {
			need += l.bottom()
		}
		if s.y+need > s.floor && s.y > topMargin+l.top() {
			s.newPage()
			s.tableHead(l, true)
		}
		s.tallRow(l, r)
	}
	if len(l.says) > 0 {
		s.y += 0.6
		s.style("", smallSize, soft)
		for _, line := range l.says {
			s.ensure(lineHeight(smallSize))
			s.style("", smallSize, soft)
			s.lines(sideMargin, []string{line}, smallSize)
		}
	}
	s.y += 2
}

func (s *sheet) tableHead(l *laidTable, again bool) {
	s.style("B", bodySize, dark)
	caption := l.caption
	if again && len(caption) > 0 {
		caption = s.wrap(l.t.Caption+" (continued)", s.width)
	}
	s.lines(sideMargin, caption, bodySize)
	s.row(l, l.head, "B")
	s.line(dark, 0.35, sideMargin, sideMargin+s.width)
}

// tallRow draws a row, in parts where it is higher than a page.
func (s *sheet) tallRow(l *laidTable, cells [][]string) {
	for s.y+l.height(cells) > s.floor {
		fit := int((s.floor - s.y - 2*rowPad) / lineHeight(l.size))
		if fit < 1 {
			s.newPage()
			s.tableHead(l, true)
			continue
		}
		part, rest, left := make([][]string, len(cells)), make([][]string, len(cells)), false
		for j, c := range cells {
			k := min(fit, len(c))
			part[j], rest[j] = c[:k], c[k:]
			left = left || len(rest[j]) > 0
		}
		if !left {
			break
		}
		s.row(l, part, "")
		s.newPage()
		s.tableHead(l, true)
		cells = rest
	}
	s.row(l, cells, "")
	s.line(rule, 0.2, sideMargin, sideMargin+s.width)
}

// row draws cells, numbers to the right.
func (s *sheet) row(l *laidTable, cells [][]string, weight string) {
	h, top, x := l.height(cells), s.y, sideMargin
	for j, c := range cells {
		w := weight
		if w == "" {
			w = l.weight(j)
		}
		s.style(w, l.size, dark)
		s.y = top + rowPad
		if weight == "B" { // heads stand on the line
			s.y = top + h - rowPad - float64(len(c))*lineHeight(l.size)
		}
		for _, line := range c {
			at := x
			if !l.t.Columns[j].Text {
				at += l.widths[j] - s.f.GetStringWidth(line)
			}
			s.lines(at, []string{line}, l.size)
		}
		x += l.widths[j] + columnGap
	}
	s.y = top + h
}

// wrap breaks a text into lines of at most w mm in the present font, between
// words, and within a word only where it is longer than a line.
func (s *sheet) wrap(text string, w float64) []string {
	var out []string
	line := ""
	for _, word := range strings.Split(glue(printable(text)), " ") {
		try := word
		if line != "" {
			try = line + " " + word
		}
		if s.f.GetStringWidth(try) <= w {
			line = try
			continue
		}
		if line != "" {
			out = append(out, line)
		}
		for s.f.GetStringWidth(word) > w {
			r := []rune(word)
			k := len(r) - 1
			for k > 1 && s.f.GetStringWidth(string(r[:k])) > w {
				k--
			}
			if k < 1 {
				break
			}
			out, word = append(out, string(r[:k])), string(r[k:])
		}
		line = word
	}
	return append(out, line)
}
