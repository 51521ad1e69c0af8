package wire

import (
	"encoding/binary"
	"encoding/hex"
	"math"
	"math/bits"
	"strings"
	"testing"

	"gaugelog/config"

	"pgregory.net/rapid"
)

func scale(x float64) *config.Number {
	return &config.Number{Quantity: config.Quantity{Value: x}}
}

// slowCRC is CRC-16/MODBUS in its other form, highest bit first: polynomial
// 0x8005, bytes and result reversed (the catalogue's way of writing it).
func slowCRC(b []byte) uint16 {
	crc := uint16(0xFFFF)
	for _, c := range b {
		crc ^= uint16(bits.Reverse8(c)) << 8
		for range 8 {
			if crc&0x8000 != 0 {
				crc = crc<<1 ^ 0x8005
			} else {
				crc <<= 1
			}
		}
	}
	return bits.Reverse16(crc)
}

// TestCRC: check value 4B37 for "123456789" (the catalogue of CRC parameters,
// CRC-16/MODBUS, from memory), and the request 01 03 00 00 00 01, which ends
// in 84 0A.
func TestCRC(t *testing.T) {
	if crc16([]byte("123456789")) != 0x4B37 || slowCRC([]byte("123456789")) != 0x4B37 {
		t.Error("check value of CRC-16/MODBUS")
	}
	f := config.Frame{Kind: "modbus", Unit: "mm", Modbus: &config.Modbus{Function: "holding", Address: offset(1), Type: "int16"}}
	e, err := New(&f, Instrument{})
	if err != nil {
		t.Fatal(err)
	}
	if got := hex.EncodeToString(e.Request()); got != "010300000001840a" {
		t.Errorf("request %s", got)
	}
	rapid.Check(t, func(t *rapid.T) {
		b := rapid.SliceOf(rapid.Byte()).Draw(t, "bytes")
		if crc16(b) != slowCRC(b) {
			t.Fatalf("%x", b)
		}
	})
}

func withCRC(b string) string {
	raw, _ := hex.DecodeString(strings.ReplaceAll(b, " ", ""))
	crc := slowCRC(raw)
	return hex.EncodeToString(append(raw, byte(crc), byte(crc>>8)))
}

func plain(s string) string { return strings.ReplaceAll(s, " ", "") }

func digitsFrame() *config.Nibbles {
	return &config.Nibbles{
		Count: 10, Coding: "packed", Header: "F",
		Sign:   &config.NibbleField{At: 1, Codes: map[string]string{"0": "+", "8": "-"}},
		Digits: config.NibbleSpan{At: 2, Count: 6},
		Point:  &config.NibbleField{At: 8, Codes: map[string]string{"2": "2", "3": "3", "4": "4"}},
		Status: &config.NibbleField{At: 9, Codes: map[string]string{"0": "", "1": "hold", "A": "over-range"}},
	}
}

// TestHandMade compares frames with bytes made by hand from the description.
func TestHandMade(t *testing.T) {
	lowFirst, least, hexed, unit := digitsFrame(), digitsFrame(), digitsFrame(), digitsFrame()
	lowFirst.Order = "low-first"
	least.Digits.First = "least"
	hexed.Coding = "hex"
	unit.Status = nil
	unit.Unit = &config.NibbleField{At: 9, Codes: map[string]string{"0": "mm", "1": "in"}}
	counts := &config.Binary{Length: 8, Sync: "AA55", Offset: 2, Width: 3, Order: "big", Type: "signed", Scale: scale(0.001),
		Flags: []config.Flag{{Byte: 5, Bit: 0, Means: "hold"}, {Byte: 5, Bit: 6, Means: "battery-low"}}}
	magnitude := &config.Binary{Length: 6, Sync: "02", Offset: 1, Width: 2, Order: "little", Type: "unsigned", Scale: scale(0.01),
		Flags: []config.Flag{{Byte: 3, Bit: 7, Means: "negative"}, {Byte: 3, Bit: 0, Means: "in"}, {Byte: 3, Bit: 1, Means: "high-limit"}, {Byte: 3, Bit: 2, Means: "over-range"}}}
	float := &config.Binary{Length: 8, Offset: 0, Width: 8, Order: "big", Type: "float"}
	crc := &config.Checksum{Kind: "crc16", At: offset(-2)}
	words := &config.Modbus{Function: "holding", Address: offset(1), Register: 0, Type: "int32", Scale: scale(0.001), Status: offset(2), StatusBits: map[string]string{"0": "over-range", "3": "low-limit"}}
	swapped := *words
	swapped.WordOrder, swapped.Function = "low-first", "input"
	for name, c := range map[string]struct {
		f    config.Frame
		v    Value
		want string
	}{
		"nibbles":             {config.Frame{Nibbles: digitsFrame()}, Value{Shown: -12.345, Status: "hold"}, "F8 01 23 45 31"},
		"nibbles ordinary":    {config.Frame{Nibbles: digitsFrame()}, Value{Shown: 0.5, Status: "battery-low"}, "F0 00 05 00 30"},
		"nibbles low first":   {config.Frame{Nibbles: lowFirst}, Value{Shown: -12.345}, "8F 10 32 54 03"},
		"nibbles least first": {config.Frame{Nibbles: least}, Value{Shown: -12.345}, "F8 54 32 10 30"},
		"nibbles hex":         {config.Frame{Nibbles: hexed, Start: `\x02`, End: "\r"}, Value{Shown: -12.345}, "02" + hex.EncodeToString([]byte("F801234530")) + "0D"},
		"nibbles hex sum":     {config.Frame{Nibbles: hexed, End: "\r", Checksum: &config.Checksum{Kind: "xor8"}}, Value{Shown: 1}, hex.EncodeToString([]byte("F00010003074")) + "0D"},
		"nibbles over":        {config.Frame{Nibbles: digitsFrame()}, Value{NoReading: "over-range"}, "F0 00 00 00 3A"},
		"nibbles inches":      {config.Frame{Nibbles: unit}, Value{Shown: 0.4862, Unit: "in"}, "F0 00 48 62 41"},
		"nibbles too many":    {config.Frame{Nibbles: digitsFrame()}, Value{Shown: 1000}, ""},
		"binary":              {config.Frame{Binary: counts, Checksum: crc}, Value{Shown: 12.345, Status: "hold"}, withCRC("AA 55 00 30 39 01")},
		"binary minus":        {config.Frame{Binary: counts, Checksum: crc}, Value{Shown: -0.001, Status: "battery-low"}, withCRC("AA 55 FF FF FF 40")},
		"binary sum":          {config.Frame{Binary: magnitude, Checksum: &config.Checksum{Kind: "sum8", At: offset(5), From: offset(1), To: offset(5)}}, Value{Shown: -2.59, Status: "high-limit"}, "02 03 01 82 00 86"},
		"binary inches":       {config.Frame{Binary: magnitude}, Value{Shown: 2.59, Unit: "in"}, "02 03 01 01 00 00"},
		"binary over":         {config.Frame{Binary: magnitude}, Value{Shown: 0.01, NoReading: "over-range"}, "02 01 00 04 00 00"},
		"binary unspeakable":  {config.Frame{Binary: magnitude}, Value{NoReading: "error"}, ""},
		"binary too large":    {config.Frame{Binary: magnitude}, Value{Shown: 655.36}, ""},
		"binary float":        {config.Frame{Binary: float}, Value{Shown: -118.625}, "C0 5D A8 00 00 00 00 00"},
		"modbus":              {config.Frame{Modbus: words}, Value{Shown: 123.456}, withCRC("01 03 06 00 01 E2 40 00 00")},
		"modbus minus":        {config.Frame{Modbus: words}, Value{Shown: -0.002, Status: "low-limit"}, withCRC("01 03 06 FF FF FF FE 00 08")},
		"modbus low first":    {config.Frame{Modbus: &swapped}, Value{Shown: 123.456, NoReading: "over-range"}, withCRC("01 04 06 E2 40 00 01 00 01")},
		"modbus float":        {config.Frame{Modbus: &config.Modbus{Address: offset(17), Register: 9, Type: "float32"}}, Value{Shown: -118.625}, withCRC("11 03 04 C2 ED 40 00")},
		"modbus no number":    {config.Frame{Modbus: words}, Value{NoReading: "error"}, ""},
		"scpi":                {config.Frame{SCPI: &config.SCPI{Query: "READ?"}}, Value{Shown: 12.345}, hex.EncodeToString([]byte("+1.2345000E+01\n"))},
		"scpi metres":         {config.Frame{End: `\r\n`, SCPI: &config.SCPI{Query: "READ?", Scale: scale(1000)}}, Value{Shown: -1.25}, hex.EncodeToString([]byte("-1.2500000E-03\r\n"))},
		"scpi over":           {config.Frame{SCPI: &config.SCPI{Query: "READ?"}}, Value{NoReading: "over-range"}, hex.EncodeToString([]byte("9.9E+37\n"))},
		"scpi said":           {config.Frame{SCPI: &config.SCPI{Query: "READ?"}, NoReadings: map[string]string{"----": "over-range"}}, Value{NoReading: "over-range"}, hex.EncodeToString([]byte("----\n"))},
		"scpi inches":         {config.Frame{Unit: "in", SCPI: &config.SCPI{Query: "READ?"}}, Value{Shown: 25.4}, hex.EncodeToString([]byte("+1.0000000E+00\n"))},
	} {
		f := c.f
		f.Name, f.Kind = name, strings.Fields(name)[0]
		if f.Unit == "" && !strings.HasSuffix(name, "inches") {
			f.Unit = "mm"
		}
		if c.v.Unit == "" {
			c.v.Unit = "mm"
		}
		e, err := New(&f, Instrument{Resolution: 0.001, InchResolution: 0.0001})
		if err != nil {
			t.Errorf("%s: %v", name, err)
			continue
		}
		got, ok := e.Append([]byte{0xEE}, &c.v)
		if want := strings.ToLower(plain(c.want)); hex.EncodeToString(got[1:]) != want || ok != (want != "") {
			t.Errorf("%s: %x, %v; want %s", name, got[1:], ok, want)
		}
	}
}

// TestRandomBinary reads binary and register values back by shifts.
func TestRandomBinary(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		width := rapid.SampledFrom([]int{1, 2, 3, 4, 8}).Draw(t, "width")
		big := rapid.Bool().Draw(t, "big")
		c := &config.Binary{Length: width + 3, Sync: "A5", Offset: 2, Width: width, Type: "signed", Order: "little", Scale: scale(0.005)}
		if big {
			c.Order = "big"
		}
		f := config.Frame{Kind: "binary", Unit: "mm", Binary: c}
		e, err := New(&f, Instrument{Resolution: 0.005})
		if err != nil {
			t.Fatal(err)
		}
		raw := rapid.Int64Range(-40000000, 40000000).Draw(t, "raw")
		out, ok := e.Append(nil, &Value{Shown: float64(raw) * 0.005, Unit: "mm"})
		if fits := width == 8 || raw >= -(1<<(8*width-1)) && raw < 1<<(8*width-1); ok != fits {
			t.Fatalf("%d in %d bytes: %v", raw, width, ok)
		} else if !ok {
			return
		}
		got := int64(0)
		for i := range width {
			at := 2 + width - 1 - i
			if big {
				at = 2 + i
			}
			got = got<<8 | int64(out[at])
		}
		got = got << (64 - 8*width) >> (64 - 8*width)
		if got != raw || out[0] != 0xA5 || len(out) != width+3 {
			t.Fatalf("%x says %d, sent %d", out, got, raw)
		}
	})
}

// parts makes instruments that share a bus address.
func parts(t *testing.T, frames ...*config.Modbus) (out []Registers) {
	t.Helper()
	for _, m := range frames {
		e, err := New(&config.Frame{Kind: "modbus", Unit: "mm", Modbus: m}, Instrument{Channel: "1"})
		if err != nil {
			t.Fatal(err)
		}
		out = append(out, e.(Registers))
	}
	return out
}

// TestSlave plays the examples of the Modbus application protocol V1.1b3 (from
// memory), section 6.3 (registers 108 to 110 hold 555, 0 and 100) and 6.4
// (input register 9 holds 10), and what a slave has to refuse (section 7).
func TestSlave(t *testing.T) {
	slave := parts(t,
		&config.Modbus{Function: "holding", Register: 0x6B, Type: "int16"}, &config.Modbus{Function: "holding", Register: 0x6C, Type: "int16"},
		&config.Modbus{Function: "holding", Register: 0x6D, Type: "int16"}, &config.Modbus{Function: "input", Register: 8, Type: "int16"})
	values := []Value{{Shown: 555}, {Shown: 0}, {Shown: 100}, {Shown: 10}}
	for _, c := range []struct {
		call, want string
		whole      int
	}{
		{"01 03 00 6B 00 03", withCRC("01 03 06 02 2B 00 00 00 64"), 3},
		{"01 04 00 08 00 01", withCRC("01 04 02 00 0A"), 1},
		{"01 03 00 6C 00 02", withCRC("01 03 04 00 00 00 64"), 2},
		{"01 03 00 08 00 01", withCRC("01 83 02"), 0}, // an input register, asked as a holding one
		{"01 04 00 6B 00 01", withCRC("01 84 02"), 0},
		{"01 03 00 6B 00 04", withCRC("01 83 02"), 0},
		{"01 03 00 6B 00 00", withCRC("01 83 03"), 0},
		{"01 03 00 6B 00 7E", withCRC("01 83 03"), 0},
		{"01 06 00 6B 00 03", withCRC("01 86 01"), 0},
		{"01 10 00 01 00 01 02 00 0A", withCRC("01 90 01"), 0},
		{"01 2B 0E 01 00", withCRC("01 AB 01"), 0},
		{"02 03 00 6B 00 03", "", 0},
		{"00 03 00 6B 00 03", "", 0},
	} {
		heard, _ := hex.DecodeString(withCRC(c.call))
		noisy := append([]byte{0xFF, 0x01, 0x03}, heard...)
		call, end, ok := FindCall(append(noisy, 0x01))
		if !ok || end != len(noisy) || int(call.Function) != int(heard[1]) {
			t.Errorf("%s: found %+v to %d", c.call, call, end)
			continue
		}
		got, whole := AppendAnswer(nil, call, slave, func(i int) *Value { values[i].Unit = "mm"; return &values[i] })
		if hex.EncodeToString(got) != c.want || len(whole) != c.whole {
			t.Errorf("%s: %x with %d numbers, want %s", c.call, got, len(whole), c.want)
		}
		heard[len(heard)-1] ^= 1
		if call, _, ok := FindCall(heard); ok {
			t.Errorf("%x: taken with a wrong CRC as %+v", heard, call)
		}
	}
	failing := func(int) *Value { return &Value{NoReading: "error"} }
	heard, _ := hex.DecodeString(withCRC("01 03 00 6B 00 01"))
	call, _, _ := FindCall(heard)
	if got, _ := AppendAnswer(nil, call, slave, failing); hex.EncodeToString(got) != withCRC("01 83 04") {
		t.Errorf("no number: %x", got)
	}
}

// TestHalfAValue: half a number read is a register read, but no reading.
func TestHalfAValue(t *testing.T) {
	slave := parts(t, &config.Modbus{Function: "holding", Register: 4, Type: "int32", Scale: scale(0.001)})
	heard, _ := hex.DecodeString(withCRC("01 03 00 05 00 01"))
	call, _, _ := FindCall(heard)
	got, whole := AppendAnswer(nil, call, slave, func(int) *Value { return &Value{Shown: 70, Unit: "mm"} })
	if want := withCRC("01 03 02 11 70"); hex.EncodeToString(got) != want || len(whole) != 0 {
		t.Errorf("%x, %v; want %s", got, whole, want)
	}
}

func TestTalker(t *testing.T) {
	for pattern, want := range map[string]string{"": "SIMULATED,INDICATOR,0,1.0\n", `^ACME,DTI-\d+,.*$`: "ACME,DTI-0,\n"} {
		e, err := New(&config.Frame{Kind: "scpi", Unit: "mm", SCPI: &config.SCPI{Query: "MEAS? (@{channel})", Identity: pattern}}, Instrument{Channel: "2"})
		if err != nil {
			t.Fatal(err)
		}
		talker := e.(Talker)
		if got := string(talker.AppendIdentity(nil)); got != want {
			t.Errorf("identity %q, want %q", got, want)
		}
		for line, want := range map[string]Question{"MEAS? (@2)": AskedValue, "meas? (@2)\r": AskedValue, "MEAS? (@3)": NoQuestion, "*idn?": AskedIdentity, "": NoQuestion} {
			if got := talker.Understands([]byte(line)); got != want {
				t.Errorf("%q: %d", line, got)
			}
		}
		if string(talker.Request()) != "MEAS? (@2)\n" {
			t.Errorf("request %q", talker.Request())
		}
	}
}

// TestRefusedKinds: descriptions that cannot be written are refused.
func TestRefusedKinds(t *testing.T) {
	for name, f := range map[string]config.Frame{
		"no nibbles":   {Kind: "nibbles"},
		"odd":          {Kind: "nibbles", Nibbles: &config.Nibbles{Count: 3, Coding: "packed", Digits: config.NibbleSpan{Count: 2}}},
		"outside":      {Kind: "nibbles", Nibbles: &config.Nibbles{Count: 4, Coding: "hex", Digits: config.NibbleSpan{At: 2, Count: 3}}},
		"field":        {Kind: "nibbles", Nibbles: &config.Nibbles{Count: 4, Coding: "hex", Digits: config.NibbleSpan{Count: 3}, Unit: &config.NibbleField{At: 4}}},
		"sum outside":  {Kind: "nibbles", Nibbles: &config.Nibbles{Count: 4, Coding: "hex", Digits: config.NibbleSpan{Count: 3}}, Checksum: &config.Checksum{Kind: "sum8", At: offset(3)}},
		"no binary":    {Kind: "binary"},
		"width":        {Kind: "binary", Binary: &config.Binary{Length: 8, Width: 5, Type: "signed"}},
		"narrow float": {Kind: "binary", Binary: &config.Binary{Length: 8, Width: 2, Type: "float"}},
		"sync":         {Kind: "binary", Binary: &config.Binary{Length: 8, Width: 2, Type: "signed", Sync: "xy"}},
		"flag":         {Kind: "binary", Binary: &config.Binary{Length: 8, Width: 2, Type: "signed", Flags: []config.Flag{{Byte: 8}}}},
		"no place":     {Kind: "binary", Binary: &config.Binary{Length: 8, Width: 2, Type: "signed"}, Checksum: &config.Checksum{Kind: "sum8"}},
		"no modbus":    {Kind: "modbus"},
		"no address":   {Kind: "modbus", Modbus: &config.Modbus{Type: "int16"}},
		"type":         {Kind: "modbus", Modbus: &config.Modbus{Address: offset(1), Type: "int64"}},
		"far":          {Kind: "modbus", Modbus: &config.Modbus{Address: offset(1), Type: "int16", Status: offset(125)}},
		"no query":     {Kind: "scpi", SCPI: &config.SCPI{}},
		"identity":     {Kind: "scpi", SCPI: &config.SCPI{Query: "R?", Identity: "("}},
	} {
		if _, err := New(&f, Instrument{Resolution: 0.001}); err == nil {
			t.Errorf("%s: taken", name)
		}
	}
}

// TestNothingAllocated: appending a frame of any kind allocates nothing.
func TestNothingAllocated(t *testing.T) {
	for _, f := range []config.Frame{
		{Kind: "nibbles", Unit: "mm", Nibbles: digitsFrame()},
		{Kind: "binary", Unit: "mm", Binary: &config.Binary{Length: 6, Width: 4, Type: "signed", Scale: scale(0.001)}, Checksum: &config.Checksum{Kind: "crc16", At: offset(-2)}},
		{Kind: "modbus", Unit: "mm", Modbus: &config.Modbus{Address: offset(1), Type: "float32", Status: offset(3)}},
		{Kind: "scpi", Unit: "mm", SCPI: &config.SCPI{Query: "READ?"}},
	} {
		e, err := New(&f, Instrument{Resolution: 0.001})
		if err != nil {
			t.Fatal(err)
		}
		v, buf := Value{Shown: -12.345, Unit: "mm", Status: "hold"}, make([]byte, 0, 64)
		if n := testing.AllocsPerRun(100, func() { buf, _ = e.Append(buf[:0], &v) }); n != 0 {
			t.Errorf("%s: %g allocations a frame", f.Kind, n)
		}
	}
}

// TestFloatRegister reads a float32 back.
func TestFloatRegister(t *testing.T) {
	r := parts(t, &config.Modbus{Function: "input", Type: "float32", WordOrder: "low-first"})[0]
	out, ok := r.Append(nil, &Value{Shown: 12.345, Unit: "mm"})
	got := math.Float32frombits(uint32(binary.BigEndian.Uint16(out[5:7]))<<16 | uint32(binary.BigEndian.Uint16(out[3:5])))
	if !ok || got != 12.345 {
		t.Errorf("%x says %g", out, got)
	}
}
