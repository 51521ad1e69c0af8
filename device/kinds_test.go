package device_test

import (
	"encoding/hex"
	"strings"
	"testing"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/device/frame"
)

func number(shown string, v float64) *config.Number {
	return &config.Number{Quantity: config.Quantity{Value: v, Shown: shown}}
}

func at(n int) *int { return &n }

func fromHex(t testing.TB, s string) []byte {
	t.Helper()
	b, err := hex.DecodeString(strings.ReplaceAll(s, " ", ""))
	if err != nil {
		t.Fatal(err)
	}
	return b
}

// digitsFrame is a packed frame made up for the tests: header F, sign, six
// digits, point, status.
func digitsFrame() config.Frame {
	return config.Frame{Name: "digits", Kind: "nibbles", Unit: "mm", Nibbles: &config.Nibbles{
		Count: 10, Coding: "packed", Header: "F",
		Sign:   &config.NibbleField{At: 1, Codes: map[string]string{"0": "+", "8": "-"}},
		Digits: config.NibbleSpan{At: 2, Count: 6},
		Point:  &config.NibbleField{At: 8, Codes: map[string]string{"2": "2", "3": "3"}},
		Status: &config.NibbleField{At: 9, Codes: map[string]string{"1": "hold", "A": "over-range"}},
	}}
}

// countsFrame is a binary frame made up for the tests.
func countsFrame() config.Frame {
	return config.Frame{Name: "counts", Kind: "binary", Unit: "mm",
		Checksum: &config.Checksum{Kind: "crc16", At: at(-2)},
		Binary: &config.Binary{Length: 8, Sync: "AA 55", Offset: 2, Width: 3, Order: "big", Type: "signed", Scale: number("0.001", 0.001),
			Flags: []config.Flag{{Byte: 5, Bit: 0, Means: "hold"}, {Byte: 5, Bit: 7, Means: "in"}}},
	}
}

// Each kind from its description in the rig file to the number read; the
// bytes are made by hand, but for the CRCs: those come from frame.CRC16, which
// the frame package holds against published values.
func TestDescriptions(t *testing.T) {
	crc := func(s string) []byte {
		b := fromHex(t, s)
		c := frame.CRC16(b)
		return append(b, byte(c), byte(c>>8))
	}
	words := config.Frame{Kind: "modbus", Unit: "mm", Modbus: &config.Modbus{
		Function: "input", Register: 4, Type: "int32", WordOrder: "low-first", Scale: number("0.0001", 0.0001),
		Status: at(2), StatusBits: map[string]string{"3": "battery-low"},
	}}
	tests := []struct {
		name  string
		f     config.Frame
		bytes []byte
		want  string
	}{
		{"nibbles", digitsFrame(), fromHex(t, "F8 01 23 45 31"), "-12.345 mm hold"},
		{"nibbles ordinary", digitsFrame(), fromHex(t, "F0 00 05 00 20"), "5.00 mm"},
		{"nibbles over range", digitsFrame(), fromHex(t, "F0 AA AA AA 3A"), "?over-range"},
		{"binary", countsFrame(), crc("AA 55 FF CF C7 01"), "-12.345 mm hold"},
		{"binary inches", countsFrame(), crc("AA 55 00 01 82 80"), "0.386 in"},
		{"modbus", words, crc("07 04 08 00 08 00 00 E2 40 00 01"), "12.3456 mm battery-low"},
		{"scpi", config.Frame{Kind: "scpi", Unit: "in", SCPI: &config.SCPI{Query: "READ?", Scale: number("0.001", 0.001)}}, []byte("+3.86E+02\n"), "0.386 in"},
	}
	for _, tt := range tests {
		o, err := device.FrameOptions(tt.f, "7")
		if err != nil {
			t.Errorf("%s: %v", tt.name, err)
			continue
		}
		d, err := frame.New(o)
		if err != nil {
			t.Errorf("%s: %v", tt.name, err)
			continue
		}
		var got []string
		emit := func(f *frame.Frame) {
			switch {
			case f.Rejected != frame.None:
				got = append(got, "!"+f.Rejected.String())
			case f.NoReading != "":
				got = append(got, "?"+f.NoReading)
			default:
				got = append(got, strings.TrimSpace(f.Value.String()+" "+f.Unit.String()+" "+f.Status))
			}
		}
		d.Feed(tt.bytes, emit)
		d.Quiet(emit)
		if len(got) != 1 || got[0] != tt.want {
			t.Errorf("%s: %q, want %q", tt.name, got, tt.want)
		}
	}
}
