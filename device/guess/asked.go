package guess

import (
	"encoding/binary"
	"fmt"
	"math"
	"regexp"
	"strings"

	"gaugelog/config"
	"gaugelog/device/frame"
)

// modbus proposes a Modbus frame where the capture's request was a read of
// registers and the answer is one, checksum and all.
func modbus(c Capture) (Proposal, bool) {
	q, all := c.Request, c.Bytes()
	if len(q) != 8 || q[1] != 3 && q[1] != 4 || !sealed(q) {
		return Proposal{}, false
	}
	count := int(binary.BigEndian.Uint16(q[4:]))
	size := 5 + 2*count
	p := Proposal{Frame: config.Frame{Kind: "modbus", Unit: "mm"}}
	var registers []byte
	for i := 0; i+size <= len(all); {
		a := all[i : i+size]
		if a[0] == q[0] && a[1] == q[1] && int(a[2]) == 2*count && sealed(a) {
			p.Frames++
			registers = a[3 : 3+2*count]
			i += size
			continue
		}
		i++
	}
	if p.Frames == 0 {
		return p, false
	}
	p.Share = float64(p.Frames*size) / float64(len(all))
	p.rank = 4 + p.Share // a 16-bit checksum in an answer to this very question
	address := int(q[0])
	m := &config.Modbus{Function: map[byte]string{3: "holding", 4: "input"}[q[1]], Address: &address, Register: int(binary.BigEndian.Uint16(q[2:]))}
	p.sure("it speaks Modbus RTU and answers at address %d with %s registers from %d on (% X)", address, m.Function, m.Register, registers)
	m.Type, m.WordOrder = registerType(&p, registers)
	if m.Type != "float32" {
		scale, err := config.ParseNumber("0.001")
		if err != nil {
			panic(err)
		}
		m.Scale = &scale
		p.unsure("one count is taken as 0.001 mm: compare with the display")
	}
	p.unsure("whether register %d is the one that holds the indication, and in mm: see the manual's table", m.Register)
	if used := map[bool]int{true: 1, false: 2}[strings.HasSuffix(m.Type, "16")]; count > used {
		p.unsure("%d more registers were read (% X): if one holds status bits, add status: with its number and status_bits: with their meanings", count-used, registers[2*used:])
	}
	p.Frame.Modbus = m
	p.Frame.Line = c.Line
	if c.Line != (config.Line{}) {
		p.sure("%d baud, parity %s: the checksum holds", c.Line.Baud, c.Line.Parity)
	}
	return p, true
}

// registerType judges the first registers: a float of a sensible size is
// rarely anything else.
func registerType(p *Proposal, r []byte) (kind, order string) {
	if len(r) < 4 {
		p.unsure("one register was read: taken as a signed number of 16 bits")
		return "int16", ""
	}
	high := binary.BigEndian.Uint32(r)
	low := high<<16 | high>>16
	for _, v := range []struct {
		bits  uint32
		order string
	}{{high, "high-first"}, {low, "low-first"}} {
		f := math.Abs(float64(math.Float32frombits(v.bits)))
		if f >= 1e-4 && f < 1e3 {
			p.unsure("the first two registers make a float of %g (%s): taken as the value", math.Float32frombits(v.bits), v.order)
			return "float32", v.order
		}
	}
	if upper := high >> 16; upper == 0 || upper == 0xffff {
		p.unsure("the first two registers make the whole number %d: taken as the value, high word first", int32(high))
		return "int32", "high-first"
	}
	if lower := high & 0xffff; lower == 0 || lower == 0xffff {
		p.unsure("the first two registers make the whole number %d: taken as the value, low word first", int32(low))
		return "int32", "low-first"
	}
	p.unsure("the first register makes %d: taken as the value, 16 bits and signed", int16(high>>16))
	return "int16", ""
}

// sealed tells whether the last two bytes are the CRC of those before.
func sealed(p []byte) bool {
	n := len(p) - 2
	crc := frame.CRC16(p[:n])
	return p[n] == byte(crc) && p[n+1] == byte(crc>>8)
}

// scpiNumber is a number as IEEE 488.2 lets instruments answer (NR1, NR2, NR3).
var scpiNumber = regexp.MustCompile(`^[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?$`)

// scpi proposes a query in the SCPI style where the request is one and the
// answers are bare numbers.
func scpi(c Capture) (Proposal, bool) {
	query := strings.TrimRight(string(c.Request), "\r\n")
	if len(query) < 3 || !strings.HasSuffix(query, "?") || strings.HasPrefix(query, "*") || !strings.HasSuffix(string(c.Request), "\n") {
		return Proposal{}, false
	}
	list, _, end := pieces(c)
	if len(list) == 0 || !strings.HasSuffix(string(end), "\n") {
		return Proposal{}, false
	}
	p := Proposal{Frame: config.Frame{Kind: "scpi", Unit: "mm", SCPI: &config.SCPI{Query: query}}}
	for _, l := range list {
		if scpiNumber.Match(l.body) {
			p.Frames++
			if len(p.Values) < shownValues {
				p.Values = append(p.Values, string(l.body))
			}
		}
	}
	p.Share = float64(p.Frames) / float64(len(list))
	if p.Share < LeastShare {
		return p, false
	}
	p.rank = 4
	p.sure("it answers the query %s with a number", query)
	p.unsure("the answer carries no unit: mm is assumed; if it answers in metres add scale: 1000")
	if len(p.Values) > 0 {
		p.unsure("is %s what the display shows?", p.Values[0])
	}
	return p, true
}

// escape writes bytes for the rig file: text as it is, bytes beyond ASCII as
// \xHH.
func escape(p []byte) string {
	var s strings.Builder
	for _, b := range p {
		switch {
		case b == '\\':
			s.WriteString(`\\`)
		case b >= 0x80:
			fmt.Fprintf(&s, `\x%02X`, b)
		default:
			s.WriteByte(b)
		}
	}
	return s.String()
}

// ModbusRead is the request to read count registers (function 3 or 4) from
// first on at a bus address (MODBUS Application Protocol V1.1b3, 6.3 and 6.4).
func ModbusRead(address, function byte, first, count uint16) []byte {
	p := []byte{address, function, byte(first >> 8), byte(first), byte(count >> 8), byte(count)}
	crc := frame.CRC16(p)
	return append(p, byte(crc), byte(crc>>8))
}
