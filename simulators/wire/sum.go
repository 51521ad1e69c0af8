package wire

import (
	"fmt"

	"gaugelog/config"
)

// sum writes a frame's checksum.
type sum struct {
	kind      string
	from, to  *int
	binary    bool
	highFirst bool
	blank     string // holds its place until it is known
}

func newSum(c *config.Checksum) (*sum, error) {
	s := &sum{kind: c.Kind, from: c.From, to: c.To, binary: c.Form == "binary", highFirst: c.Order == "high-first"}
	width := 1
	switch c.Kind {
	case "sum8", "xor8", "twos-complement":
	case "crc16":
		width = 2
	default:
		return nil, fmt.Errorf("the simulator knows no checksum %q", c.Kind)
	}
	if !s.binary {
		width *= 2
	}
	s.blank = "\x00\x00\x00\x00"[:width]
	return s, nil
}

// put works the sum out over the frame so far (no terminator) and writes it at
// at; false where the stretch covered lies outside the frame.
func (s *sum) put(frame []byte, at int) bool {
	from, to := 0, at
	if s.from != nil {
		if from = *s.from; from < 0 {
			from += len(frame)
		}
	}
	if s.to != nil {
		if to = *s.to; to < 0 {
			to += len(frame)
		}
	}
	if from < 0 || to > len(frame) || from > to {
		return false
	}
	value := s.over(frame[from:to])
	raw := [2]byte{byte(value), byte(value >> 8)}
	if s.highFirst {
		raw[0], raw[1] = raw[1], raw[0]
	}
	out := frame[at : at+len(s.blank)]
	if s.binary {
		copy(out, raw[:])
		return true
	}
	for i := range out {
		nibble := raw[i/2] >> 4
		if i%2 == 1 {
			nibble = raw[i/2] & 15
		}
		out[i] = "0123456789ABCDEF"[nibble]
	}
	return true
}

func (s *sum) over(b []byte) uint16 {
	var total, parity byte
	for _, c := range b {
		total += c
		parity ^= c
	}
	switch s.kind {
	case "sum8":
		return uint16(total)
	case "xor8":
		return uint16(parity)
	case "twos-complement":
		return uint16(-total)
	}
	return crc16(b)
}

// crc16 is the CRC of the Modbus serial line specification (V1.02, section
// 6.2.2): polynomial 0xA001 reflected, start 0xFFFF.
func crc16(b []byte) uint16 {
	crc := uint16(0xFFFF)
	for _, c := range b {
		crc ^= uint16(c)
		for range 8 {
			low := crc & 1
			crc >>= 1
			if low != 0 {
				crc ^= 0xA001
			}
		}
	}
	return crc
}
