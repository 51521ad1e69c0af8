package frame

import (
	"bytes"
	"errors"
	"fmt"
)

// nibblesShape reads decimal digits sent as nibbles. Every nibble has a
// closed set of values: any other rejects the frame.
type nibblesShape struct {
	o        *NibblesOptions
	unit     Unit
	start    []byte
	end      []byte
	bytes    int // of the nibbles
	length   int // of the frame without its end
	sum      place
	ordinary bool // status nibble 0 means nothing special
}

func newNibbles(o Options) (Decoder, error) {
	n := o.Nibbles
	if n == nil {
		return nil, errors.New("a nibbles frame needs its layout: count, coding and digits")
	}
	if err := n.check(); err != nil {
		return nil, err
	}
	if o.Unit == NoUnit && n.Unit == nil {
		return nil, errors.New("the frame sends no unit: give unit: mm or in, or a nibble that says it")
	}
	s := &nibblesShape{o: n, unit: o.Unit, start: o.Start, end: o.End, bytes: n.Count, ordinary: true}
	if n.Packed {
		s.bytes = n.Count / 2
	}
	if n.Status != nil {
		_, listed := n.Status.Codes[0]
		s.ordinary = !listed
		for _, means := range n.Status.Codes {
			s.ordinary = s.ordinary && means != ""
		}
	}
	sum, err := o.Checksum.size()
	if err != nil {
		return nil, err
	}
	s.length = len(s.start) + s.bytes
	switch {
	case o.Checksum.At != nil: // among the nibbles
	case o.Checksum.Binary:
		s.length += sum
	default:
		s.length += 2 * sum
	}
	if s.sum, err = placeOf(o.Checksum, s.length); err != nil {
		return nil, err
	}
	if len(o.End) > 0 && !n.Packed {
		// Characters up to a terminator are framed as text is.
		if o.Longest < s.length+len(s.end) {
			return nil, fmt.Errorf("a frame of %d nibbles with its start and end is longer than longest, %d bytes", n.Count, o.Longest)
		}
		t := &text{o: o, buf: make([]byte, 0, o.Longest)}
		t.body = func(f *Frame) Reason {
			if len(f.Raw) != s.length {
				return NoMatch
			}
			why, _ := s.read(f)
			return why
		}
		return t, nil
	}
	sync := len(s.start)
	if n.Packed {
		sync += (len(n.Header) + 1) / 2
	} else {
		sync += len(n.Header)
	}
	t := newFramer(s, guardFor(&s.sum, sync), sync, s.length+len(s.end))
	t.doubtful = s.sum.size == 0
	return t, nil
}

// check refuses a layout that no nibbles can have.
func (n *NibblesOptions) check() error {
	switch {
	case n.Count < 1 || n.Count > 1024:
		return fmt.Errorf("a frame of %d nibbles: their count must be from 1 to 1024", n.Count)
	case n.Packed && n.Count%2 == 1:
		return fmt.Errorf("%d packed nibbles do not fill whole bytes", n.Count)
	case n.Digits < 1 || n.Digits > maxDigits || n.DigitsAt < 0 || n.DigitsAt+n.Digits > n.Count:
		return fmt.Errorf("the digits (%d at nibble %d) do not lie in a frame of %d nibbles, or are more than 18", n.Digits, n.DigitsAt, n.Count)
	case len(n.Header) > n.Count || len(n.Header) > n.DigitsAt:
		return fmt.Errorf("the header of %d nibbles reaches into the digits at nibble %d", len(n.Header), n.DigitsAt)
	case n.Decimals < 0 || n.Decimals > maxScale:
		return fmt.Errorf("%d digits behind the point", n.Decimals)
	}
	for _, f := range []*NibbleField{n.Sign, n.Point, n.Unit, n.Status} {
		if f != nil && (f.At < 0 || f.At >= n.Count) {
			return fmt.Errorf("nibble %d does not exist in a frame of %d", f.At, n.Count)
		}
	}
	return nil
}

// size compares the beginning with the start bytes and the header.
func (s *nibblesShape) size(b []byte) (int, bool) {
	n := min(len(b), len(s.start))
	if !bytes.Equal(b[:n], s.start[:n]) {
		return 0, false
	}
	total := s.length + len(s.end)
	for i, want := range s.o.Header {
		got, ok, there := s.nibble(b, i)
		if !there {
			break
		}
		if !ok || got != want {
			return 0, false
		}
	}
	return total, true
}

// nibble returns nibble i of the frame raw; ok is false where its byte is no
// hex character, there where raw is too short.
func (s *nibblesShape) nibble(raw []byte, i int) (v byte, ok, there bool) {
	at := len(s.start) + i
	if s.o.Packed {
		at = len(s.start) + i/2
	}
	if at >= len(raw) {
		return 0, false, false
	}
	if !s.o.Packed {
		v, ok = hexDigit(raw[at])
		return v, ok, true
	}
	if (i%2 == 0) != s.o.LowFirst {
		return raw[at] >> 4, true, true
	}
	return raw[at] & 0xF, true, true
}

func (s *nibblesShape) read(f *Frame) (Reason, bool) {
	if len(s.end) > 0 {
		// Text framing has cut the end off already.
		if len(f.Raw) != s.length && !bytes.HasSuffix(f.Raw, s.end) {
			return NoMatch, false
		}
		f.Raw = f.Raw[:s.length]
	}
	if _, ok := s.size(f.Raw); !ok {
		return BadCode, false
	}
	if !s.o.Packed {
		for i := len(s.start); i < len(s.start)+s.bytes; i++ {
			if _, ok := hexDigit(f.Raw[i]); !ok && !s.sum.is(i) {
				return BadDigit, false
			}
		}
	}
	intact := false
	if s.sum.size > 0 {
		if !s.sum.holds(f.Raw) {
			return BadChecksum, false
		}
		intact = true
	}
	return s.fields(f), intact
}

// fields reads status, unit and value.
func (s *nibblesShape) fields(f *Frame) Reason {
	if st := s.o.Status; st != nil {
		code, _, _ := s.nibble(f.Raw, st.At)
		word, known := st.Codes[code]
		if !known && (code != 0 || !s.ordinary) {
			return UnknownStatus
		}
		f.Status = word
	}
	f.Unit = s.unit
	if u := s.o.Unit; u != nil {
		code, _, _ := s.nibble(f.Raw, u.At)
		switch u.Codes[code] {
		case "mm":
			f.Unit = Millimetre
		case "in":
			f.Unit = Inch
		default:
			return UnknownUnit
		}
	}
	if f.Status == "over-range" || f.Status == "under-range" || f.Status == "error" {
		return None // what the digits then are is the instrument's affair
	}
	return s.value(f)
}

func (s *nibblesShape) value(f *Frame) Reason {
	d := Decimal{Scale: s.o.Decimals}
	for i := range s.o.Digits {
		at := s.o.DigitsAt + i
		if s.o.LeastFirst {
			at = s.o.DigitsAt + s.o.Digits - 1 - i
		}
		v, _, _ := s.nibble(f.Raw, at)
		if v > 9 {
			return BadDigit
		}
		d.Digits = d.Digits*10 + int64(v)
	}
	if p := s.o.Point; p != nil {
		code, _, _ := s.nibble(f.Raw, p.At)
		word := p.Codes[code]
		if len(word) != 1 || word[0] < '0' || word[0] > '9' {
			return BadCode
		}
		d.Scale = int(word[0] - '0')
	}
	if g := s.o.Sign; g != nil {
		code, _, _ := s.nibble(f.Raw, g.At)
		switch g.Codes[code] {
		case "+":
		case "-":
			d.Digits = -d.Digits
		default:
			return BadCode
		}
	}
	f.Value, f.HasValue = d, true
	return None
}
