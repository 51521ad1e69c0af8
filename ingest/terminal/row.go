package terminal

import (
	"strings"
	"unicode"

	"charm.land/lipgloss/v2"

	"gaugelog/ingest/answer"
)

// role says what a piece of text is, from which its look follows.
type role uint8

const (
	plain role = iota
	strong
	quiet
	normal
	abnormal
	danger
)

// looks are the roles' styles, in the terminal's own sixteen colours.
var looks = [...]lipgloss.Style{
	plain:    lipgloss.NewStyle(),
	strong:   lipgloss.NewStyle().Bold(true),
	quiet:    lipgloss.NewStyle().Faint(true),
	normal:   lipgloss.NewStyle().Foreground(lipgloss.Green),
	abnormal: lipgloss.NewStyle().Foreground(lipgloss.Black).Background(lipgloss.Yellow),
	danger:   lipgloss.NewStyle().Bold(true).Foreground(lipgloss.BrightWhite).Background(lipgloss.Red),
}

func roleOf(t answer.Tone) role {
	switch t.Class {
	case answer.Normal.Class:
		return normal
	case answer.Abnormal.Class:
		return abnormal
	case answer.Danger.Class:
		return danger
	}
	return plain
}

// piece is text of one look; row is one line of the screen.
type piece struct {
	text string
	role role
}

type row []piece

func (r row) width() (n int) {
	for _, p := range r {
		n += lipgloss.Width(p.text)
	}
	return n
}

// text is the row with its looks.
func (r row) text() string {
	var b strings.Builder
	for _, p := range r {
		if p.role == plain {
			b.WriteString(p.text)
		} else {
			b.WriteString(looks[p.role].Render(p.text))
		}
	}
	return b.String()
}

// padded is the row filled with blanks, or cut, to a width.
func (r row) padded(width int) row {
	out, left := row{}, width
	for _, p := range r {
		p.text = cut(p.text, left)
		if w := lipgloss.Width(p.text); w <= left {
			out, left = append(out, p), left-w
		}
	}
	if left > 0 {
		out = append(out, piece{strings.Repeat(" ", left), plain})
	}
	return out
}

// tag is a tone's word in brackets, so that it stands out without colour too.
func tag(t answer.Tone) []piece {
	if t.Class == "" {
		return nil
	}
	return []piece{{"[" + t.Word + "]", roleOf(t)}, {" ", plain}}
}

// paragraph sets text into rows of a width: lead first, then the words, with the
// rows behind the first moved in by indent.
func paragraph(width, indent int, lead []piece, text string, as role) []row {
	width = max(width, indent+1)
	line, used := append(row{}, lead...), row(lead).width()
	var out []row
	empty := true // of words
	for _, word := range strings.Fields(text) {
		for word != "" {
			gap := 1
			if empty {
				gap = 0
			}
			if w := lipgloss.Width(word); used+gap+w <= width {
				line = append(line, piece{strings.Repeat(" ", gap) + word, as})
				used, empty, word = used+gap+w, false, ""
				continue
			}
			if empty && used <= indent {
				// A word longer than a row: it is cut.
				part := cutHard(word, width-used)
				line, word = append(line, piece{part, as}), word[len(part):]
			}
			out = append(out, line)
			line, used, empty = row{{strings.Repeat(" ", indent), plain}}, indent, true
		}
	}
	if !empty || used > indent || len(out) == 0 {
		out = append(out, line)
	}
	return out
}

// cut shortens a text to a width, with a sign that it does.
func cut(text string, width int) string {
	if lipgloss.Width(text) <= width {
		return text
	}
	switch width {
	case 1:
		return "…"
	case 0:
		return ""
	}
	return cutHard(text, width-1) + "…"
}

// cutHard is the longest beginning that fits a width, one letter at least.
func cutHard(text string, width int) string {
	end, used := 0, 0
	for i, r := range text {
		w := lipgloss.Width(string(r))
		if used+w > width && end > 0 {
			break
		}
		used, end = used+w, i+len(string(r))
	}
	return text[:end]
}

// clean takes out of a text whatever could steer a terminal or turn its lines
// about: control characters of both sets, marks of direction, line separators.
func clean(text string) string {
	return strings.Map(func(r rune) rune {
		switch {
		case r == '\u202f' || r == '\u00a0':
			return ' '
		case r == unicode.ReplacementChar, unicode.IsControl(r), unicode.Is(unicode.Cf, r), unicode.Is(unicode.Zl, r), unicode.Is(unicode.Zp, r):
			return -1
		}
		return r
	}, strings.ToValidUTF8(text, ""))
}

// ascii puts plain letters in the place of others, for terminals that have no more.
func ascii(text string) string {
	return strings.Map(func(r rune) rune {
		switch {
		case r < 0x80:
			return r
		case r >= 0x2580 && r <= 0x259f: // blocks
			return '*'
		}
		if k, ok := plainer[r]; ok {
			return k
		}
		return '?'
	}, text)
}

var plainer = map[rune]rune{'−': '-', '–': '-', '…': '.', '°': ' ', '±': '~', '│': '|', '└': '+', '─': '-', '┤': '+', '┬': '+', '↑': '^', '↓': 'v', '←': '<', '→': '>', '·': ' '}
