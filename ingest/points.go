package ingest

import (
	"math"
	"strings"

	"gaugelog/ingest/segment"
)

// point is the event as a line of events.lp. It carries a number beside its
// texts, because some servers store numbers only.
func (h *Happening) point() *segment.Point {
	p := &segment.Point{Measurement: "event"}
	if h.Gauge != "" {
		p.Tags = append(p.Tags, segment.Tag{Key: "gauge", Value: h.Gauge})
	}
	p.Tags = append(p.Tags, segment.Tag{Key: "kind", Value: h.Kind})
	p.Fields = append(p.Fields, text("detail", h.Detail))
	if h.From != 0 {
		p.Fields = append(p.Fields, segment.Field{Key: "from", Value: h.From})
	}
	p.Fields = append(p.Fields, segment.Field{Key: "n", Value: max(h.N, 1)})
	return p
}

// points are the mark's lines, all at its time.
func (m *Mark) points() []*segment.Point {
	one := segment.Field{Key: "n", Value: int64(1)}
	by, id := text("by", m.By), text("id", m.ID)
	if m.Withdraw != "" {
		return []*segment.Point{{Measurement: "withdraw",
			Fields: []segment.Field{by, text("id", m.Withdraw), one, text("why", m.Why)}}}
	}
	var all []*segment.Point
	for _, l := range m.Loads {
		all = append(all, l.point(by, id, m.Step))
	}
	if m.Step != "" && len(m.Loads) == 0 {
		all = append(all, &segment.Point{Measurement: "step",
			Fields: []segment.Field{by, id, one, text("name", m.Step)}})
	}
	if m.Act != "" {
		all = append(all, &segment.Point{Measurement: "touch",
			Tags:   []segment.Tag{{Key: "gauge", Value: m.Gauge}},
			Fields: []segment.Field{text("act", m.Act), by, id, one}})
	}
	if m.Note != "" {
		fields := []segment.Field{by, id, one}
		if m.Photo != "" {
			fields = append(fields, text("photo", m.Photo))
		}
		all = append(all, &segment.Point{Measurement: "note", Fields: append(fields, text("text", m.Note))})
	}
	return all
}

func (l *LoadValue) point(by, id segment.Field, step string) *segment.Point {
	p := &segment.Point{Measurement: "load",
		Tags:   []segment.Tag{{Key: "name", Value: l.Name}},
		Fields: []segment.Field{by, id}}
	if l.Kilogram != nil {
		p.Fields = append(p.Fields, segment.Field{Key: "kilogram", Value: *l.Kilogram})
	}
	p.Fields = append(p.Fields, segment.Field{Key: "newton", Value: l.Newton}, text("shown", l.Shown))
	if step != "" {
		p.Fields = append(p.Fields, text("step", step))
	}
	return p
}

func text(key, value string) segment.Field {
	return segment.Field{Key: key, Value: printable(value)}
}

func notNumber(v float64) bool { return math.IsNaN(v) || math.IsInf(v, 0) }

// printable makes a text that every line-protocol server takes and gives back:
// control characters become blanks, bytes that are no UTF-8 become U+FFFD, and
// a backslash at the end, which would escape the closing quote, gets a blank
// behind it.
func printable(s string) string {
	s = strings.ToValidUTF8(s, "\uFFFD")
	s = strings.Map(func(r rune) rune {
		if r < ' ' || r == 0x7f {
			return ' '
		}
		return r
	}, s)
	if strings.HasSuffix(s, `\`) {
		s += " "
	}
	return s
}
