package frame_test

import (
	"bytes"
	"strings"
	"testing"

	"gaugelog/device/frame"
)

func TestTextAllocatesNothing(t *testing.T) {
	for _, g := range golden {
		d := open(t, g.o)
		p, n := []byte(g.frame), 0
		emit := func(f *frame.Frame) {
			if f.Rejected == frame.None && f.Value.MM(f.Unit) != 0 {
				n++
			}
		}
		d.Feed(p, emit)
		if a := testing.AllocsPerRun(200, func() { d.Feed(p, emit) }); a != 0 {
			t.Errorf("%s: %v allocations a frame", g.name, a)
		}
		if n != 202 {
			t.Errorf("%s: %d frames", g.name, n)
		}
	}
}

func BenchmarkText(b *testing.B) {
	for _, g := range golden {
		b.Run(g.name, func(b *testing.B) {
			d := open(b, g.o)
			p := []byte(strings.Repeat(g.frame, 32))
			b.SetBytes(int64(len(p)))
			b.ReportAllocs()
			for b.Loop() {
				d.Feed(p, func(*frame.Frame) {})
			}
		})
	}
}

func FuzzText(f *testing.F) {
	for _, g := range golden {
		f.Add([]byte(g.frame+g.frame), uint16(3))
	}
	f.Add([]byte("01A+000\x00\x02\x03\r\n"), uint16(5))
	f.Fuzz(func(t *testing.T, p []byte, cut uint16) {
		for _, g := range golden {
			o := g.o
			o.Longest = 24
			whole := read(open(t, o), p)
			at := int(cut) % (len(p) + 1)
			split := read(open(t, o), p[:at], p[at:])
			if strings.Join(whole, "|") != strings.Join(split, "|") {
				t.Fatalf("%s: %q whole, %q split at %d", g.name, whole, split, at)
			}
			last := int64(0)
			open(t, o).Feed(p, func(f *frame.Frame) {
				if f.Offset < last || f.Offset+int64(f.Size) > int64(len(p)) {
					t.Fatalf("%s: frame at %d+%d after %d of %d", g.name, f.Offset, f.Size, last, len(p))
				}
				last = f.Offset + int64(f.Size)
				if f.Rejected == frame.None && !bytes.Equal(f.Raw, p[f.Offset:f.Offset+int64(len(f.Raw))]) {
					t.Fatalf("%s: raw %q is not what stands at %d", g.name, f.Raw, f.Offset)
				}
			})
		}
	})
}
