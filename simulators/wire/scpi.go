package wire

import (
	"bytes"
	"fmt"
	"regexp"
	"regexp/syntax"
	"strconv"
	"strings"

	"gaugelog/config"
)

// scpi answers a query with a number in the form IEEE 488.2 calls NR3.
type scpi struct {
	query    []byte
	request  []byte
	end      string
	scale    float64
	unit     string
	identity []byte
	none     map[string]string
}

// Numbers that stand for none: the SCPI-1999 standard gives 9.91E+37 for not a
// number and 9.9E+37 for more than can be shown (from memory).
const (
	notANumber = "9.91E+37"
	infinite   = "9.9E+37"
)

func newSCPI(f *config.Frame, i Instrument) (*scpi, error) {
	c := f.SCPI
	if c == nil || c.Query == "" {
		return nil, fmt.Errorf("frame %q has no query", f.Name)
	}
	query, err := escapes(c.Query)
	if err != nil {
		return nil, fmt.Errorf("frame %q: query: %w", f.Name, err)
	}
	query = strings.TrimRight(strings.ReplaceAll(query, "{channel}", i.Channel), "\r\n")
	s := &scpi{query: []byte(query), request: []byte(query + "\n"), scale: scaleOf(c.Scale), unit: f.Unit, none: spoken(f.NoReadings)}
	if _, s.end, err = around(f); err != nil {
		return nil, err
	}
	if s.end == "" {
		s.end = "\n"
	}
	if s.identity, err = identity(c.Identity); err != nil {
		return nil, fmt.Errorf("frame %q: identity: %w", f.Name, err)
	}
	return s, nil
}

// identity makes an answer to *IDN? that a pattern matches: of the four fields
// IEEE 488.2 wants if the pattern takes them.
func identity(pattern string) ([]byte, error) {
	const plain = "SIMULATED,INDICATOR,0,1.0"
	re, err := regexp.Compile(pattern)
	if err != nil {
		return nil, err
	}
	if re.MatchString(plain) {
		return []byte(plain), nil
	}
	tree, err := syntax.Parse(pattern, syntax.Perl)
	if err != nil {
		return nil, err
	}
	text, err := shortest(tree)
	if err == nil && !re.MatchString(text) {
		err = fmt.Errorf("the simulator finds no text that %q matches", pattern)
	}
	return []byte(text), err
}

// Request returns the query with its line feed.
func (s *scpi) Request() []byte { return s.request }

// SaysUnit is false: the answer is a number alone.
func (s *scpi) SaysUnit() bool { return false }

// Step is 0: the answer has eight significant digits.
func (s *scpi) Step(string) float64 { return 0 }

// Says is false: the answer is a number alone.
func (s *scpi) Says(string) bool { return false }

// Ends is how many bytes the terminator has.
func (s *scpi) Ends() int { return len(s.end) }

// Append writes one answer.
func (s *scpi) Append(dst []byte, v *Value) ([]byte, bool) {
	switch said, known := s.none[v.NoReading]; {
	case v.NoReading == "":
	case known:
		return append(append(dst, said...), s.end...), true
	case v.NoReading == "over-range":
		return append(append(dst, infinite...), s.end...), true
	case v.NoReading == "under-range":
		return append(append(append(dst, '-'), infinite...), s.end...), true
	default:
		return append(append(dst, notANumber...), s.end...), true
	}
	shown, _ := inUnit(v, s.unit, false)
	x := shown/s.scale + 0 // a zero has no minus
	if x >= 0 {
		dst = append(dst, '+')
	}
	dst = strconv.AppendFloat(dst, x, 'E', 7, 64)
	return append(dst, s.end...), true
}

// Understands tells what a line asks for; capital and small letters are the
// same in a query.
func (s *scpi) Understands(line []byte) Question {
	line = bytes.TrimSpace(line)
	switch {
	case bytes.EqualFold(line, s.query):
		return AskedValue
	case bytes.EqualFold(line, []byte("*IDN?")):
		return AskedIdentity
	}
	return NoQuestion
}

// AppendIdentity appends the answer to *IDN?.
func (s *scpi) AppendIdentity(dst []byte) []byte {
	return append(append(dst, s.identity...), s.end...)
}
