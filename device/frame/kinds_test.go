package frame_test

import (
	"bytes"
	"encoding/hex"
	"fmt"
	"strings"
	"testing"

	"gaugelog/device/frame"
)

func unhex(s string) []byte {
	b, err := hex.DecodeString(strings.ReplaceAll(s, " ", ""))
	if err != nil {
		panic(err)
	}
	return b
}

// withCRC appends the CRC, low byte first, by the bitwise algorithm.
func withCRC(s string) []byte {
	b := unhex(s)
	c := bitwiseCRC16(b)
	return append(b, byte(c), byte(c>>8))
}

var (
	one      = frame.Decimal{Digits: 1}
	thousand = frame.Decimal{Digits: 1, Scale: 3}
	minusTwo = -2
	minusOne = -1
)

// packed is a nibbles frame: header F, sign, six digits, point, unit or status.
func packed() *frame.NibblesOptions {
	return &frame.NibblesOptions{
		Count: 10, Packed: true, Header: []byte{0xF},
		Sign:     &frame.NibbleField{At: 1, Codes: map[byte]string{0: "+", 8: "-"}},
		DigitsAt: 2, Digits: 6,
		Point:  &frame.NibbleField{At: 8, Codes: map[byte]string{2: "2", 3: "3"}},
		Status: &frame.NibbleField{At: 9, Codes: map[byte]string{0: "", 1: "hold", 0xA: "over-range"}},
	}
}

func changed(n *frame.NibblesOptions, change func(*frame.NibblesOptions)) *frame.NibblesOptions {
	change(n)
	return n
}

func counts(width int, big bool, kind string) *frame.BinaryOptions {
	return &frame.BinaryOptions{
		Length: 10, Sync: []byte{0xAA, 0x55}, Offset: 2, Width: width, BigEndian: big, Type: kind, Scale: thousand,
		Flags: []frame.Flag{{Byte: 7, Bit: 0, Means: "hold"}, {Byte: 7, Bit: 1, Means: "battery-low"}, {Byte: 7, Bit: 7, Means: "in"}},
	}
}

func registers() *frame.ModbusOptions {
	return &frame.ModbusOptions{Function: 3, Address: 17, Registers: 3, Type: "int32", Scale: thousand, StatusAt: 2,
		StatusBits: map[int]string{0: "battery-low", 4: "over-range"}}
}

// strong are golden frames that text grammar or a crc16 guards: no fault of
// one byte may give a wrong value. want is worked out by hand.
var strong = []kindCase{
	{"binary crc signed", frame.Options{Kind: frame.Binary, Unit: frame.Millimetre, Binary: counts(3, true, "signed"), Checksum: frame.Checksum{Kind: "crc16", Binary: true, At: &minusTwo}},
		withCRC("AA 55 FF CF C7 00 00 01"), "-12.345 mm hold"},
	{"binary crc inches", frame.Options{Kind: frame.Binary, Unit: frame.Millimetre, Binary: counts(2, false, "unsigned"), Checksum: frame.Checksum{Kind: "crc16", Binary: true, At: &minusTwo}},
		withCRC("AA 55 82 01 00 00 00 80"), "0.386 in"},
	{"nibbles crc", frame.Options{Kind: frame.Nibbles, Unit: frame.Millimetre, Nibbles: packed(), Checksum: frame.Checksum{Kind: "crc16", Binary: true}},
		withCRC("F8 01 23 45 31"), "-12.345 mm hold"},
	{"nibbles hex with end", frame.Options{Kind: frame.Nibbles, Unit: frame.Millimetre, Start: []byte{2}, End: []byte("\r"),
		Nibbles: changed(packed(), func(n *frame.NibblesOptions) { n.Packed = false })}, []byte("\x02F801234531\r"), "-12.345 mm hold"},
	{"modbus int32", frame.Options{Kind: frame.ModbusReply, Unit: frame.Millimetre, Modbus: registers()},
		withCRC("11 03 06 00 01 E2 40 00 01"), "123.456 mm 17 battery-low"},
	{"modbus float32", frame.Options{Kind: frame.ModbusReply, Unit: frame.Inch,
		Modbus: &frame.ModbusOptions{Function: 4, Address: 1, Registers: 2, Type: "float32", Scale: one, StatusAt: -1}},
		withCRC("01 04 04 C2 ED 40 00"), "-118.625 in 1"},
}

// summed8 are frames with a sum of eight bits.
var summed8 = []kindCase{
	{"binary sum8", frame.Options{Kind: frame.Binary, Unit: frame.Millimetre, Binary: counts(4, false, "signed"), Checksum: frame.Checksum{Kind: "sum8", Binary: true, At: &minusOne}},
		unhex("AA 55 39 30 00 00 00 01 00 69"), "12.345 mm hold"},
	{"binary xor8", frame.Options{Kind: frame.Binary, Unit: frame.Millimetre, Binary: counts(4, true, "signed"), Checksum: frame.Checksum{Kind: "xor8", Binary: true, At: &minusOne}},
		unhex("AA 55 FF FF CF C7 00 00 00 F7"), "-12.345 mm"},
	{"nibbles twos-complement", frame.Options{Kind: frame.Nibbles, Unit: frame.Millimetre, Nibbles: packed(), Checksum: frame.Checksum{Kind: "twos-complement", Binary: true}},
		unhex("F0 01 23 45 30 77"), "12.345 mm"},
}

// bare are frames that only grammar and the gap behind them guard.
var bare = []kindCase{
	{"binary", frame.Options{Kind: frame.Binary, Unit: frame.Millimetre, Binary: counts(4, false, "signed")},
		unhex("AA 55 39 30 00 00 00 01 00 00"), "12.345 mm hold"},
	{"binary without sync", frame.Options{Kind: frame.Binary, Unit: frame.Millimetre, Binary: &frame.BinaryOptions{Length: 4, Width: 4, BigEndian: true, Type: "float", Scale: one}},
		unhex("42 F6 E9 79"), "123.456 mm"},
	{"nibbles", frame.Options{Kind: frame.Nibbles, Unit: frame.Millimetre, Nibbles: packed()},
		unhex("F8 01 23 45 31"), "-12.345 mm hold"},
	{"nibbles least first, low nibble first", frame.Options{Kind: frame.Nibbles, Unit: frame.Millimetre,
		Nibbles: changed(packed(), func(n *frame.NibblesOptions) { n.LowFirst, n.LeastFirst = true, true })},
		unhex("0F 45 23 01 02"), "123.45 mm"},
	{"nibbles hex", frame.Options{Kind: frame.Nibbles, Nibbles: changed(packed(), func(n *frame.NibblesOptions) {
		n.Packed, n.Status, n.Unit = false, nil, &frame.NibbleField{At: 9, Codes: map[byte]string{0: "mm", 1: "in"}}
	})}, []byte("F000038631"), "0.386 in"},
}

// spoken are SCPI answers.
var spoken = []kindCase{
	{"scpi NR1", frame.Options{Kind: frame.SCPIReply, Unit: frame.Millimetre, SCPI: &frame.SCPIOptions{Scale: thousand}}, []byte("+12345\n"), "12.345 mm"},
	{"scpi NR2", frame.Options{Kind: frame.SCPIReply, Unit: frame.Millimetre, SCPI: &frame.SCPIOptions{Scale: one}}, []byte("-12.345\r\n"), "-12.345 mm"},
	{"scpi NR3", frame.Options{Kind: frame.SCPIReply, Unit: frame.Inch, SCPI: &frame.SCPIOptions{Scale: one}}, []byte("+3.8600E-01\n"), "0.38600 in"},
}

type kindCase struct {
	name  string
	o     frame.Options
	frame []byte
	want  string
}

func everyKind() []kindCase {
	var all []kindCase
	for _, list := range [][]kindCase{strong, summed8, bare, spoken} {
		all = append(all, list...)
	}
	return all
}

func (c kindCase) open(t testing.TB) frame.Decoder {
	t.Helper()
	d, err := frame.New(c.o)
	if err != nil {
		t.Fatalf("%s: %v", c.name, err)
	}
	return d
}

// gap stands for a pause of the line between the pieces given to heard.
var gap []byte

// heard feeds the pieces, with a pause where gap stands and at the end.
func heard(d frame.Decoder, pieces ...[]byte) []string {
	var out []string
	emit := func(f *frame.Frame) { out = append(out, show(f)) }
	for _, p := range pieces {
		if p == nil {
			d.Quiet(emit)
		}
		d.Feed(p, emit)
	}
	d.Quiet(emit)
	return out
}

// Three frames in a row, and with a pause between, at every split.
func TestEveryKindAtEverySplit(t *testing.T) {
	for _, c := range everyKind() {
		t.Run(c.name, func(t *testing.T) {
			n := len(c.frame)
			whole := bytes.Repeat(c.frame, 3)
			inRow := 3
			if c.name == "binary without sync" {
				inRow = 0 // frames in a row cannot be told apart
			}
			for i := range whole {
				for j := i; j <= len(whole); j++ {
					got := heard(c.open(t), whole[:i], whole[i:j], whole[j:])
					if count(got, c.want) != inRow || len(got) != max(inRow, 1) {
						t.Fatalf("split at %d and %d: %q, want %d times %q", i, j, got, inRow, c.want)
					}
				}
			}
			for i := range n {
				got := heard(c.open(t), c.frame[:i:i], c.frame[i:], gap, c.frame, gap, c.frame[:i:i], c.frame[i:])
				if count(got, c.want) != 3 || len(got) != 3 {
					t.Fatalf("with pauses, split at %d: %q", i, got)
				}
			}
		})
	}
}

func count(got []string, want string) int {
	n := 0
	for _, g := range got {
		if g == want {
			n++
		}
	}
	return n
}

// Faults of one byte between two intact frames, with and without pauses
// around them: no value that was not sent, and an intact frame is read.
func TestNoWrongValueUnderGrammarOrCRC(t *testing.T) {
	for _, c := range strong {
		t.Run(c.name, func(t *testing.T) {
			check := func(what string, p []byte) {
				for _, pieces := range [][][]byte{{c.frame, p, c.frame}, {c.frame, gap, p, gap, c.frame}, {c.frame, gap, p, c.frame}} {
					got := heard(c.open(t), pieces...)
					if isWrong(got, c.want) || count(got, c.want) < 1 {
						t.Errorf("%s: read %q, sent only %q", what, got, c.want)
					}
				}
			}
			mutate(c.frame, check)
			if c.o.Kind != frame.Nibbles || c.o.Checksum.Kind != "" { // flips of text have no checksum to fail
				flips(c.frame, check)
			}
		})
	}
}

// A sum of eight bits finds every flip of one bit.
func TestNoWrongValueFromFlipsUnderSum8(t *testing.T) {
	for _, c := range summed8 {
		flips(c.frame, func(what string, p []byte) {
			for _, pieces := range [][][]byte{{c.frame, p, c.frame}, {c.frame, gap, p, gap, c.frame}} {
				if got := heard(c.open(t), pieces...); isWrong(got, c.want) || count(got, c.want) < 1 {
					t.Errorf("%s: %s: read %q", c.name, what, got)
				}
			}
		})
	}
}

// One damaged frame between intact ones costs at most itself and one more.
func TestIntactNeighboursAreRead(t *testing.T) {
	for _, c := range everyKind() {
		if c.name == "binary without sync" {
			continue
		}
		mutate(c.frame, func(what string, p []byte) {
			got := heard(c.open(t), c.frame, c.frame, p, c.frame, c.frame)
			if count(got, c.want) < 3 {
				t.Errorf("%s: %s: only %q", c.name, what, got)
			}
		})
	}
}

// Offsets of frames tile the bytes, rejected ones included.
func TestOffsetsOfEveryKind(t *testing.T) {
	for _, c := range everyKind() {
		d := c.open(t)
		d.Reset(1000)
		noise := []byte{0x13, 0x13}
		var got []string
		emit := func(f *frame.Frame) {
			got = append(got, fmt.Sprintf("%d+%d %v", f.Offset, f.Size, f.Rejected == frame.None))
		}
		d.Feed(noise, emit)
		d.Quiet(emit)
		for _, b := range c.frame {
			d.Feed([]byte{b}, emit)
		}
		d.Quiet(emit)
		n := len(c.frame)
		want := []string{"1000+2 false", fmt.Sprintf("1002+%d true", n)}
		if d.Pending() != 0 {
			t.Errorf("%s: %d bytes pending", c.name, d.Pending())
		}
		if len(c.o.End) > 0 || c.o.Kind == frame.SCPIReply { // noise before a terminator belongs to the frame
			want = []string{fmt.Sprintf("1000+%d false", n+2)}
			if len(c.o.Start) > 0 {
				want = []string{"1000+2 false", fmt.Sprintf("1002+%d true", n)}
			}
		}
		if strings.Join(got, ", ") != strings.Join(want, ", ") {
			t.Errorf("%s: %q, want %q", c.name, got, want)
		}
	}
}

// Row 12 of the fault table: an endless stream without a frame is one
// rejection and no memory.
func TestEndlessStreamOfEveryKind(t *testing.T) {
	for _, c := range everyKind() {
		d := c.open(t)
		noise := bytes.Repeat([]byte("Z"), 1<<14)
		rejected := 0
		emit := func(f *frame.Frame) {
			if f.Rejected != frame.None {
				rejected++
			}
		}
		allocs := testing.AllocsPerRun(64, func() { d.Feed(noise, emit) })
		if rejected != 1 || allocs != 0 || d.Pending() > 600 {
			t.Errorf("%s: %d rejections, %v allocations a call, %d bytes pending", c.name, rejected, allocs, d.Pending())
		}
		if got := heard(d, gap, c.frame); count(got, c.want) != 1 && len(c.o.End) == 0 && c.o.Kind != frame.SCPIReply {
			t.Errorf("%s: after the stream %q", c.name, got)
		}
	}
}

func TestEveryKindAllocatesNothing(t *testing.T) {
	for _, c := range everyKind() {
		d := c.open(t)
		n := 0
		emit := func(f *frame.Frame) {
			if f.Rejected == frame.None && f.Value.MM(f.Unit) != 0 {
				n++
			}
		}
		d.Feed(c.frame, emit)
		d.Quiet(emit)
		if a := testing.AllocsPerRun(100, func() { d.Feed(c.frame, emit); d.Quiet(emit) }); a != 0 {
			t.Errorf("%s: %v allocations a frame", c.name, a)
		}
		if n != 102 {
			t.Errorf("%s: %d frames", c.name, n)
		}
	}
}

func BenchmarkKinds(b *testing.B) {
	for _, c := range everyKind() {
		b.Run(c.name, func(b *testing.B) {
			d := c.open(b)
			b.SetBytes(int64(len(c.frame)))
			b.ReportAllocs()
			emit := func(*frame.Frame) {}
			for b.Loop() {
				d.Feed(c.frame, emit)
				d.Quiet(emit)
			}
		})
	}
}
