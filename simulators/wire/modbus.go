package wire

import (
	"encoding/binary"
	"fmt"
	"math"
	"strconv"

	"gaugelog/config"
)

// Registers is an Encoder of an instrument on a Modbus bus. Its Append writes
// the answer to its Request, a read of the value with the status.
type Registers interface {
	Encoder
	// Address is the bus address, 1..247.
	Address() byte
	// Span says which registers there are, and of which function: 3 for
	// holding registers, 4 for input registers.
	Span() (function byte, first, count int)
	// Value says where the number stands.
	Value() (first, count int)
	// Fill writes all of the span's registers; false where the number does
	// not go in, or where there is none and no status bit to say so.
	Fill(span []uint16, v *Value) bool
}

// registers are those of one instrument.
type registers struct {
	address  byte
	function byte
	first    int // of the span
	count    int
	value    int // place of the number in the span
	words    int // of the number
	kind     string
	lowFirst bool
	scale    float64
	unit     string
	status   int // place in the span; below 0: none
	bits     map[string]uint16
	request  []byte
}

func newRegisters(f *config.Frame, i Instrument) (*registers, error) {
	c := f.Modbus
	if c == nil {
		return nil, fmt.Errorf("frame %q has no modbus group", f.Name)
	}
	r := &registers{function: 3, first: c.Register, kind: c.Type, lowFirst: c.WordOrder == "low-first", scale: scaleOf(c.Scale), unit: f.Unit, status: -1, words: 1}
	if c.Function == "input" {
		r.function = 4
	}
	address := 0
	if c.Address != nil {
		address = *c.Address
	} else if n, err := strconv.Atoi(i.Channel); err == nil {
		address = n
	}
	if address < 1 || address > 247 {
		return nil, fmt.Errorf("frame %q: there is no bus address from 1 to 247, neither in the frame nor as the channel %q", f.Name, i.Channel)
	}
	r.address = byte(address)
	switch c.Type {
	case "int16", "uint16":
	case "int32", "uint32", "float32":
		r.words = 2
	default:
		return nil, fmt.Errorf("frame %q: there is no register type %q", f.Name, c.Type)
	}
	last := c.Register + r.words - 1
	if c.Status != nil {
		r.first, last = min(r.first, *c.Status), max(last, *c.Status)
		r.status = *c.Status - r.first
	}
	r.value, r.count = c.Register-r.first, last-r.first+1
	if r.first < 0 || last > 65535 || r.count > mostRegisters {
		return nil, fmt.Errorf("frame %q: registers %d to %d cannot be read at once", f.Name, r.first, last)
	}
	r.bits = map[string]uint16{}
	for _, bit := range sortedKeys(c.StatusBits) {
		n, err := strconv.Atoi(bit)
		if err != nil || n < 0 || n > 15 {
			return nil, fmt.Errorf("frame %q: there is no status bit %q", f.Name, bit)
		}
		r.bits[c.StatusBits[bit]] |= 1 << n
	}
	r.request = appendCRC([]byte{r.address, r.function, byte(r.first >> 8), byte(r.first), byte(r.count >> 8), byte(r.count)}, 0)
	return r, nil
}

// Address is the bus address.
func (r *registers) Address() byte { return r.address }

// Span says which registers there are.
func (r *registers) Span() (function byte, first, count int) { return r.function, r.first, r.count }

// Value says where the number stands.
func (r *registers) Value() (first, count int) { return r.first + r.value, r.words }

// Request is a read of the whole span.
func (r *registers) Request() []byte { return r.request }

// SaysUnit is false: a register holds a number alone.
func (r *registers) SaysUnit() bool { return false }

// Step is the least step of a number; 0 for a float.
func (r *registers) Step(string) float64 {
	if r.kind == "float32" {
		return 0
	}
	return math.Abs(r.scale)
}

// Says tells whether a status bit can say a word.
func (r *registers) Says(status string) bool { return r.status >= 0 && r.bits[status] != 0 }

// Ends is 0: the length ends the answer.
func (r *registers) Ends() int { return 0 }

// Append writes the answer to Request.
func (r *registers) Append(dst []byte, v *Value) ([]byte, bool) {
	var room [mostRegisters]uint16
	span := room[:r.count]
	if !r.Fill(span, v) {
		return dst, false
	}
	begin := len(dst)
	dst = append(dst, r.address, r.function, byte(2*r.count))
	for _, word := range span {
		dst = append(dst, byte(word>>8), byte(word))
	}
	return appendCRC(dst, begin), true
}

// Fill writes the span's registers.
func (r *registers) Fill(span []uint16, v *Value) bool {
	clear(span)
	if r.status >= 0 {
		span[r.status] = r.bits[v.Status]
		if v.NoReading != "" {
			span[r.status] = r.bits[v.NoReading]
		}
	}
	if v.NoReading != "" && (r.status < 0 || span[r.status] == 0) {
		return false
	}
	shown, _ := inUnit(v, r.unit, false)
	raw, ok := r.raw(shown)
	if !ok {
		return v.NoReading != ""
	}
	number := span[r.value : r.value+r.words]
	if r.words == 1 {
		number[0] = uint16(raw)
		return true
	}
	number[0], number[1] = uint16(raw>>16), uint16(raw)
	if r.lowFirst {
		number[0], number[1] = number[1], number[0]
	}
	return true
}

// raw is the number as the registers hold it.
func (r *registers) raw(shown float64) (uint32, bool) {
	if r.kind == "float32" {
		return math.Float32bits(float32(shown / r.scale)), true
	}
	n, ok := count(shown, r.scale)
	var bytes [4]byte
	ok = ok && putWhole(bytes[4-2*r.words:], n, r.kind == "int16" || r.kind == "int32", binary.BigEndian)
	return binary.BigEndian.Uint32(bytes[:]), ok
}

// appendCRC closes the frame that begins at begin, low byte first.
func appendCRC(dst []byte, begin int) []byte {
	crc := crc16(dst[begin:])
	return append(dst, byte(crc), byte(crc>>8))
}
