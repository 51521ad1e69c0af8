package segment

import (
	"errors"
	"fmt"
	"math"
	"time"

	"github.com/influxdata/line-protocol/v2/lineprotocol"
)

// ErrClockBack says that a stamp lies more than a second before the last one
// of the same gauge: the clock was set back. Nothing was taken. Close the
// segment and go on in a new one, where stamps start afresh.
var ErrClockBack = errors.New("the clock was set back")

// ErrBlockFull says that a line does not fit in the block any more. Nothing
// was taken; call Checkpoint and append it again.
var ErrBlockFull = errors.New("the block is full")

// clockBack is how far a stamp may lie before its predecessor and still be
// taken for jitter rather than for a clock set back, in ns.
const clockBack = int64(time.Second)

// Shown is an indication as appended: the ordinary one has only Gauge, MM and
// Time.
type Shown struct {
	Gauge string
	MM    float64 // mm
	Time  int64   // ns since 1970 UTC
	// Shown and Unit are what the gauge displayed, written where Unit is not
	// empty; Status is written where not empty.
	Shown  float64
	Unit   string
	Status string
}

type stampKey struct{ measurement, name string }

// Stamps holds the last stamp of each gauge, so that stamps of one gauge
// strictly increase, across segments where they share it. The zero value is
// ready. Not safe for use by several goroutines.
type Stamps struct{ last map[stampKey]int64 }

// next returns the stamp to write for t: t, or one nanosecond after the last
// where t is not later than that.
func (s *Stamps) next(measurement, name string, t int64) (int64, error) {
	last, seen := s.last[stampKey{measurement, name}]
	switch {
	case !seen || t > last:
		return t, nil
	case last-t > clockBack || last-t < 0:
		return 0, fmt.Errorf("%w: %s %q at %s comes after %s", ErrClockBack, measurement, name,
			instant(t), instant(last))
	}
	return last + 1, nil
}

func (s *Stamps) took(measurement, name string, t int64) {
	if s.last == nil {
		s.last = make(map[stampKey]int64)
	}
	s.last[stampKey{measurement, name}] = t
}

// Forget drops all last stamps: after ErrClockBack, before the new segment.
func (s *Stamps) Forget() { clear(s.last) }

// lineEncoder appends lines to a buffer, one whole line or none.
type lineEncoder struct {
	enc     lineprotocol.Encoder
	scratch []byte
	stamps  *Stamps
}

func instant(t int64) string { return time.Unix(0, t).UTC().Format("2006-01-02T15:04:05.999999999Z") }

// indication appends one indication and returns the stamp it got.
func (e *lineEncoder) indication(buf []byte, in *Shown) ([]byte, int64, error) {
	t, err := e.stamps.next("indication", in.Gauge, in.Time)
	if err != nil {
		return buf, 0, err
	}
	e.enc.SetBuffer(buf)
	e.enc.StartLine("indication")
	e.enc.AddTag("gauge", in.Gauge)
	if err := e.float("mm", in.MM); err != nil {
		return buf, 0, fmt.Errorf("indication of gauge %q: %w", in.Gauge, err)
	}
	if in.Unit != "" {
		if err := e.float("shown", in.Shown); err != nil {
			return buf, 0, fmt.Errorf("indication of gauge %q: %w", in.Gauge, err)
		}
		if err := e.text("unit", in.Unit); err != nil {
			return buf, 0, err
		}
	}
	if in.Status != "" {
		if err := e.text("status", in.Status); err != nil {
			return buf, 0, err
		}
	}
	return e.finish(buf, "indication", in.Gauge, t)
}

// ambient appends one reading of a probe; a NaN quantity is left out.
func (e *lineEncoder) ambient(buf []byte, probe string, celsius, humidity float64, at int64) ([]byte, int64, error) {
	t, err := e.stamps.next("ambient", probe, at)
	if err != nil {
		return buf, 0, err
	}
	e.enc.SetBuffer(buf)
	e.enc.StartLine("ambient")
	e.enc.AddTag("probe", probe)
	if !math.IsNaN(celsius) {
		err = e.float("celsius", celsius)
	}
	if err == nil && !math.IsNaN(humidity) {
		err = e.float("humidity_percent", humidity)
	}
	if err != nil {
		return buf, 0, fmt.Errorf("reading of probe %q: %w", probe, err)
	}
	return e.finish(buf, "ambient", probe, t)
}

// point appends any line.
func (e *lineEncoder) point(buf []byte, p *Point, at int64) ([]byte, int64, error) {
	if !plainWord(p.Measurement) {
		return buf, 0, fmt.Errorf("measurement %q may hold letters, digits and underscores only", p.Measurement)
	}
	series := seriesName(p)
	t, err := e.stamps.next(p.Measurement, series, at)
	if err != nil {
		return buf, 0, err
	}
	e.enc.SetBuffer(buf)
	e.enc.StartLine(p.Measurement)
	for _, tag := range p.Tags {
		e.enc.AddTag(tag.Key, tag.Value)
	}
	for i, f := range p.Fields {
		for _, g := range p.Fields[:i] {
			if g.Key == f.Key {
				return buf, 0, fmt.Errorf("%s: field %q given twice", p.Measurement, f.Key)
			}
		}
		switch v := f.Value.(type) {
		case float64:
			err = e.float(f.Key, v)
		case string:
			err = e.text(f.Key, v)
		case int64:
			e.enc.AddField(f.Key, lineprotocol.IntValue(v))
		case uint64:
			e.enc.AddField(f.Key, lineprotocol.UintValue(v))
		case bool:
			e.enc.AddField(f.Key, lineprotocol.BoolValue(v))
		default:
			err = fmt.Errorf("field %q: a %T cannot be written (string, float64, int64, uint64, bool)", f.Key, v)
		}
		if err != nil {
			return buf, 0, fmt.Errorf("%s: %w", p.Measurement, err)
		}
	}
	return e.finish(buf, p.Measurement, series, t)
}

func (e *lineEncoder) float(key string, v float64) error {
	value, ok := lineprotocol.FloatValue(v)
	if !ok {
		return fmt.Errorf("field %q is %v, no number", key, v)
	}
	e.enc.AddField(key, value)
	return nil
}

// text adds a string field. Control characters are refused: servers differ on
// them, and a raw NUL would pass the encoder.
func (e *lineEncoder) text(key, s string) error {
	for i := 0; i < len(s); i++ {
		if c := s[i]; (c < ' ' && c != '\n' && c != '\t' && c != '\r') || c == 0x7f {
			return fmt.Errorf("field %q: control character 0x%02x in %q", key, c, s)
		}
	}
	if len(s) > 0 && s[len(s)-1] == '\\' {
		// A backslash before the closing quote is an escape to some servers.
		return fmt.Errorf("field %q: %q may not end in a backslash", key, s)
	}
	e.scratch = append(e.scratch[:0], s...)
	value, err := lineprotocol.NewValueFromBytes(lineprotocol.String, e.scratch)
	if err != nil {
		return fmt.Errorf("field %q: %w", key, err)
	}
	e.enc.AddField(key, value)
	return nil
}

// finish ends the line and takes it only if the encoder had nothing against it.
func (e *lineEncoder) finish(buf []byte, measurement, name string, t int64) ([]byte, int64, error) {
	e.enc.EndLine(time.Unix(0, t))
	if err := e.enc.Err(); err != nil {
		return buf, 0, fmt.Errorf("%s %q cannot be written as line protocol: %w", measurement, name, err)
	}
	return e.enc.Bytes(), t, nil
}

func plainWord(s string) bool {
	for i := 0; i < len(s); i++ {
		c := s[i]
		if !(c >= 'a' && c <= 'z' || c >= 'A' && c <= 'Z' || c >= '0' && c <= '9' || c == '_') {
			return false
		}
	}
	return s != ""
}

// seriesName joins the tags, which together with the measurement are a line's
// identity to a server.
func seriesName(p *Point) string {
	switch len(p.Tags) {
	case 0:
		return ""
	case 1:
		return p.Tags[0].Value
	}
	b := make([]byte, 0, 64)
	for _, t := range p.Tags {
		b = append(b, t.Key...)
		b = append(b, '=')
		b = append(b, t.Value...)
		b = append(b, ',')
	}
	return string(b)
}
