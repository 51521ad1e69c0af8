package frame_test

import (
	"bytes"
	"encoding/binary"
	"encoding/hex"
	"fmt"
	"math"
	"math/big"
	"regexp"
	"strconv"
	"strings"

	"gaugelog/device/frame"
)

// oracle reads the bytes of one whole frame by code of the test's own (package
// regexp, strconv, encoding/binary, the bitwise CRC), so that what a decoder
// made of damaged bytes can be judged. It is slow and knows nothing of streams.
type oracle struct {
	c  kindCase
	re *regexp.Regexp
}

var noBlanks = strings.NewReplacer(" ", "", "\t", "")

// verdict is what an oracle reads.
type verdict struct {
	value float64
	unit  frame.Unit
	none  bool // a frame without a number
}

func newOracle(c kindCase) *oracle {
	o := &oracle{c: c}
	switch c.o.Kind {
	case frame.Text:
		o.re = regexp.MustCompile(`\A(?:` + c.o.Pattern + `)\z`)
	case frame.SCPIReply: // NRf of IEEE 488.2
		o.re = regexp.MustCompile(`\A[ \t]*(?P<value>[+-]?(?:\d+\.?\d*|\.\d+)(?:[ \t]*[Ee][ \t]*[+-]?\d+)?)[ \t]*\r?\z`)
	}
	return o
}

// read says what raw (without terminator) means; an error where it is no frame.
func (o *oracle) read(raw []byte) (verdict, error) {
	if err := o.guarded(raw); err != nil {
		return verdict{}, err
	}
	switch o.c.o.Kind {
	case frame.Nibbles:
		return o.nibbles(raw)
	case frame.Binary:
		return o.binary(raw)
	case frame.ModbusReply:
		return o.modbus(raw)
	}
	return o.text(raw)
}

// sumPlace is where the checksum of a test frame stands: always last.
func (o *oracle) sumPlace(n int) (at, width int) {
	switch {
	case o.c.o.Kind == frame.ModbusReply:
		width = 2
	case o.c.o.Checksum.Kind == "":
		return n, 0
	case o.c.o.Checksum.Kind == "crc16":
		width = 2
	default:
		width = 1
	}
	if o.c.o.Kind != frame.ModbusReply && !o.c.o.Checksum.Binary {
		width *= 2
	}
	return n - width, width
}

// seal computes the checksum over b as it is sent.
func (o *oracle) seal(b []byte) []byte {
	var raw []byte
	switch kind := o.c.o.Checksum.Kind; {
	case o.c.o.Kind == frame.ModbusReply || kind == "crc16":
		c := bitwiseCRC16(b)
		raw = []byte{byte(c), byte(c >> 8)}
	case kind == "sum8":
		raw = []byte{sum(b)}
	case kind == "xor8":
		raw = []byte{xor(b)}
	case kind == "twos-complement":
		raw = []byte{-sum(b)}
	}
	if o.c.o.Kind != frame.ModbusReply && !o.c.o.Checksum.Binary {
		return bytes.ToUpper(hex.AppendEncode(nil, raw))
	}
	return raw
}

func (o *oracle) guarded(raw []byte) error {
	at, width := o.sumPlace(len(raw))
	if at < 0 {
		return fmt.Errorf("too short for its checksum")
	}
	if width > 0 && !strings.EqualFold(string(o.seal(raw[:at])), string(raw[at:])) {
		return fmt.Errorf("checksum %x, %x wanted", raw[at:], o.seal(raw[:at]))
	}
	return nil
}

func (o *oracle) text(raw []byte) (verdict, error) {
	raw = raw[len(o.c.o.Start):]
	m := o.re.FindSubmatch(raw)
	if m == nil {
		return verdict{}, fmt.Errorf("%q does not match", raw)
	}
	v := verdict{unit: o.c.o.Unit}
	var number string
	for i, name := range o.re.SubexpNames() {
		switch name {
		case "value":
			number = noBlanks.Replace(string(m[i]))
		case "unit":
			v.unit = map[string]frame.Unit{"mm": frame.Millimetre, "in": frame.Inch}[string(m[i])]
		}
	}
	f, err := strconv.ParseFloat(number, 64)
	if o.c.o.SCPI != nil {
		v.none = f == 9.91e37 || math.Abs(f) == 9.9e37
		f *= o.c.o.SCPI.Scale.Float64()
	}
	v.value = f
	return v, err
}

func (o *oracle) nibbles(raw []byte) (verdict, error) {
	n := o.c.o.Nibbles
	raw = raw[len(o.c.o.Start):]
	var d []byte
	for _, b := range raw {
		if !n.Packed {
			v, err := strconv.ParseUint(string(rune(b)), 16, 4)
			if err != nil {
				return verdict{}, err
			}
			d = append(d, byte(v))
			continue
		}
		if n.LowFirst {
			b = b<<4 | b>>4
		}
		d = append(d, b>>4, b&15)
	}
	if len(d) < n.Count || string(d[:len(n.Header)]) != string(n.Header) {
		return verdict{}, fmt.Errorf("%x does not begin with %x", d, n.Header)
	}
	v := verdict{unit: o.c.o.Unit}
	if n.Status != nil {
		v.none = strings.HasSuffix(n.Status.Codes[d[n.Status.At]], "-range")
	}
	if n.Unit != nil {
		v.unit = map[string]frame.Unit{"mm": frame.Millimetre, "in": frame.Inch}[n.Unit.Codes[d[n.Unit.At]]]
	}
	if v.none {
		return v, nil
	}
	digits := []byte{}
	for _, v := range d[n.DigitsAt : n.DigitsAt+n.Digits] {
		if v > 9 {
			return verdict{}, fmt.Errorf("digit %X", v)
		}
		if n.LeastFirst {
			digits = append([]byte{'0' + v}, digits...)
		} else {
			digits = append(digits, '0'+v)
		}
	}
	places, err := strconv.Atoi(n.Point.Codes[d[n.Point.At]])
	if err != nil {
		return verdict{}, err
	}
	sign, known := n.Sign.Codes[d[n.Sign.At]]
	if !known {
		return verdict{}, fmt.Errorf("sign %X", d[n.Sign.At])
	}
	v.value, err = strconv.ParseFloat(sign+string(digits)+"e-"+strconv.Itoa(places), 64)
	return v, err
}

func (o *oracle) binary(raw []byte) (verdict, error) {
	b := o.c.o.Binary
	if len(raw) != b.Length || string(raw[:len(b.Sync)]) != string(b.Sync) {
		return verdict{}, fmt.Errorf("%x is not %d bytes behind %x", raw, b.Length, b.Sync)
	}
	v := verdict{unit: o.c.o.Unit}
	for _, f := range b.Flags {
		if raw[f.Byte]>>f.Bit&1 == 1 && f.Means == "in" {
			v.unit = frame.Inch
		}
	}
	p := append([]byte{}, raw[b.Offset:b.Offset+b.Width]...)
	if !b.BigEndian {
		for i := range len(p) / 2 {
			p[i], p[len(p)-1-i] = p[len(p)-1-i], p[i]
		}
	}
	if b.Type == "float" {
		f := math.Float32frombits(binary.BigEndian.Uint32(p))
		v.none = f != f || math.IsInf(float64(f), 0)
		v.value = shortest(f) * b.Scale.Float64()
		return v, nil
	}
	v.value = whole(p, b.Type == "signed") * b.Scale.Float64()
	return v, nil
}

func (o *oracle) modbus(raw []byte) (verdict, error) {
	m := o.c.o.Modbus
	if len(raw) != 5+2*m.Registers || raw[0] != m.Address || raw[1] != m.Function || int(raw[2]) != 2*m.Registers {
		return verdict{}, fmt.Errorf("%x is no answer of %d", raw, m.Address)
	}
	p := raw[3+2*m.ValueAt:][:4]
	v := verdict{unit: o.c.o.Unit}
	if m.StatusAt >= 0 {
		status := binary.BigEndian.Uint16(raw[3+2*m.StatusAt:])
		for bit, means := range m.StatusBits {
			v.none = v.none || status>>bit&1 == 1 && strings.HasSuffix(means, "-range")
		}
	}
	if m.Type == "float32" {
		f := math.Float32frombits(binary.BigEndian.Uint32(p))
		v.none = v.none || f != f || math.IsInf(float64(f), 0)
		v.value = shortest(f) * m.Scale.Float64()
		return v, nil
	}
	v.value = whole(p, m.Type == "int32") * m.Scale.Float64()
	return v, nil
}

// whole reads bytes, the highest first, as a whole number.
func whole(p []byte, signed bool) float64 {
	n := new(big.Int).SetBytes(p)
	if signed && p[0]&0x80 != 0 {
		n.Sub(n, new(big.Int).Lsh(big.NewInt(1), uint(8*len(p))))
	}
	f, _ := new(big.Float).SetInt(n).Float64()
	return f
}

// shortest is the float64 of the shortest decimal that has the bits of f.
func shortest(f float32) float64 {
	v, _ := strconv.ParseFloat(strconv.FormatFloat(float64(f), 'g', -1, 32), 64)
	return v
}

// same reports whether two numbers are one but for the rounding of a product.
func same(a, b float64) bool {
	return math.Abs(a-b) <= 1e-12*math.Max(math.Abs(a), math.Abs(b))
}
