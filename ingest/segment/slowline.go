package segment

import (
	"bytes"
	"errors"
	"fmt"
	"math"

	"github.com/influxdata/line-protocol/v2/lineprotocol"
)

// entryEnd returns the length of the first line of text with its newline, or
// -1 where text holds no whole one. A newline inside a quoted string field does
// not end a line; own files never hold one.
func entryEnd(text []byte) int {
	nl := bytes.IndexByte(text, '\n')
	if nl < 0 {
		return -1
	}
	if bytes.IndexByte(text[:nl], '"') < 0 || comment(text[:nl]) {
		return nl + 1
	}
	p := blankEnd(text, 0)
	// Measurement and tags: up to the first blank that is not escaped.
	for ; p < len(text) && text[p] != ' ' && text[p] != '\n'; p++ {
		if text[p] == '\\' && p+1 < len(text) && text[p+1] != '\n' {
			p++
		}
	}
	// Fields: a quote opens a string directly behind an equals sign only.
	for p < len(text) {
		switch {
		case text[p] == '\n':
			return p + 1
		case text[p] == '"' && text[p-1] == '=':
			p++
			for p < len(text) && text[p] != '"' {
				if text[p] == '\\' {
					p++
				}
				p++
			}
		}
		p++
	}
	return -1
}

func blankEnd(text []byte, p int) int {
	for p < len(text) && text[p] == ' ' {
		p++
	}
	return p
}

func comment(line []byte) bool {
	p := blankEnd(line, 0)
	return p < len(line) && line[p] == '#'
}

var (
	errNoTime = errors.New("no time stamp")
	errTwo    = errors.New("more than one point on a line")
	// errControl: a comment that is no text.
	errControl = errors.New("control characters in a comment")
)

// slowLine decodes one line, with its newline, through the library's decoder,
// and refuses what that takes but no careful writer writes: hexadecimal
// numbers, underscores in numbers, repeated tags or fields, no stamp. A blank
// line or a comment gives ok false and no error.
func slowLine(line []byte) (rec Record, ok bool, err error) {
	trimmed := bytes.TrimRight(line, "\r\n")
	if len(bytes.TrimLeft(trimmed, " ")) == 0 {
		return rec, false, nil
	}
	if comment(line) {
		if bytes.ContainsFunc(trimmed, func(r rune) bool { return r < ' ' && r != '\t' }) {
			return rec, false, errControl // nobody writes such a comment: it is rot
		}
		return rec, false, nil
	}
	d := lineprotocol.NewDecoderWithBytes(line)
	if !d.Next() {
		return rec, false, nil
	}
	p := new(Point)
	measurement, err := d.Measurement()
	if err != nil {
		return rec, false, err
	}
	p.Measurement = string(measurement)
	for {
		key, value, err := d.NextTag()
		if err != nil {
			return rec, false, err
		}
		if key == nil {
			break
		}
		tag := Tag{string(key), string(value)}
		for _, t := range p.Tags {
			if t.Key == tag.Key {
				return rec, false, fmt.Errorf("tag %q stands twice", tag.Key)
			}
		}
		p.Tags = append(p.Tags, tag)
	}
	if err := slowFields(d, p); err != nil {
		return rec, false, err
	}
	raw, err := d.TimeBytes()
	if err != nil {
		return rec, false, err
	}
	if raw == nil {
		return rec, false, errNoTime
	}
	t, err := lineprotocol.NewValueFromBytes(lineprotocol.Int, raw)
	if err != nil {
		return rec, false, fmt.Errorf("time stamp %q: %w", raw, err)
	}
	if d.Next() {
		return rec, false, errTwo
	}
	rec.Time = t.IntV()
	rec.Raw = rec.Time
	return rec, true, rec.name(p)
}

func slowFields(d *lineprotocol.Decoder, p *Point) error {
	for {
		key, kind, data, err := d.NextFieldBytes()
		if err != nil {
			return err
		}
		if key == nil {
			break
		}
		name := string(key)
		for _, f := range p.Fields {
			if f.Key == name {
				return fmt.Errorf("field %q stands twice", name)
			}
		}
		if kind == lineprotocol.Float && !plainDecimal(data) {
			return fmt.Errorf("field %q: %q is no plain decimal number", name, data)
		}
		if kind == lineprotocol.String {
			data = bytes.Clone(data)
		}
		v, err := lineprotocol.NewValueFromBytes(kind, data)
		if err != nil {
			return fmt.Errorf("field %q: %w", name, err)
		}
		p.Fields = append(p.Fields, Field{name, v.Interface()})
	}
	if len(p.Fields) == 0 {
		return errors.New("no field")
	}
	return nil
}

// plainDecimal accepts digits, one point and an exponent, as every
// line-protocol server does.
func plainDecimal(s []byte) bool {
	p, digits := 0, 0
	take := func() {
		for p < len(s) && s[p] >= '0' && s[p] <= '9' {
			p++
			digits++
		}
	}
	if p < len(s) && s[p] == '-' {
		p++
	}
	take()
	if p < len(s) && s[p] == '.' {
		p++
		take()
	}
	if digits == 0 {
		return false
	}
	if p < len(s) && (s[p] == 'e' || s[p] == 'E') {
		p++
		if p < len(s) && (s[p] == '-' || s[p] == '+') {
			p++
		}
		digits = 0
		take()
		if digits == 0 {
			return false
		}
	}
	return p == len(s)
}

var kinds = map[string]struct {
	kind Kind
	tag  string
}{
	"indication": {Indication, "gauge"},
	"ambient":    {Ambient, "probe"},
	"load":       {Load, "name"},
	"note":       {Note, ""},
	"touch":      {Touch, "gauge"},
	"withdraw":   {Withdraw, ""},
	"event":      {Event, "kind"},
	"step":       {StepMark, ""},
}

// RecordOf makes a Record of a point that came another way than from a file.
func RecordOf(p *Point, at int64) (Record, error) {
	rec := Record{Time: at, Raw: at}
	return rec, rec.name(p)
}

// name fills in what a Record says of its Point.
func (rec *Record) name(p *Point) error {
	k, known := kinds[p.Measurement]
	if !known {
		rec.Kind, rec.Point = Other, p
		return nil
	}
	rec.Kind, rec.Point = k.kind, p
	for _, t := range p.Tags {
		if t.Key == k.tag {
			rec.Name = t.Value
		}
	}
	if k.tag != "" && rec.Name == "" {
		return fmt.Errorf("%s without the tag %q", p.Measurement, k.tag)
	}
	if rec.Kind != Indication {
		return nil
	}
	v, ok := p.Value("mm")
	mm, isFloat := v.(float64)
	if i, isInt := v.(int64); isInt {
		// Foreign writers mark whole numbers as integers.
		mm, isFloat = float64(i), true
	}
	if !ok || !isFloat {
		return errors.New("indication without the number mm")
	}
	rec.MM = mm + 0 // -0 is the reading 0
	if len(p.Fields) == 1 && len(p.Tags) == 1 {
		rec.Point = nil
	}
	return nil
}

// Value returns the value of a field, false where there is none of that key.
func (p *Point) Value(key string) (any, bool) {
	for _, f := range p.Fields {
		if f.Key == key {
			return f.Value, true
		}
	}
	return nil, false
}

// Tag returns the value of a tag, empty where there is none of that key.
func (p *Point) Tag(key string) string {
	for _, t := range p.Tags {
		if t.Key == key {
			return t.Value
		}
	}
	return ""
}

// toMicro returns mm as whole millionths where it is exactly the decimal
// number of at most six places that those are.
func toMicro(mm float64) (int64, bool) {
	if math.Abs(mm) >= 1e9 {
		return 0, false
	}
	v := math.Round(mm * 1e6)
	return int64(v), v/1e6 == mm
}
