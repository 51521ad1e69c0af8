package frame

import (
	"bytes"
	"errors"
	"fmt"
	"regexp"
)

// scpiAnswer is the form of one number in an answer, with the blanks that may
// stand around it: IEEE 488.2 NR1, NR2, NR3, and the wider forms of NRf.
const scpiAnswer = `[ \t]*(?P<value>[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[ \t]*[Ee][ \t]*[+-]?[0-9]+)?)[ \t]*\r?`

func newSCPI(o Options) (Decoder, error) {
	scale := Decimal{Digits: 1}
	if o.SCPI != nil {
		scale = o.SCPI.Scale
	}
	if scale.Digits == 0 {
		return nil, errors.New("the scale is zero")
	}
	if o.Pattern != "" {
		return nil, errors.New("a scpi frame has no pattern: its answer is one number of IEEE 488.2")
	}
	if o.Unit == NoUnit {
		return nil, errors.New("the answer carries no unit: give unit: mm or in")
	}
	if len(o.End) == 0 {
		o.End = []byte{'\n'}
	}
	o.Pattern = scpiAnswer
	t, err := newText(o)
	if err != nil {
		return nil, err
	}
	t.number = func(b []byte) (Decimal, string, bool) { return scpiNumber(b, scale) }
	return t, nil
}

// scpiNumber reads a number of IEEE 488.2, knowing the two that SCPI uses for
// what is none: 9.91E37 for not a number, 9.9E37 and its negative for
// infinity (SCPI-1999, volume 1, 7.2.1.4 and 7.2.1.5; from memory).
func scpiNumber(b []byte, scale Decimal) (Decimal, string, bool) {
	var buf [64]byte
	tight := buf[:0]
	for _, c := range b {
		if c == ' ' || c == '\t' {
			continue
		}
		if len(tight) == len(buf) {
			return Decimal{}, "", false
		}
		tight = append(tight, c)
	}
	var kept [8]byte
	digits, exponent := significant(tight, kept[:0])
	switch {
	case exponent == 38 && string(digits) == "991":
		return Decimal{}, NotANumber, true
	case exponent == 38 && string(digits) == "99" && tight[0] == '-':
		return Decimal{}, MinusInfinite, true
	case exponent == 38 && string(digits) == "99":
		return Decimal{}, Infinite, true
	}
	d, ok := ParseDecimal(tight)
	if !ok {
		return Decimal{}, "", false
	}
	d, ok = d.Times(scale)
	return d, "", ok
}

// significant returns b as 0.DIGITS times ten to the exponent, the digits
// without zeros at their ends and no more than out has room for; none for zero.
func significant(b, out []byte) (digits []byte, exponent int) {
	zeros, point, started := 0, false, false
	i := 0
	for ; i < len(b) && b[i] != 'E' && b[i] != 'e'; i++ {
		c := b[i]
		switch {
		case c == '.':
			point = true
			continue
		case c == '+' || c == '-':
			continue
		case c == '0' && !started:
			if point {
				exponent--
			}
			continue
		}
		started = true
		if !point {
			exponent++
		}
		if c == '0' {
			zeros++
			continue
		}
		for ; zeros > 0; zeros-- {
			out = appendShort(out, '0')
		}
		out = appendShort(out, c)
	}
	e, ok := parseExponent(b[i:])
	if !ok {
		return nil, 0
	}
	return out, exponent + e
}

func appendShort(b []byte, c byte) []byte {
	if len(b) == cap(b) {
		return b
	}
	return append(b, c)
}

// NewIdentity returns a decoder for the answer to *IDN?: a line up to end (a
// line feed if empty) in which the regular expression pattern is found; write
// ^ and $ for the whole of it. Any other line is rejected as NoMatch.
func NewIdentity(pattern string, end []byte) (Decoder, error) {
	re, err := regexp.Compile(pattern)
	if err != nil {
		return nil, fmt.Errorf("identity: %w", err)
	}
	if len(end) == 0 {
		end = []byte{'\n'}
	}
	const longest = 256 // IEEE 488.2 allows 72 characters, instruments more
	t := &text{o: Options{End: end, Longest: longest}, buf: make([]byte, 0, longest)}
	t.body = func(f *Frame) Reason {
		if !re.Match(bytes.TrimSpace(f.Raw)) {
			return NoMatch
		}
		return None
	}
	return t, nil
}
