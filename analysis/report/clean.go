package report

import "strings"

// clean makes every text of the document harmless to show: what a gauge, an
// operator or a rig file says may hold control characters, which would speak
// to a terminal, or marks that turn the direction of what follows.
func (d *Document) clean() {
	d.Title, d.Subtitle = shownText(d.Title), shownText(d.Subtitle)
	for i := range d.Sections {
		s := &d.Sections[i]
		s.Title, s.Lead = shownText(s.Title), shownText(s.Lead)
		for j, block := range s.Blocks {
			switch v := block.(type) {
			case Paragraph:
				v.Text = shownText(v.Text)
				s.Blocks[j] = v
			case List:
				v.Items = shownTexts(v.Items)
				s.Blocks[j] = v
			case Figure:
				v.Caption, v.Alt = shownText(v.Caption), shownText(v.Alt)
				s.Blocks[j] = v
			case Picture:
				v.Caption, v.Alt = shownText(v.Caption), shownText(v.Alt)
				s.Blocks[j] = v
			case Table:
				v.Caption, v.Says = shownText(v.Caption), shownText(v.Says)
				for k, row := range v.Rows {
					v.Rows[k] = shownTexts(row)
				}
				for k := range v.Columns {
					v.Columns[k].Name = shownText(v.Columns[k].Name)
				}
				s.Blocks[j] = v
			}
		}
	}
}

func shownTexts(all []string) []string {
	out := make([]string, len(all))
	for i, s := range all {
		out[i] = shownText(s)
	}
	return out
}

// shownText puts a blank for control characters and drops the marks that turn
// the direction of writing (Unicode's bidirectional embeddings, overrides and
// isolates).
func shownText(s string) string {
	return strings.Map(func(r rune) rune {
		switch {
		case r < ' ' || r >= 0x7f && r < 0xa0 || r == 0x2028 || r == 0x2029:
			return ' '
		case r >= 0x202a && r <= 0x202e || r >= 0x2066 && r <= 0x2069:
			return -1
		}
		return r
	}, strings.ToValidUTF8(s, "�"))
}
