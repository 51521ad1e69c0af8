package config

import (
	"bytes"
	"errors"
	"strings"
	"unicode/utf8"

	"go.yaml.in/yaml/v3"
)

// offset returns the byte at which a line and column (in characters, both from
// 1) begin, as the YAML reader counts them.
func offset(text []byte, line, col int) int {
	at := 0
	if bytes.HasPrefix(text, []byte("\ufeff")) {
		at = len("\ufeff")
	}
	for ; line > 1 && at < len(text); line-- {
		for at < len(text) {
			r, size := utf8.DecodeRune(text[at:])
			at += size
			if r == '\r' && at < len(text) && text[at] == '\n' {
				at++
			}
			if isBreak(r) {
				break
			}
		}
	}
	for ; col > 1 && at < len(text); col-- {
		_, size := utf8.DecodeRune(text[at:])
		at += size
	}
	return at
}

func isBreak(r rune) bool {
	return r == '\n' || r == '\r' || r == '\u0085' || r == '\u2028' || r == '\u2029'
}

var errSpansLines = errors.New("a text over several lines stands there")

// extent returns the bytes that node n takes up: a scalar on one line, or a
// list or group in brackets. What spans lines without brackets is an error.
func extent(text []byte, n *yaml.Node) (from, to int, err error) {
	from = offset(text, n.Line, n.Column)
	switch {
	case n.Kind == yaml.AliasNode || n.Anchor != "" || n.Style&yaml.TaggedStyle != 0:
		return 0, 0, errors.New("an anchor, alias or tag stands there")
	case n.Kind == yaml.ScalarNode:
		to, err = scalarEnd(text, from, n)
		return from, to, err
	case n.Style&yaml.FlowStyle != 0:
		to, err = flowEnd(text, from)
		return from, to, err
	}
	return 0, 0, errors.New(kindName(n) + " over several lines stands there")
}

func scalarEnd(text []byte, from int, n *yaml.Node) (int, error) {
	switch {
	case n.Style&(yaml.LiteralStyle|yaml.FoldedStyle) != 0:
		return 0, errSpansLines
	case n.Style&(yaml.DoubleQuotedStyle|yaml.SingleQuotedStyle) != 0:
		if from >= len(text) || text[from] != '"' && text[from] != '\'' {
			return 0, errors.New("the opening quote is not where it was read")
		}
		return quoteEnd(text, from)
	}
	if !bytes.HasPrefix(text[from:], []byte(n.Value)) {
		return 0, errSpansLines
	}
	return from + len(n.Value), nil
}

// quoteEnd returns the byte behind the closing quote of the text that opens at
// from, if it closes on the same line.
func quoteEnd(text []byte, from int) (int, error) {
	quote := text[from]
	for i := from + 1; i < len(text); i++ {
		switch c := text[i]; {
		case c == '\n' || c == '\r':
			return 0, errSpansLines
		case c == '\\' && quote == '"':
			i++
		case c == quote && quote == '\'' && i+1 < len(text) && text[i+1] == quote:
			i++
		case c == quote:
			return i + 1, nil
		}
	}
	return 0, errors.New("the closing quote is missing")
}

// flowEnd returns the byte behind the bracket that closes the one at from.
func flowEnd(text []byte, from int) (int, error) {
	depth := 0
	fresh := true // a token may begin here: only then does a quote open a text
	for i := from; i < len(text); i++ {
		switch c := text[i]; c {
		case '{', '[':
			depth++
			fresh = true
		case '}', ']':
			depth--
			if depth == 0 {
				return i + 1, nil
			}
			fresh = false
		case ',', ':':
			fresh = true
		case ' ', '\t', '\n', '\r':
		case '#':
			if i > 0 && strings.IndexByte(" \t\n\r", text[i-1]) >= 0 {
				for i+1 < len(text) && text[i+1] != '\n' {
					i++
				}
			} else {
				fresh = false
			}
		case '"', '\'':
			if fresh {
				end, err := quoteEnd(text, i)
				if err != nil {
					return 0, err
				}
				i = end - 1
			}
			fresh = false
		default:
			fresh = false
		}
	}
	return 0, errors.New("the closing bracket is missing")
}

// written is a scalar or a list of scalars as YAML text on one line.
func written(n *yaml.Node) string {
	if n.Kind == yaml.ScalarNode {
		return scalarText(n.Value)
	}
	items := make([]string, len(n.Content))
	for i, item := range n.Content {
		items[i] = scalarText(item.Value)
	}
	return "[" + strings.Join(items, ", ") + "]"
}

// scalarText writes a text plainly where every YAML reader takes it back as
// the same text, in every place; else in double quotes.
func scalarText(s string) string {
	if plainScalar(s) {
		return s
	}
	var b strings.Builder
	b.WriteByte('"')
	for _, r := range s {
		switch {
		case r == '"' || r == '\\':
			b.WriteByte('\\')
			b.WriteRune(r)
		case r == '\n':
			b.WriteString(`\n`)
		case r == '\r':
			b.WriteString(`\r`)
		case r == '\t':
			b.WriteString(`\t`)
		case r < 0x20 || r == 0x7f || r >= 0x80 && r < 0xa0 || r == '\u2028' || r == '\u2029' || r == '\ufeff' || r >= 0xd800 && r < 0xe000 || r == 0xfffe || r == 0xffff:
			b.WriteString(hexEscape(r))
		default:
			b.WriteRune(r)
		}
	}
	b.WriteByte('"')
	return b.String()
}

func hexEscape(r rune) string {
	const digits = "0123456789abcdef"
	out := []byte(`\u0000`)
	for i := 5; i > 1; i-- {
		out[i] = digits[r&0xf]
		r >>= 4
	}
	return string(out)
}

// plainScalar holds for letters, digits and a few signs that mean nothing to
// YAML; words that some reader takes for a truth value or nothing are quoted.
func plainScalar(s string) bool {
	switch strings.ToLower(s) {
	case "", "on", "off", "yes", "no", "y", "n", "true", "false", "null":
		return false
	}
	for i := range len(s) {
		c := s[i]
		switch {
		case c >= 'a' && c <= 'z', c >= 'A' && c <= 'Z', c >= '0' && c <= '9':
		case c == '.' || c == '/' || c == '_' || c == '(' || c == ')' || c == '+':
		case c == '-' && (i > 0 || len(s) > 1 && s[1] >= '0' && s[1] <= '9'):
		case c == ' ' && i > 0 && i < len(s)-1:
		case c == ':' && i > 0 && i < len(s)-1 && s[i+1] != ' ' && s[i-1] != ' ' && !strings.Contains(s, " "):
		default:
			return false
		}
	}
	return true
}
