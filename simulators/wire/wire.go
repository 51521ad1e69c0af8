// Package wire writes the frames a gauge would send, from the frame's
// description in a rig file alone.
//
// It is the simulator's own: nothing of it is shared with the decoders, and it
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
	// Status is "" or one of the meanings a frame's statuses may have, such
	// as battery-low; a frame without a status ignores it.
	Status string
	// NoReading is "" or the reason for which the instrument has no number,
	// such as over-range.
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
	switch f.Kind {
	case "text", "":
		return newText(f, i)
	}
	return nil, fmt.Errorf("frame %q: the simulator does not write frames of kind %q yet", f.Name, f.Kind)
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
