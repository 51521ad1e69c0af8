package frame_test

import (
	"bytes"
	"fmt"
	"strings"
	"testing"

	"gaugelog/device/frame"
)

// golden are text frames of the common shapes, made by hand; want is what

// each must read.

var golden = []struct {
	name  string
	o     frame.Options
	frame string
	want  string
}{
	{"signed decimal", frame.Options{End: []byte("\r\n"), Unit: frame.Millimetre, Pattern: `(?P<value>[+-]\d{3}\.\d{3})`},
		"+001.234\r\n", "1.234 mm"},
	{"negative", frame.Options{End: []byte("\r\n"), Unit: frame.Millimetre, Pattern: `(?P<value>[+-]\d{3}\.\d{3})`},
		"-012.345\r\n", "-12.345 mm"},
	{"with unit", frame.Options{End: []byte("\r"), Pattern: `(?P<value>[+-]\d\.\d{4}) (?P<unit>mm|in)`},
		"+0.3860 in\r", "0.3860 in"},
	{"channel and status", frame.Options{End: []byte("\r"), Unit: frame.Millimetre,
		Pattern: `(?P<channel>\d\d)A(?P<value>[+-]\d{5}\.\d\d)(?P<status>[HB ])`, Statuses: map[string]string{"H": "hold", "B": "battery-low"}},
		"01A+00012.34H\r", "12.34 mm 01 hold"},
	{"start byte", frame.Options{Start: []byte{2}, End: []byte{3}, Unit: frame.Inch, Pattern: `(?P<value>[ -]\d\.\d{5})`},
		"\x02-1.00005\x03", "-1.00005 in"},
	{"padded", frame.Options{End: []byte("\n"), Unit: frame.Millimetre, Pattern: `(?P<value>[+-][ \d]{4}\d\.\d{3})`},
		"-    0.005\n", "-0.005 mm"},
}

// summed are frames with checksums; each sum is computed by the test, not by

// the package.

var summed = []struct {
	name string
	o    frame.Options
	body string
	sum  func(string) string
	want string
}{
	{"sum8", sumOptions("sum8", 2), "+001.234mm", func(s string) string {
		n := 0
		for i := range s {
			n += int(s[i])
		}
		return fmt.Sprintf("%02X", n%256)
	}, "1.234 mm"},
	{"xor8", sumOptions("xor8", 2), "-001.234in", func(s string) string {
		n := byte(0)
		for i := range s {
			n ^= s[i]
		}
		return fmt.Sprintf("%02X", n)
	}, "-1.234 in"},
	{"twos-complement", sumOptions("twos-complement", 2), "+999.999mm", func(s string) string {
		n := 0
		for i := range s {
			n += int(s[i])
		}
		return fmt.Sprintf("%02X", (256-n%256)%256)
	}, "999.999 mm"},
	{"crc16", sumOptions("crc16", 4), "+012.340mm", func(s string) string {
		c := bitwiseCRC16([]byte(s))
		return fmt.Sprintf("%02X%02X", c&0xFF, c>>8)
	}, "12.340 mm"},
}

func sumOptions(kind string, digits int) frame.Options {
	return frame.Options{
		End: []byte("\r\n"), Checksum: frame.Checksum{Kind: kind},
		Pattern: fmt.Sprintf(`(?P<value>[+-]\d{3}\.\d{3})(?P<unit>mm|in)(?P<sum>[0-9A-F]{%d})`, digits),
	}
}

// bitwiseCRC16 is the algorithm of MODBUS over Serial Line V1.02, 6.2.2, as

// its text words it, without a table.

func bitwiseCRC16(b []byte) uint16 {
	c := uint16(0xFFFF)
	for _, v := range b {
		c ^= uint16(v)
		for range 8 {
			odd := c&1 == 1
			if c >>= 1; odd {
				c ^= 0xA001
			}
		}
	}
	return c
}

func open(t testing.TB, o frame.Options) frame.Decoder {
	t.Helper()
	o.Kind = frame.Text
	d, err := frame.New(o)
	if err != nil {
		t.Fatal(err)
	}
	return d
}

// read feeds the pieces and writes out every frame, rejected ones as "!reason".

func read(d frame.Decoder, pieces ...[]byte) []string {
	var out []string
	for _, p := range pieces {
		d.Feed(p, func(f *frame.Frame) { out = append(out, show(f)) })
	}
	return out
}

func show(f *frame.Frame) string {
	if f.Rejected != frame.None {
		return "!" + f.Rejected.String()
	}
	if f.NoReading != "" {
		return "?" + f.NoReading
	}
	s := f.Value.String() + " " + f.Unit.String()
	if f.Channel != nil {
		s += " " + string(f.Channel)
	}
	if f.Status != "" {
		s += " " + f.Status
	}
	return s
}

func TestGoldenAtEverySplit(t *testing.T) {
	for _, g := range golden {
		t.Run(g.name, func(t *testing.T) {
			whole := []byte(strings.Repeat(g.frame, 3))
			for i := range whole {
				for j := i; j <= len(whole); j++ {
					got := read(open(t, g.o), whole[:i], whole[i:j], whole[j:])
					if len(got) != 3 || got[0] != g.want || got[1] != g.want || got[2] != g.want {
						t.Fatalf("split at %d and %d: %q, want three times %q", i, j, got, g.want)
					}
				}
			}
		})
	}
}

func TestOffsets(t *testing.T) {
	for _, g := range golden {
		d := open(t, g.o)
		d.Reset(1000)
		var at []int64
		for _, b := range []byte(g.frame + g.frame) {
			d.Feed([]byte{b}, func(f *frame.Frame) { at = append(at, f.Offset) })
		}
		if len(at) != 2 || at[0] != 1000 || at[1] != 1000+int64(len(g.frame)) {
			t.Errorf("%s: offsets %v", g.name, at)
		}
	}
}

// mutate calls f with every single-byte deletion, insertion and truncation.

func mutate(s []byte, f func(what string, p []byte)) {
	for i := range s {
		f(fmt.Sprintf("delete byte %d", i), append(bytes.Clone(s[:i]), s[i+1:]...))
		f(fmt.Sprintf("truncate to %d", i), bytes.Clone(s[:i]))
	}
	for i := 0; i <= len(s); i++ {
		for _, c := range inserted(s) {
			p := append(bytes.Clone(s[:i]), c)
			f(fmt.Sprintf("insert %#x at %d", c, i), append(p, s[i:]...))
		}
	}
}

// inserted lists the bytes to insert: all there are; in short tests those of the

// frame and a few of other classes.

func inserted(s []byte) []byte {
	if testing.Short() {
		return append([]byte("05+-. \x00\x80\xff"), s...)
	}
	all := make([]byte, 256)
	for i := range all {
		all[i] = byte(i)
	}
	return all
}

func flips(s []byte, f func(what string, p []byte)) {
	for i := range s {
		for bit := range 8 {
			p := bytes.Clone(s)
			p[i] ^= 1 << bit
			f(fmt.Sprintf("flip bit %d of byte %d", bit, i), p)
		}
	}
}

// isWrong reports a value that was never sent. Between two intact frames the

// damaged one may be missing, or read right; nothing else.

func isWrong(got []string, want string) bool {
	for _, g := range got {
		if g[0] != '!' && g != want {
			return true
		}
	}
	return false
}

func TestNoWrongValueFromLostOrAddedBytes(t *testing.T) {
	check := func(t *testing.T, o frame.Options, text, want string) {
		before, after := []byte(text), []byte(text)
		mutate([]byte(text), func(what string, p []byte) {
			got := read(open(t, o), before, p, after)
			if isWrong(got, want) {
				t.Errorf("%s: read %q, sent only %q", what, got, want)
			}
			// One damaged frame costs at most itself and the next one.
			if whole := strings.Count(strings.Join(got, "\n"), want); whole < 1 {
				t.Errorf("%s: %q: nothing intact was read", what, got)
			}
		})
	}
	for _, g := range golden {
		t.Run(g.name, func(t *testing.T) { check(t, g.o, g.frame, g.want) })
	}
	for _, s := range summed {
		t.Run(s.name, func(t *testing.T) { check(t, s.o, s.body+s.sum(s.body)+"\r\n", s.want) })
	}
}

func TestNoWrongValueFromBitFlipsUnderChecksum(t *testing.T) {
	for _, s := range summed {
		text := s.body + s.sum(s.body) + "\r\n"
		if got := read(open(t, s.o), []byte(text)); len(got) != 1 || got[0] != s.want {
			t.Fatalf("%s: %q reads %q, want %q", s.name, text, got, s.want)
		}
		flips([]byte(text), func(what string, p []byte) {
			if got := read(open(t, s.o), p, []byte(text)); isWrong(got, s.want) {
				t.Errorf("%s: %s: read %q", s.name, what, got)
			}
		})
	}
}

// Without a checksum the grammar is the only guard: the share of single-bit

// flips that still read as another value is measured, and must not grow.

func TestShareOfBitFlipsThatSlipThroughWithoutChecksum(t *testing.T) {
	total, wrong := 0, 0
	for _, g := range golden {
		flips([]byte(g.frame), func(_ string, p []byte) {
			total++
			if isWrong(read(open(t, g.o), p, []byte(g.frame)), g.want) {
				wrong++
			}
		})
	}
	t.Logf("%d of %d single-bit flips (%.1f %%) read as another value", wrong, total, 100*float64(wrong)/float64(total))
	if wrong*100 > total*33 {
		t.Errorf("%d of %d slip through, more than 33 %%", wrong, total)
	}
}

func TestRejections(t *testing.T) {
	o := golden[3].o
	o.NoReadings = map[string]string{"Err": "over-range", "----": "no signal"}
	o.Pattern = `(?P<channel>\d\d)A(?P<value>[+-]\d{5}\.\d\d|----)(?P<status>[HBX ])`
	o.Longest = 32
	tests := []struct{ in, want string }{
		{"Err\r", "?over-range"},
		{" Err \r", "?over-range"},
		{"01A---- \r", "?no signal"},
		{"01A+00012.34X\r", "!unknown status"},
		{"01A+00012.34 \r", "12.34 mm 01"},
		{"01A-00000.00 \r", "0.00 mm 01"},
		{"\r", "!does not match the frame's grammar"},
		{"01A+00012.34\x00\r", "!does not match the frame's grammar"},
		{strings.Repeat("9", 40) + "\r01A+00012.34 \r", "!no terminator within the longest frame|12.34 mm 01"},
	}
	for _, tt := range tests {
		if got := strings.Join(read(open(t, o), []byte(tt.in)), "|"); got != tt.want {
			t.Errorf("%q: %q, want %q", tt.in, got, tt.want)
		}
	}
}

func TestOverlongAtEverySplitAndLength(t *testing.T) {
	o := golden[0].o
	o.Longest = 16
	for n := range 60 {
		whole := []byte(strings.Repeat("A", n) + "\r\n+001.234\r\n")
		for i := range whole {
			got := read(open(t, o), whole[:i], whole[i:])
			if len(got) != 2 || got[0][0] != '!' || got[1] != "1.234 mm" {
				t.Fatalf("%d bytes of noise, split at %d: %q", n, i, got)
			}
		}
	}
}

// Row 12 of the fault table: an endless stream without terminator is one

// rejection and no memory. (64 MiB here; the bound does not depend on it.)

func TestEndlessStream(t *testing.T) {
	d := open(t, golden[0].o)
	noise := bytes.Repeat([]byte("A"), 1<<16)
	rejected := 0
	emit := func(*frame.Frame) { rejected++ }
	allocs := testing.AllocsPerRun(1024, func() { d.Feed(noise, emit) })
	if rejected != 1 || allocs != 0 || d.Pending() > 256 {
		t.Errorf("%d rejections, %v allocations a call, %d bytes pending", rejected, allocs, d.Pending())
	}
}

// FuzzText holds the promises on any bytes and any split: the same frames

// whatever the split, offsets that tile, no value that was not in the bytes.
