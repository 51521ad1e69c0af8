package frame

import (
	"bytes"
	"errors"
	"fmt"
	"slices"
)

// text decodes frames of bytes up to a terminator, matched whole by a pattern.
type text struct {
	o        Options
	m        *matcher
	sumBytes int
	value    int // index of each group, -1 where the pattern has none
	unit     int
	channel  int
	status   int
	sum      int
	fields   []int

	buf      []byte // the unfinished frame
	first    int64  // offset of buf[0]
	skipping bool   // over-long: waiting for the terminator
	frame    Frame

	// What the kinds that only borrow the framing replace: the number in the
	// value group, and all that stands between Start and End.
	number func([]byte) (d Decimal, noReading string, ok bool)
	body   func(f *Frame) Reason
}

func newText(o Options) (*text, error) {
	if len(o.End) == 0 {
		return nil, errors.New("a text frame needs an end: the bytes that close it")
	}
	m, err := newMatcher(o.Pattern, o.Longest)
	if err != nil {
		return nil, err
	}
	if m.match(nil) {
		return nil, fmt.Errorf("pattern %q matches the empty text: every stray terminator would count as a frame", o.Pattern)
	}
	t := &text{o: o, m: m, buf: make([]byte, 0, o.Longest), number: plainNumber}
	if t.sumBytes, err = o.Checksum.size(); err != nil {
		return nil, err
	}
	t.value, t.unit = slices.Index(m.names, "value"), slices.Index(m.names, "unit")
	t.channel, t.status = slices.Index(m.names, "channel"), slices.Index(m.names, "status")
	t.sum = slices.Index(m.names, "sum")
	for i, name := range m.names {
		if name != "" && i != t.value && i != t.unit && i != t.channel && i != t.status && i != t.sum {
			t.fields = append(t.fields, i)
			t.frame.Fields = append(t.frame.Fields, Field{Name: name})
		}
	}
	return t, t.check()
}

// check refuses a description that could not yield a value.
func (t *text) check() error {
	switch {
	case t.value < 0 && len(t.fields) == 0:
		return fmt.Errorf("pattern %q has no group value: write (?P<value>...)", t.o.Pattern)
	case t.value >= 0 && t.unit < 0 && t.o.Unit == NoUnit:
		return fmt.Errorf("the frame sends no unit: give unit: mm or in, or a group unit in the pattern %q", t.o.Pattern)
	case t.sumBytes > 0 && t.sum < 0:
		return fmt.Errorf("checksum %s needs a group sum in the pattern %q", t.o.Checksum.Kind, t.o.Pattern)
	case t.sumBytes == 0 && t.sum >= 0:
		return fmt.Errorf("pattern %q has a group sum, but no checksum says how it is computed", t.o.Pattern)
	}
	return nil
}

func (t *text) Reset(offset int64) {
	t.buf, t.first, t.skipping = t.buf[:0], offset, false
}

func (t *text) Pending() int { return len(t.buf) }

// Quiet does nothing: a text frame ends by its terminator, and a slow sender
// may pause inside one.
func (t *text) Quiet(func(*Frame)) {}

// Whole is never true: with its terminator a text frame is dealt with.
func (t *text) Whole() bool { return false }

func plainNumber(b []byte) (Decimal, string, bool) {
	d, ok := ParseDecimal(b)
	return d, "", ok
}

func (t *text) Feed(p []byte, emit func(*Frame)) {
	last := t.o.End[len(t.o.End)-1]
	for len(p) > 0 {
		n := bytes.IndexByte(p, last) + 1
		ends := n > 0
		if !ends {
			n = len(p)
		}
		t.take(p[:n], ends, emit)
		p = p[n:]
	}
}

// take appends bytes of which only the last can complete the terminator.
func (t *text) take(p []byte, ends bool, emit func(*Frame)) {
	for len(p) > 0 {
		room := min(t.o.Longest-len(t.buf), len(p))
		if len(t.o.Start) > 0 {
			room = min(room, 1) // look for Start at every byte
		}
		t.buf = append(t.buf, p[:room]...)
		p = p[room:]
		if len(t.o.Start) > 0 {
			t.restart(emit)
		}
		closed := len(p) == 0 && ends && bytes.HasSuffix(t.buf, t.o.End)
		switch {
		case closed && t.skipping:
			t.drop(len(t.buf))
			t.skipping = false
		case closed:
			t.finish(emit)
		case len(t.buf) == t.o.Longest:
			if !t.skipping {
				t.reject(TooLong, emit)
				t.skipping = true
			}
			// Keep what may be the beginning of the terminator.
			t.drop(len(t.buf) - (len(t.o.End) - 1))
		}
	}
}

// restart begins a new frame where Start appears behind other bytes.
func (t *text) restart(emit func(*Frame)) {
	at := len(t.buf) - len(t.o.Start)
	if at <= 0 || !bytes.HasSuffix(t.buf, t.o.Start) {
		return
	}
	if !t.skipping {
		whole := t.buf
		t.buf = whole[:at]
		t.reject(Unfinished, emit)
		t.buf = whole
	}
	t.skipping = false
	t.drop(at)
}

// drop forgets the first n bytes of the buffer.
func (t *text) drop(n int) {
	t.first += int64(n)
	t.buf = t.buf[:copy(t.buf, t.buf[n:])]
}

func (t *text) reject(why Reason, emit func(*Frame)) {
	f := t.begin(len(t.buf))
	f.Raw, f.Rejected = t.buf, why
	emit(f)
}

// begin clears the frame for reuse.
func (t *text) begin(size int) *Frame {
	f := &t.frame
	fields := f.Fields
	*f = Frame{Offset: t.first, Size: size, Fields: fields}
	for i := range fields {
		fields[i] = Field{Name: fields[i].Name}
	}
	return f
}

func (t *text) finish(emit func(*Frame)) {
	f := t.begin(len(t.buf))
	f.Raw = t.buf[:len(t.buf)-len(t.o.End)]
	f.settle(t.parse(f))
	emit(f)
	t.drop(len(t.buf))
}

// parse fills f from f.Raw.
func (t *text) parse(f *Frame) Reason {
	if !bytes.HasPrefix(f.Raw, t.o.Start) {
		return NoMatch
	}
	if t.body != nil {
		return t.body(f)
	}
	body := f.Raw[len(t.o.Start):]
	if why, ok := t.o.NoReadings[string(t.words(body))]; ok {
		f.NoReading = why
		return None
	}
	if !t.m.match(body) {
		return NoMatch
	}
	if t.sumBytes > 0 && !t.sumHolds(f.Raw, body) {
		return BadChecksum
	}
	f.Channel = t.group(body, t.channel)
	if why := t.parseStatus(f, t.group(body, t.status)); why != None {
		return why
	}
	for i, g := range t.fields {
		text := t.group(body, g)
		value, ok := ParseDecimal(text)
		f.Fields[i] = Field{Name: t.m.names[g], Text: text, Value: value, Number: ok}
	}
	if t.value < 0 {
		return None
	}
	return t.parseValue(f, t.group(body, t.value), t.group(body, t.unit))
}

// words is the body without the blanks around it; in a scpi answer a carriage
// return is one.
func (t *text) words(body []byte) []byte {
	body = trimBlanks(body)
	if t.o.Kind == SCPIReply {
		body = trimBlanks(bytes.TrimSuffix(body, []byte{'\r'}))
	}
	return body
}

func (t *text) parseValue(f *Frame, value, unit []byte) Reason {
	if why, ok := t.o.NoReadings[string(trimBlanks(value))]; ok {
		f.NoReading = why
		return None
	}
	var ok bool
	if f.Value, f.NoReading, ok = t.number(value); !ok {
		return BadNumber
	}
	if f.NoReading != "" {
		return None
	}
	f.HasValue = true
	if f.Unit, ok = t.unitOf(trimBlanks(unit)); !ok {
		return UnknownUnit
	}
	return None
}

func (t *text) unitOf(b []byte) (Unit, bool) {
	if u, ok := t.o.Units[string(b)]; ok {
		return u, true
	}
	switch string(b) {
	case "":
		return t.o.Unit, t.o.Unit != NoUnit
	case "mm", "MM":
		return Millimetre, true
	case "in", "IN", "inch", "INCH", `"`:
		return Inch, true
	}
	return NoUnit, false
}

func (t *text) parseStatus(f *Frame, b []byte) Reason {
	if s, ok := t.o.Statuses[string(b)]; ok {
		f.Status = s
		return None
	}
	b = trimBlanks(b)
	if len(b) == 0 {
		return None
	}
	var ok bool
	if f.Status, ok = t.o.Statuses[string(b)]; !ok {
		return UnknownStatus
	}
	return None
}

// group returns what group i matched, nil where it took no part.
func (t *text) group(body []byte, i int) []byte {
	if i < 0 || t.m.cap[2*i] < 0 {
		return nil
	}
	return body[t.m.cap[2*i]:t.m.cap[2*i+1]]
}

// sumHolds compares the sum sent with that of the bytes covered.
func (t *text) sumHolds(raw, body []byte) bool {
	sent, ok := t.o.Checksum.sent(t.group(body, t.sum))
	if !ok {
		return false
	}
	from, to, ok := t.o.Checksum.span(len(raw), len(t.o.Start)+t.m.cap[2*t.sum])
	return ok && t.o.Checksum.compute(raw[from:to]) == sent
}

// FieldNames returns the names a text frame's Fields will have, in order: the
// named groups of the pattern without value, unit, channel, status and sum.
func FieldNames(pattern string) ([]string, error) {
	m, err := newMatcher(pattern, 1)
	if err != nil {
		return nil, err
	}
	var names []string
	for _, name := range m.names {
		switch name {
		case "", "value", "unit", "channel", "status", "sum":
		default:
			names = append(names, name)
		}
	}
	return names, nil
}
