package guess

import (
	"bytes"
	"cmp"
	"slices"
	"strconv"
	"strings"

	"go.yaml.in/yaml/v3"

	"gaugelog/config"
)

// YAML is the proposal as an entry of the rig file's frames list, with what is
// sure and unsure as comments above it, ready to paste under frames:.
func (p Proposal) YAML() string {
	var b bytes.Buffer
	for _, s := range p.Sure {
		b.WriteString("  # sure: " + s + "\n")
	}
	for _, s := range p.Unsure {
		b.WriteString("  # not sure: " + s + "\n")
	}
	list := &yaml.Node{Kind: yaml.SequenceNode, Content: []*yaml.Node{frameNode(p.Frame)}}
	var entry bytes.Buffer
	e := yaml.NewEncoder(&entry)
	e.SetIndent(2)
	if err := e.Encode(list); err != nil {
		panic(err) // a tree made here always encodes
	}
	for _, line := range strings.SplitAfter(entry.String(), "\n") {
		if line != "" {
			b.WriteString("  " + line)
		}
	}
	return b.String()
}

// group builds a mapping on one line.
type group struct{ n *yaml.Node }

func newGroup() group { return group{&yaml.Node{Kind: yaml.MappingNode, Style: yaml.FlowStyle}} }

func (g group) node(key string, n *yaml.Node) {
	g.n.Content = append(g.n.Content, &yaml.Node{Kind: yaml.ScalarNode, Value: key}, n)
}

// text adds a text where there is one; style 0 leaves the quoting to YAML.
func (g group) text(key, value string, style yaml.Style) {
	if value != "" {
		g.node(key, &yaml.Node{Kind: yaml.ScalarNode, Tag: "!!str", Value: value, Style: style})
	}
}

// plain adds a number or word as it stands.
func (g group) plain(key, value string) {
	if value != "" {
		g.node(key, &yaml.Node{Kind: yaml.ScalarNode, Value: value})
	}
}

func (g group) whole(key string, v int) { g.plain(key, strconv.Itoa(v)) }

func (g group) maybe(key string, v *int) {
	if v != nil {
		g.whole(key, *v)
	}
}

// bytes adds a text with control characters as escapes in double quotes, or in
// single quotes where it holds escapes of its own.
func (g group) bytes(key, value string) {
	style := yaml.DoubleQuotedStyle
	if strings.Contains(value, `\`) {
		style = yaml.SingleQuotedStyle
		value = escapeControls(value)
	}
	g.text(key, value, style)
}

func (g group) words(key string, m map[string]string) {
	if len(m) == 0 {
		return
	}
	sub := newGroup()
	var keys []string
	for k := range m {
		keys = append(keys, k)
	}
	slices.Sort(keys)
	for _, k := range keys {
		sub.n.Content = append(sub.n.Content,
			&yaml.Node{Kind: yaml.ScalarNode, Tag: "!!str", Value: k, Style: yaml.DoubleQuotedStyle},
			&yaml.Node{Kind: yaml.ScalarNode, Tag: "!!str", Value: m[k], Style: quotesFor(m[k])})
	}
	g.node(key, sub.n)
}

// quotesFor puts signs and digits in quotes, as they are texts here.
func quotesFor(s string) yaml.Style {
	if strings.Trim(s, "abcdefghijklmnopqrstuvwxyz-") != "" || s == "-" {
		return yaml.DoubleQuotedStyle
	}
	return 0
}

func escapeControls(s string) string {
	var b strings.Builder
	for _, c := range []byte(s) {
		switch {
		case c == '\r':
			b.WriteString(`\r`)
		case c == '\n':
			b.WriteString(`\n`)
		case c < 0x20:
			b.WriteString(`\x` + strings.ToUpper(strconv.FormatInt(int64(c)+0x100, 16)[1:]))
		default:
			b.WriteByte(c)
		}
	}
	return b.String()
}

func frameNode(f config.Frame) *yaml.Node {
	g := newGroup()
	g.text("name", f.Name, 0)
	g.plain("kind", f.Kind)
	g.bytes("request", f.Request)
	if f.Button {
		g.plain("button", "true")
	}
	g.bytes("start", f.Start)
	g.bytes("end", f.End)
	g.text("pattern", f.Pattern, yaml.SingleQuotedStyle)
	g.plain("unit", f.Unit)
	g.words("units", f.Units)
	if c := f.Checksum; c != nil {
		sub := newGroup()
		sub.plain("kind", c.Kind)
		sub.maybe("from", c.From)
		sub.maybe("to", c.To)
		sub.maybe("at", c.At)
		sub.plain("order", c.Order)
		g.node("checksum", sub.n)
	}
	kindParts(f).into(g)
	if l := f.Line; l != (config.Line{}) {
		sub := newGroup()
		sub.whole("baud", cmp.Or(l.Baud, config.DefaultBaud))
		sub.whole("data_bits", cmp.Or(l.DataBits, config.DefaultDataBits))
		sub.plain("parity", cmp.Or(l.Parity, "none"))
		sub.plain("stop_bits", cmp.Or(l.StopBits, "1"))
		sub.plain("dtr", l.DTR)
		sub.plain("rts", l.RTS)
		g.node("line", sub.n)
	}
	return g.n
}

// kindParts is the group that only one kind of frame has.
type kindParts config.Frame

func (f kindParts) into(g group) {
	sub := newGroup()
	switch {
	case f.Nibbles != nil:
		n := f.Nibbles
		sub.whole("count", n.Count)
		sub.plain("coding", n.Coding)
		sub.plain("order", n.Order)
		sub.text("header", n.Header, yaml.DoubleQuotedStyle)
		nibble(sub, "sign", n.Sign)
		digits := newGroup()
		digits.whole("at", n.Digits.At)
		digits.whole("count", n.Digits.Count)
		digits.plain("first", n.Digits.First)
		if n.Digits.Decimals > 0 {
			digits.whole("decimals", n.Digits.Decimals)
		}
		sub.node("digits", digits.n)
		nibble(sub, "point", n.Point)
		nibble(sub, "unit", n.Unit)
		g.node("nibbles", sub.n)
	case f.Binary != nil:
		b := f.Binary
		sub.whole("length", b.Length)
		sub.text("sync", b.Sync, yaml.DoubleQuotedStyle)
		sub.whole("offset", b.Offset)
		sub.whole("width", b.Width)
		sub.plain("order", b.Order)
		sub.plain("type", b.Type)
		sub.plain("scale", shown(b.Scale))
		if len(b.Flags) > 0 {
			list := &yaml.Node{Kind: yaml.SequenceNode, Style: yaml.FlowStyle}
			for _, f := range b.Flags {
				flag := newGroup()
				flag.whole("byte", f.Byte)
				flag.whole("bit", f.Bit)
				flag.plain("means", f.Means)
				list.Content = append(list.Content, flag.n)
			}
			sub.node("flags", list)
		}
		g.node("binary", sub.n)
	case f.Modbus != nil:
		m := f.Modbus
		sub.plain("function", m.Function)
		sub.maybe("address", m.Address)
		sub.whole("register", m.Register)
		sub.plain("type", m.Type)
		sub.plain("word_order", m.WordOrder)
		sub.plain("scale", shown(m.Scale))
		g.node("modbus", sub.n)
	case f.SCPI != nil:
		sub.text("query", f.SCPI.Query, yaml.DoubleQuotedStyle)
		g.node("scpi", sub.n)
	}
}

func nibble(g group, key string, n *config.NibbleField) {
	if n != nil {
		sub := newGroup()
		sub.whole("at", n.At)
		sub.words("codes", n.Codes)
		g.node(key, sub.n)
	}
}

func shown(n *config.Number) string {
	if n == nil {
		return ""
	}
	return n.Shown
}
