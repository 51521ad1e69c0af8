package device

import (
	"encoding/hex"
	"fmt"
	"math"
	"strconv"
	"strings"
	"time"

	"gaugelog/config"
	"gaugelog/device/frame"
)

// Defaults of a frame description where the rig file says nothing.
const (
	defaultTimeout = 500 * time.Millisecond
	defaultEvery   = time.Second
)

// FrameOptions maps a frame of the rig file to the decoder's options, for the
// instrument on the given channel. The error says what in the frame is wrong.
func FrameOptions(f config.Frame, channel string) (frame.Options, error) {
	o := frame.Options{
		Kind: frame.Kind(f.Kind), Pattern: f.Pattern, Longest: f.Longest,
		Statuses: f.Statuses, NoReadings: f.NoReadings,
	}
	var err error
	if o.Start, err = unescape(f.Start); err != nil {
		return o, fmt.Errorf("start: %w", err)
	}
	if o.End, err = unescape(f.End); err != nil {
		return o, fmt.Errorf("end: %w", err)
	}
	if o.Unit, err = unitOf(f.Unit); err != nil {
		return o, err
	}
	for text, name := range f.Units {
		u, err := unitOf(name)
		if err != nil {
			return o, err
		}
		if o.Units == nil {
			o.Units = map[string]frame.Unit{}
		}
		o.Units[text] = u
	}
	for code, word := range f.Statuses {
		if !knownStatus(word) {
			return o, fmt.Errorf("status %q: %q is none of hold, battery-low, high-limit, low-limit, over-range, under-range, error", code, word)
		}
	}
	if c := f.Checksum; c != nil {
		o.Checksum = frame.Checksum{
			Kind: c.Kind, From: c.From, To: c.To, At: c.At,
			Binary: c.Form == "binary", HighFirst: c.Order == "high-first",
		}
	}
	return o, describeKind(&o, f, channel)
}

func unitOf(name string) (frame.Unit, error) {
	switch name {
	case "":
		return frame.NoUnit, nil
	case "mm":
		return frame.Millimetre, nil
	case "in":
		return frame.Inch, nil
	}
	return frame.NoUnit, fmt.Errorf("unit %q: a gauge shows mm or in", name)
}

func knownStatus(word string) bool {
	switch word {
	case "", "hold", "battery-low", "high-limit", "low-limit", "over-range", "under-range", "error":
		return true
	}
	return false
}

// unescape reads Go escapes (\r, \n, \t, \x02, \\): in a single-quoted YAML
// text they arrive as typed, in a double-quoted one YAML has read them already.
func unescape(s string) ([]byte, error) {
	if !strings.Contains(s, `\`) {
		return []byte(s), nil
	}
	var out []byte
	for rest := s; rest != ""; {
		if len(rest) >= 4 && rest[0] == '\\' && rest[1] == 'x' {
			b, err := hex.DecodeString(rest[2:4])
			if err != nil {
				return nil, fmt.Errorf("%q: bad escape \\x", s)
			}
			out, rest = append(out, b...), rest[4:]
			continue
		}
		r, _, tail, err := strconv.UnquoteChar(rest, 0)
		if err != nil {
			return nil, fmt.Errorf("%q: bad escape: \\r, \\n, \\t, \\xHH and \\\\ are known", s)
		}
		out, rest = append(out, string(r)...), tail
	}
	return out, nil
}

// lineOf merges the gauge's line settings over the frame's, and the defaults
// (9600 8N1) under both.
func lineOf(own *config.Line, f config.Line) config.Line {
	l := config.Line{Baud: 9600, DataBits: 8, Parity: "none", StopBits: "1"}
	for _, over := range []*config.Line{&f, own} {
		if over == nil {
			continue
		}
		if over.Baud != 0 {
			l.Baud = over.Baud
		}
		if over.DataBits != 0 {
			l.DataBits = over.DataBits
		}
		for _, s := range []struct{ to, from *string }{
			{&l.Parity, &over.Parity}, {&l.StopBits, &over.StopBits}, {&l.DTR, &over.DTR}, {&l.RTS, &over.RTS},
		} {
			if *s.from != "" {
				*s.to = *s.from
			}
		}
	}
	return l
}

// span turns a duration of the rig file into Go's, def where it is not stated.
func span(d *config.Duration, def time.Duration) time.Duration {
	if d == nil || d.Value <= 0 {
		return def
	}
	return time.Duration(math.Round(d.Value * float64(time.Second)))
}
