package report

import (
	"strings"

	"gaugelog/analysis/unitsystem"
)

// clean makes every text of the document harmless to show: what a gauge, an
// operator or a rig file says may hold control characters, which would speak
// to a terminal, or marks that turn the direction of what follows. The
// quantities in sentences come out in the report's units.
func (d *Document) clean(u units) {
	d.Title, d.Subtitle = shownText(u, d.Title), shownText(u, d.Subtitle)
	for i := range d.Sections {
		s := &d.Sections[i]
		s.Title, s.Lead = shownText(u, s.Title), shownText(u, s.Lead)
		for j, block := range s.Blocks {
			switch v := block.(type) {
			case Paragraph:
				v.Text = shownText(u, v.Text)
				s.Blocks[j] = v
			case List:
				v.Items = shownTexts(u, v.Items)
				s.Blocks[j] = v
			case Figure:
				v.Caption, v.Alt = shownText(u, v.Caption), shownText(u, v.Alt)
				s.Blocks[j] = v
			case Picture:
				v.Caption, v.Alt = shownText(u, v.Caption), shownText(u, v.Alt)
				s.Blocks[j] = v
			case Table:
				v.Caption, v.Says = shownText(u, v.Caption), shownText(u, v.Says)
				for k, row := range v.Rows {
					v.Rows[k] = shownTexts(u, row)
				}
				for k := range v.Columns {
					v.Columns[k].Name = shownText(u, v.Columns[k].Name)
				}
				s.Blocks[j] = v
			}
		}
	}
}

func shownTexts(u units, all []string) []string {
	out := make([]string, len(all))
	for i, s := range all {
		out[i] = shownText(u, s)
	}
	return out
}

// shownText puts a blank for control characters and drops the marks that turn
// the direction of writing (Unicode's bidirectional embeddings, overrides and
// isolates).
func shownText(u units, s string) string {
	return strings.Map(func(r rune) rune {
		switch {
		case r < ' ' || r >= 0x7f && r < 0xa0 || r == 0x2028 || r == 0x2029:
			return ' '
		case r >= 0x202a && r <= 0x202e || r >= 0x2066 && r <= 0x2069:
			return -1
		}
		return r
	}, unitsystem.Text(string(u), strings.ToValidUTF8(s, "�")))
}
