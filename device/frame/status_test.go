package frame_test

import (
	"testing"

	"gaugelog/device/frame"
)

// A status that says the number shown is none makes a non-reading in every
// kind; the others go with the value, the gravest first.
func TestStatusThatDeniesTheValue(t *testing.T) {
	text := func(code string) kindCase {
		return kindCase{o: frame.Options{Kind: frame.Text, End: []byte("\r"), Unit: frame.Millimetre, Pattern: `(?P<value>[+-]\d\.\d{3})(?P<status>[OUEHB ])`,
			Statuses: map[string]string{"O": "over-range", "U": "under-range", "E": "error", "H": "hold", "B": "battery-low"}},
			frame: []byte("+1.234" + code + "\r")}
	}
	bits := func(flags byte) kindCase {
		b := *counts(4, false, "signed")
		b.Flags = append([]frame.Flag{{Byte: 7, Bit: 4, Means: "over-range"}, {Byte: 7, Bit: 5, Means: "error"}}, b.Flags...)
		p := unhex("AA 55 39 30 00 00 00 00 00 00")
		p[7] = flags
		return kindCase{o: frame.Options{Kind: frame.Binary, Unit: frame.Millimetre, Binary: &b}, frame: p}
	}
	nan := kindCase{o: frame.Options{Kind: frame.Binary, Unit: frame.Millimetre, Binary: &frame.BinaryOptions{
		Length: 9, Width: 8, BigEndian: true, Type: "unsigned", Scale: one, Flags: []frame.Flag{{Byte: 8, Bit: 0, Means: "over-range"}}}},
		frame: unhex("FF FF FF FF FF FF FF FF 01")}
	for _, tt := range []struct {
		c    kindCase
		want string
	}{
		{text("O"), "?over-range"}, {text("U"), "?under-range"}, {text("E"), "?error"},
		{text("H"), "1.234 mm hold"}, {text("B"), "1.234 mm battery-low"}, {text(" "), "1.234 mm"},
		{bits(0), "12.345 mm"}, {bits(3), "12.345 mm hold"}, {bits(2), "12.345 mm battery-low"},
		{bits(0x13), "?over-range"}, {bits(0x31), "?error"}, {bits(0x80), "12.345 in"},
		{nan, "?over-range"},
	} {
		if got := heard(tt.c.open(t), tt.c.frame); len(got) != 1 || got[0] != tt.want {
			t.Errorf("%q: %q, want %q", tt.c.frame, got, tt.want)
		}
	}
}
