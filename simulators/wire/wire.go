// Package wire writes the frames a gauge would send, from the frame's
// description in a rig file alone.
//
// It knows the five kinds of frame: text, nibbles, binary, modbus and scpi. It
// is the simulator's own: nothing of it is shared with the decoders, and it
// is written from the description's meaning, not from how they read it. It
// promises that what it writes has the form described, that it refuses (when
// built) a description it cannot write, and that appending a frame allocates
// nothing.
package wire

import (
	"fmt"
	"strconv"
	"strings"

	"gaugelog/config"
)

// Value is what an instrument shows.
type Value struct {
	// Shown is the number in Unit, already rounded to the resolution.
	Shown float64
	Unit  string // "mm" or "in"
	// Status is "" or one of the meanings a frame's status may have, such as
	// hold, battery-low or high-limit; a frame that cannot say it leaves it.
	Status string
	// NoReading is "" or the reason for which the instrument has no number,
	// such as over-range. Text and scpi frames then send the text that says
	// so instead of the number; without such a text, and in frames of the
	// other kinds, the status says it beside a number that means nothing.
	NoReading string
	// Celsius and Percent are a probe's.
	Celsius, Percent float64
}

// Encoder writes frames of one instrument.
type Encoder interface {
	// Append appends one frame to dst and returns it. ok is false, and dst
	// unchanged, where the frame has no way to say this value (it is too
	// large for the digits, or has no text for no reading).
	Append(dst []byte, v *Value) (out []byte, ok bool)
	// Request is what an asked instrument answers to; nil for one that
	// streams.
	Request() []byte
	// SaysUnit tells whether the frame itself says mm or in.
	SaysUnit() bool
	// Step is the least step, in the unit, of a number that the frame can
	// say; 0 where it is finer than any gauge shows.
	Step(unit string) float64
	// Says tells whether the frame's status can say a word.
	Says(status string) bool
	// Ends is how many bytes the frame's terminator has; 0 for a frame that
	// ends by its length or by silence.
	Ends() int
}

// Instrument is what an encoder needs to know of the gauge or probe.
type Instrument struct {
	Channel string
	// Resolution of one indication in mm, for the digits behind the point.
	Resolution float64
	// InchResolution is the same in inches, where the gauge can show them.
	InchResolution float64
	// Temperature and Humidity name a probe's groups.
	Temperature, Humidity string
}

// New builds the encoder for a frame.
func New(f *config.Frame, i Instrument) (Encoder, error) {
	if i.InchResolution <= 0 {
		i.InchResolution = i.Resolution / 25.4
	}
	switch f.Kind {
	case "text", "":
		return newText(f, i)
	case "nibbles":
		return newNibbles(f, i)
	case "binary":
		return newFixed(f, i)
	case "modbus":
		return newRegisters(f, i)
	case "scpi":
		return newSCPI(f, i)
	}
	return nil, fmt.Errorf("frame %q: there are no frames of kind %q; known are text, nibbles, binary, modbus and scpi", f.Name, f.Kind)
}

// Question is what an instrument that understands lines was asked.
type Question uint8

// What a line may ask.
const (
	NoQuestion Question = iota
	AskedValue
	AskedIdentity
)

// Talker is an Encoder of an instrument that understands lines of text, ended
// by CR or LF, and has a name.
type Talker interface {
	Encoder
	// Understands tells what a line asks for.
	Understands(line []byte) Question
	// AppendIdentity appends the answer to *IDN?.
	AppendIdentity(dst []byte) []byte
}

// around gives a frame's first and last bytes.
func around(f *config.Frame) (start, end string, err error) {
	if start, err = escapes(f.Start); err != nil {
		return "", "", fmt.Errorf("frame %q: start: %w", f.Name, err)
	}
	if end, err = escapes(f.End); err != nil {
		return "", "", fmt.Errorf("frame %q: end: %w", f.Name, err)
	}
	return start, end, nil
}

// spoken turns texts and their reasons round: the first text of each reason.
func spoken(noReadings map[string]string) map[string]string {
	out := map[string]string{}
	for _, text := range sortedKeys(noReadings) {
		if _, has := out[noReadings[text]]; !has {
			out[noReadings[text]] = text
		}
	}
	return out
}

// request gives the bytes of a frame's request for a channel.
func request(f *config.Frame, channel string) ([]byte, error) {
	if f.Request == "" {
		return nil, nil
	}
	text, err := escapes(f.Request)
	if err != nil {
		return nil, fmt.Errorf("frame %q: request: %w", f.Name, err)
	}
	return []byte(strings.ReplaceAll(text, "{channel}", channel)), nil
}

// escapes reads Go escapes in a string that YAML left as typed.
func escapes(s string) (string, error) {
	var out []byte
	for s != "" {
		if s[0] != '\\' {
			out = append(out, s[0])
			s = s[1:]
			continue
		}
		r, multibyte, tail, err := strconv.UnquoteChar(s, 0)
		if err != nil {
			return "", fmt.Errorf("%q is no escape that Go knows", s[:min(4, len(s))])
		}
		if multibyte {
			out = append(out, string(r)...)
		} else {
			out = append(out, byte(r))
		}
		s = tail
	}
	return string(out), nil
}
