package frame_test

import (
	"bytes"
	"encoding/hex"
	"strings"
	"testing"

	"gaugelog/device/frame"
)

// Check values: 4B37 for "123456789" is that of CRC-16/MODBUS in the catalogue
// of parametrised CRC algorithms; 01 03 00 00 00 01 ends in 84 0A and
// ..02 in C4 0B; the pair of slave 17 is the common worked example of
// function 3 (both from memory, and both also satisfy the bitwise algorithm
// of the serial line specification).
func TestPublishedModbusCRC(t *testing.T) {
	if got := frame.CRC16([]byte("123456789")); got != 0x4B37 {
		t.Errorf("check value %04X, want 4B37", got)
	}
	for _, s := range []string{
		"01 03 00 00 00 01 84 0A",
		"01 03 00 00 00 02 C4 0B",
		"11 03 00 6B 00 03 76 87",
		"11 03 06 AE 41 56 52 43 40 49 AD",
	} {
		b := unhex(s)
		n := len(b) - 2
		crc := frame.CRC16(b[:n])
		if b[n] != byte(crc) || b[n+1] != byte(crc>>8) || crc != bitwiseCRC16(b[:n]) {
			t.Errorf("%s: CRC %04X, low byte first", s, crc)
		}
	}
}

func TestModbusRequest(t *testing.T) {
	for want, got := range map[string][]byte{
		"010300000001840a": frame.ModbusRequest(1, 3, 0, 1),
		"010300000002c40b": frame.ModbusRequest(1, 3, 0, 2),
		"1103006b00037687": frame.ModbusRequest(17, 3, 107, 3),
	} {
		if hex.EncodeToString(got) != want {
			t.Errorf("%x, want %s", got, want)
		}
	}
}

func modbus(function, address byte, count, at int, kind string) frame.Options {
	return frame.Options{Kind: frame.ModbusReply, Unit: frame.Millimetre, Modbus: &frame.ModbusOptions{
		Function: function, Address: address, Registers: count, ValueAt: at, Type: kind, Scale: one, StatusAt: -1}}
}

// The answers of MODBUS Application Protocol V1.1b3, 6.3 (registers 108 to
// 110 hold 022B, 0 and 64 hex) and 6.4 (register 9 holds 000A hex), from
// memory, with the address and CRC of the serial line around them.
func TestPublishedModbusAnswers(t *testing.T) {
	holding := withCRC("11 03 06 02 2B 00 00 00 64")
	for at, want := range []string{"555 mm 17", "0 mm 17", "100 mm 17"} {
		c := kindCase{o: modbus(3, 17, 3, at, "uint16")}
		if got := heard(c.open(t), holding); len(got) != 1 || got[0] != want {
			t.Errorf("register %d: %q, want %q", 108+at, got, want)
		}
	}
	c := kindCase{o: modbus(4, 17, 1, 0, "int16")}
	if got := heard(c.open(t), withCRC("11 04 02 00 0A")); len(got) != 1 || got[0] != "10 mm 17" {
		t.Errorf("input register 9: %q", got)
	}
}

func TestModbusTypesAndRejections(t *testing.T) {
	low := func(o frame.Options) frame.Options { o.Modbus.LowFirst = true; return o }
	tests := []struct {
		name string
		o    frame.Options
		p    []byte
		want string
	}{
		{"int16 minus", modbus(3, 1, 1, 0, "int16"), withCRC("01 03 02 FF FE"), "-2 mm 1"},
		{"uint16 full", modbus(3, 1, 1, 0, "uint16"), withCRC("01 03 02 FF FE"), "65534 mm 1"},
		{"int32", modbus(3, 1, 2, 0, "int32"), withCRC("01 03 04 FF FF FF FE"), "-2 mm 1"},
		{"int32 low first", low(modbus(3, 1, 2, 0, "int32")), withCRC("01 03 04 00 02 00 01"), "65538 mm 1"},
		{"uint32", modbus(3, 1, 2, 0, "uint32"), withCRC("01 03 04 FF FF FF FE"), "4294967294 mm 1"},
		{"float32", modbus(3, 1, 2, 0, "float32"), withCRC("01 03 04 3F 9D F3 B6"), "1.234 mm 1"},
		{"float32 low first", low(modbus(3, 1, 2, 0, "float32")), withCRC("01 03 04 F3 B6 3F 9D"), "1.234 mm 1"},
		{"not a number", modbus(3, 1, 2, 0, "float32"), withCRC("01 03 04 7F C0 00 00"), "?not a number"},
		{"infinity", modbus(3, 1, 2, 0, "float32"), withCRC("01 03 04 7F 80 00 00"), "?infinity"},
		{"exception 2", modbus(3, 1, 1, 0, "int16"), withCRC("01 83 02"), "!the instrument refused the request"},
		{"exception of another", modbus(3, 1, 1, 0, "int16"), withCRC("02 83 02"), "!answer from another address"},
		{"another address", modbus(3, 1, 1, 0, "int16"), withCRC("02 03 02 00 01"), "!answer from another address"},
		{"another address, longer", modbus(3, 1, 1, 0, "int16"), withCRC("02 03 08 00 01 00 02 00 03 00 04"), "!answer from another address"},
		{"another function", modbus(3, 1, 1, 0, "int16"), withCRC("01 04 02 00 01"), "!does not match the frame's grammar"},
		{"another length", modbus(3, 1, 1, 0, "int16"), withCRC("01 03 04 00 01 00 02"), "!does not match the frame's grammar"},
		{"wrong CRC", modbus(3, 1, 1, 0, "int16"), unhex("01 03 02 00 01 00 00"), "!wrong checksum"},
		{"no end", modbus(3, 1, 1, 0, "int16"), unhex("01 03 02 00"), "!unfinished frame"},
		{"a request", modbus(3, 1, 1, 0, "int16"), unhex("01 03 00 00 00 01 84 0A"), "!does not match the frame's grammar"},
		{"noise before", modbus(3, 1, 1, 0, "int16"), append([]byte{0, 0xFF}, withCRC("01 03 02 00 07")...), "!does not match the frame's grammar|7 mm 1"},
		{"noise like a header", modbus(3, 1, 1, 0, "int16"), append([]byte{1, 3, 0x20}, withCRC("01 03 02 00 07")...), "!unfinished frame|7 mm 1"},
	}
	for _, tt := range tests {
		c := kindCase{name: tt.name, o: tt.o}
		if got := strings.Join(heard(c.open(t), tt.p), "|"); got != tt.want {
			t.Errorf("%s: %q, want %q", tt.name, got, tt.want)
		}
	}
}

func TestModbusExceptionIsTyped(t *testing.T) {
	c := kindCase{o: modbus(4, 9, 1, 0, "int16")}
	var code byte
	c.open(t).Feed(withCRC("09 84 06"), func(f *frame.Frame) {
		if f.Rejected == frame.Refused && !f.HasValue {
			code = f.Exception
		}
	})
	if code != 6 || frame.ExceptionText(code) != "server device busy" || frame.ExceptionText(99) != "exception code 99" {
		t.Errorf("exception %d", code)
	}
}

func TestModbusStatusRegister(t *testing.T) {
	for p, want := range map[string]string{
		"11 03 06 00 01 E2 40 00 00": "123.456 mm 17",
		"11 03 06 00 01 E2 40 00 01": "123.456 mm 17 battery-low",
		"11 03 06 00 01 E2 40 00 11": "?over-range",
		"11 03 06 00 01 E2 40 80 00": "123.456 mm 17", // a bit nothing is said of
	} {
		c := kindCase{o: frame.Options{Kind: frame.ModbusReply, Unit: frame.Millimetre, Modbus: registers()}}
		if got := heard(c.open(t), withCRC(p)); len(got) != 1 || got[0] != want {
			t.Errorf("%s: %q, want %q", p, got, want)
		}
	}
}

// Bytes of many answers on one bus, torn anywhere: never a value under
// another's address.
func TestModbusBusTornAnywhere(t *testing.T) {
	mine, other := withCRC("01 03 02 00 07"), withCRC("02 03 02 01 2C")
	c := kindCase{o: modbus(3, 1, 1, 0, "int16")}
	bus := bytes.Join([][]byte{other, mine, other, other, mine}, nil)
	for i := range bus {
		for j := i; j <= len(bus); j++ {
			got := heard(c.open(t), append(bytes.Clone(bus[:i]), bus[j:]...))
			if isWrong(got, "7 mm 1") {
				t.Fatalf("without bytes %d to %d: %q", i, j, got)
			}
		}
	}
}
