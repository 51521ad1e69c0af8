package frame_test

import (
	"bytes"
	"strings"
	"testing"

	"gaugelog/device/frame"
)

// The fuzz targets, one a kind of frame, hold the decoders' promises on any
// bytes, any split and any pause. The campaign of 100 million executions in
// all runs them one after another, about 20 million each:
//
//	for f in Text Nibbles Binary Modbus SCPI; do
//	  go test ./device/frame -run '^$' -fuzz "^Fuzz$f\$" -fuzztime 20000000x
//	done

func FuzzNibbles(f *testing.F) { fuzzKind(f, frame.Nibbles) }
func FuzzBinary(f *testing.F)  { fuzzKind(f, frame.Binary) }
func FuzzModbus(f *testing.F)  { fuzzKind(f, frame.ModbusReply) }
func FuzzSCPI(f *testing.F)    { fuzzKind(f, frame.SCPIReply) }

func fuzzKind(f *testing.F, kind frame.Kind) {
	var cases []kindCase
	for _, c := range everyKind() {
		if c.o.Kind == kind {
			cases = append(cases, c)
			f.Add(bytes.Repeat(c.frame, 2), uint16(len(c.frame)), uint16(3))
			f.Add(append(bytes.Clone(c.frame[1:]), c.frame...), uint16(0), uint16(5))
		}
	}
	f.Fuzz(func(t *testing.T, p []byte, pause, cut uint16) {
		for _, c := range cases {
			holdsPromises(t, c, p, int(pause)%(len(p)+1), int(cut)%(len(p)+1))
		}
	})
}

// holdsPromises feeds p with a pause at one place, whole and split at another.
func holdsPromises(t *testing.T, c kindCase, p []byte, pause, cut int) {
	first, second := p[:pause:pause], p[pause:]
	whole := heard(c.open(t), first, gap, second)
	pieces := [][]byte{first, gap, second}
	if cut <= pause {
		pieces = [][]byte{first[:cut:cut], first[cut:], gap, second}
	} else {
		at := cut - pause
		pieces = [][]byte{first, gap, second[:at:at], second[at:]}
	}
	for i, piece := range pieces {
		if piece == nil && !(i > 0 && i < len(pieces)-1) {
			pieces[i] = []byte{} // no bytes, and no pause either
		}
	}
	if split := heard(c.open(t), pieces...); strings.Join(whole, "|") != strings.Join(split, "|") {
		t.Fatalf("%s: %q whole, %q split at %d (pause at %d)", c.name, whole, split, cut, pause)
	}
	last := int64(0)
	emit := func(f *frame.Frame) {
		if f.Offset < last || f.Size <= 0 || f.Offset+int64(f.Size) > int64(len(p)) {
			t.Fatalf("%s: frame at %d+%d after %d of %d", c.name, f.Offset, f.Size, last, len(p))
		}
		last = f.Offset + int64(f.Size)
		if f.Rejected != frame.None && (f.HasValue || f.NoReading != "") || f.HasValue && f.NoReading != "" {
			t.Fatalf("%s: a value in a frame that has none: %+v", c.name, f)
		}
		if !bytes.HasPrefix(p[f.Offset:], f.Raw) {
			t.Fatalf("%s: raw %q is not what stands at %d", c.name, f.Raw, f.Offset)
		}
		if f.Rejected == frame.None && f.NoReading == "" && !f.HasValue {
			t.Fatalf("%s: neither value nor reason: %+v", c.name, f)
		}
	}
	d := c.open(t)
	d.Feed(first, emit)
	d.Quiet(emit)
	d.Feed(second, emit)
	if d.Whole() && d.Pending() == 0 {
		t.Fatalf("%s: a whole frame of no bytes", c.name)
	}
	d.Quiet(emit)
	if n := d.Pending(); n != 0 && len(c.o.End) == 0 && c.o.Kind != frame.SCPIReply {
		t.Fatalf("%s: %d bytes pending on a quiet line", c.name, n)
	}
}
