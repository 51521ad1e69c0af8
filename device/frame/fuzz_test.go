package frame_test

import (
	"bytes"
	"testing"

	"gaugelog/device/frame"
)

// The fuzz targets, one a kind of frame (FuzzText stands with the text
// tests), hold the decoders' promises on any bytes, any split and any pause.
// TestMutations is the campaign of 100 million executions. These find their own
// way into the code, a kind after another:
//
//	for f in Text Nibbles Binary Modbus SCPI; do
//	  go test ./device/frame -run '^$' -fuzz "^Fuzz$f\$" -fuzztime 1m
//	done

func FuzzNibbles(f *testing.F) { fuzzKind(f, frame.Nibbles) }
func FuzzBinary(f *testing.F)  { fuzzKind(f, frame.Binary) }
func FuzzModbus(f *testing.F)  { fuzzKind(f, frame.ModbusReply) }
func FuzzSCPI(f *testing.F)    { fuzzKind(f, frame.SCPIReply) }

func fuzzKind(f *testing.F, kind frame.Kind) {
	var benches []*bench
	for _, c := range everyKind() {
		if c.o.Kind == kind {
			benches = append(benches, newBench(f, c))
			f.Add(bytes.Repeat(c.frame, 2), uint16(len(c.frame)), uint16(3), uint8(len(benches)-1))
			f.Add(append(bytes.Clone(c.frame[1:]), c.frame...), uint16(0), uint16(5), uint8(len(benches)-1))
		}
	}
	f.Fuzz(func(t *testing.T, p []byte, pause, cut uint16, which uint8) {
		if len(p) > 4096 {
			p = p[:4096]
		}
		b := benches[int(which)%len(benches)]
		b.holds(t, p, int(pause)%(len(p)+1), int(cut)%(len(p)+1))
	})
}

// seen is what must not depend on the split.
type seen struct {
	offset   int64
	size     int
	rejected frame.Reason
	value    frame.Decimal
	has      bool
	unit     frame.Unit
	status   string
	none     string
}

// bench holds a decoder that is used again for every input.
type bench struct {
	c     kindCase
	d     frame.Decoder
	lists [2][]seen
	which int
	emit  func(*frame.Frame)

	p    []byte
	last int64
	bad  string
}

func newBench(t testing.TB, c kindCase) *bench {
	b := &bench{c: c, d: c.open(t)}
	b.emit = func(f *frame.Frame) {
		b.check(f)
		b.lists[b.which] = append(b.lists[b.which], seen{f.Offset, f.Size, f.Rejected, f.Value, f.HasValue, f.Unit, f.Status, f.NoReading})
	}
	return b
}

// check looks at one frame by itself.
func (b *bench) check(f *frame.Frame) {
	switch {
	case f.Offset < b.last || f.Size <= 0 || f.Offset+int64(f.Size) > int64(len(b.p)):
		b.bad = "frames overlap or leave the bytes"
	case f.Rejected != frame.None && (f.HasValue || f.NoReading != ""), f.HasValue && f.NoReading != "":
		b.bad = "a value in a frame that has none"
	case f.Rejected == frame.None && f.NoReading == "" && !f.HasValue:
		b.bad = "neither value nor reason"
	case f.HasValue && f.Unit == frame.NoUnit:
		b.bad = "a value without a unit"
	case !bytes.HasPrefix(b.p[min(f.Offset, int64(len(b.p))):], f.Raw):
		b.bad = "raw bytes that do not stand there"
	}
	b.last = f.Offset + int64(f.Size)
}

// run feeds p with a pause at one place, split at another.
func (b *bench) run(p []byte, pause, cut int) {
	b.p, b.last = p, 0
	b.lists[b.which] = b.lists[b.which][:0]
	b.d.Reset(0)
	b.d.Feed(p[:min(cut, pause)], b.emit)
	b.d.Feed(p[min(cut, pause):pause], b.emit)
	b.d.Quiet(b.emit)
	b.d.Feed(p[pause:max(cut, pause)], b.emit)
	b.d.Feed(p[max(cut, pause):], b.emit)
	b.d.Quiet(b.emit)
}

// holds compares p in two pieces with p split once more, and looks at each
// frame.
func (b *bench) holds(t *testing.T, p []byte, pause, cut int) {
	b.bad = ""
	b.which = 0
	b.run(p, pause, pause)
	b.which = 1
	b.run(p, pause, cut)
	if b.bad != "" {
		t.Fatalf("%s: %s: %+v", b.c.name, b.bad, b.lists)
	}
	if len(b.lists[0]) != len(b.lists[1]) {
		t.Fatalf("%s: %+v whole, %+v split at %d (pause at %d)", b.c.name, b.lists[0], b.lists[1], cut, pause)
	}
	for i, s := range b.lists[0] {
		if s != b.lists[1][i] {
			t.Fatalf("%s: %+v whole, %+v split at %d (pause at %d)", b.c.name, s, b.lists[1][i], cut, pause)
		}
	}
	ends := len(b.c.o.End) > 0 || b.c.o.Kind == frame.SCPIReply
	if n := b.d.Pending(); !ends && (n != 0 || b.d.Whole()) {
		t.Fatalf("%s: %d bytes pending on a quiet line", b.c.name, n)
	}
}
