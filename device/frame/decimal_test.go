package frame_test

import (
	"math"
	"math/big"
	"testing"

	"pgregory.net/rapid"

	"gaugelog/device/frame"
)

func TestParseDecimal(t *testing.T) {
	tests := []struct {
		in    string
		want  float64
		scale int
		ok    bool
	}{
		{"+001.234", 1.234, 3, true}, {"-0.005", -0.005, 3, true}, {"-000.000", 0, 3, true},
		{"  12,34 ", 12.34, 2, true}, {"- 1.5", -1.5, 1, true}, {".386", 0.386, 3, true}, {"5.", 5, 0, true},
		{"1.5E-3", 0.0015, 4, true}, {"12e2", 1200, -2, true}, {"000000000000000000001", 1, 0, true},
		{"", 0, 0, false}, {"+", 0, 0, false}, {".", 0, 0, false}, {"1.2.3", 0, 0, false}, {"--1", 0, 0, false},
		{"1 2", 0, 0, false}, {"1e", 0, 0, false}, {"1e99", 0, 0, false}, {"0x1", 0, 0, false}, {"1_0", 0, 0, false},
		{"1234567890123456789", 0, 0, false}, {"NaN", 0, 0, false}, {"1.2-", 0, 0, false},
	}
	for _, tt := range tests {
		d, ok := frame.ParseDecimal([]byte(tt.in))
		if ok != tt.ok || ok && (d.Float64() != tt.want || d.Scale != tt.scale || math.Signbit(d.Float64()) != (tt.want < 0)) {
			t.Errorf("%q: %+v, %v", tt.in, d, ok)
		}
	}
}

func TestInchesExactly(t *testing.T) {
	d, _ := frame.ParseDecimal([]byte("0.386"))
	if got := d.MM(frame.Inch); got != 9.8044 {
		t.Errorf("0.386 in = %v mm, want the float64 nearest to 9.8044", got)
	}
	// Against exact rational arithmetic of the standard library.
	rapid.Check(t, func(t *rapid.T) {
		d := frame.Decimal{
			Digits: rapid.Int64Range(-999999999999999999, 999999999999999999).Draw(t, "digits"),
			Scale:  rapid.IntRange(-5, 25).Draw(t, "scale"),
		}
		exact := new(big.Rat).SetInt64(d.Digits)
		ten := big.NewRat(10, 1)
		for range max(d.Scale, -d.Scale) {
			if d.Scale > 0 {
				exact.Quo(exact, ten)
			} else {
				exact.Mul(exact, ten)
			}
		}
		if want, _ := exact.Float64(); d.Float64() != want {
			t.Fatalf("%+v: %v, want %v", d, d.Float64(), want)
		}
		if want, _ := exact.Mul(exact, big.NewRat(254, 10)).Float64(); d.MM(frame.Inch) != want {
			t.Fatalf("%+v in: %v mm, want %v", d, d.MM(frame.Inch), want)
		}
	})
}

// The check value of CRC-16/MODBUS is 4B37 (catalogues of CRC algorithms);
// the sums of the two read requests, 84 0A and C4 0B on the line, were computed
// beforehand with another implementation.
func TestCRC16(t *testing.T) {
	for in, want := range map[string]uint16{
		"123456789":                0x4B37,
		"\x01\x03\x00\x00\x00\x01": 0x0A84,
		"\x01\x03\x00\x00\x00\x02": 0x0BC4,
	} {
		if got := frame.CRC16([]byte(in)); got != want {
			t.Errorf("CRC16(%q) = %04X, want %04X", in, got, want)
		}
	}
	rapid.Check(t, func(t *rapid.T) {
		b := rapid.SliceOf(rapid.Byte()).Draw(t, "bytes")
		if got, want := frame.CRC16(b), bitwiseCRC16(b); got != want {
			t.Fatalf("%x: %04X, bitwise %04X", b, got, want)
		}
	})
}

// The XOR of a published NMEA 0183 sample sentence between $ and * is 27 hex.
func TestChecksumCover(t *testing.T) {
	one, minus3 := 1, -3
	o := frame.Options{
		End: []byte("\r\n"), Unit: frame.Millimetre, Checksum: frame.Checksum{Kind: "xor8", From: &one, To: &minus3},
		Pattern: `\$GPGLL,(?P<value>\d{4}\.\d{3}),N,00146\.110,E,142451,A\*(?P<sum>[0-9A-F]{2})`,
	}
	if got := read(open(t, o), []byte("$GPGLL,5057.970,N,00146.110,E,142451,A*27\r\n")); len(got) != 1 || got[0] != "5057.970 mm" {
		t.Errorf("read %q", got)
	}
	if got := read(open(t, o), []byte("$GPGLL,5057.971,N,00146.110,E,142451,A*27\r\n")); len(got) != 1 || got[0] != "!wrong checksum" {
		t.Errorf("read %q", got)
	}
}
