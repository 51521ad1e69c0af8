package frame

import "fmt"

// Checksum guards a frame.
type Checksum struct {
	Kind string // "" or none | sum8 | xor8 | twos-complement | crc16
	// From and To bound the bytes covered, counted from the frame's first
	// byte (Start included), To exclusive; negative counts from the end of
	// the frame without its terminator. nil means: from the first byte; for
	// text frames up to the sum group, for others up to the sum itself.
	From, To *int
	// At is where the sum stands in a frame that is not text, negative from
	// the end. nil means: behind the nibbles, which then do not count it, or
	// last in a binary frame.
	At *int
	// Binary: the sum is sent as raw bytes; else as hex digits.
	Binary bool
	// HighFirst is the order of a crc16's two bytes.
	HighFirst bool
}

// size is the number of bytes of the sum itself: 0 for none, 1, or 2.
func (c Checksum) size() (int, error) {
	switch c.Kind {
	case "", "none":
		return 0, nil
	case "sum8", "xor8", "twos-complement":
		return 1, nil
	case "crc16":
		return 2, nil
	}
	return 0, fmt.Errorf("unknown checksum %q: none, sum8, xor8, twos-complement and crc16 are known", c.Kind)
}

// compute returns the sum over b.
func (c Checksum) compute(b []byte) uint16 {
	switch c.Kind {
	case "sum8":
		return uint16(sum8(b))
	case "xor8":
		var x byte
		for _, v := range b {
			x ^= v
		}
		return uint16(x)
	case "twos-complement":
		return uint16(-sum8(b))
	case "crc16":
		return CRC16(b)
	}
	panic("frame: no such checksum: " + c.Kind)
}

// sent reads the sum as it stands in the frame; false where it is not one.
func (c Checksum) sent(b []byte) (uint16, bool) {
	n, _ := c.size()
	var raw [2]byte
	if c.Binary {
		if len(b) != n {
			return 0, false
		}
		copy(raw[:], b)
	} else {
		if len(b) != 2*n {
			return 0, false
		}
		for i := range b {
			v, ok := hexDigit(b[i])
			if !ok {
				return 0, false
			}
			raw[i/2] = raw[i/2]<<4 | v
		}
	}
	if n == 1 {
		return uint16(raw[0]), true
	}
	if c.HighFirst {
		return uint16(raw[0])<<8 | uint16(raw[1]), true
	}
	return uint16(raw[1])<<8 | uint16(raw[0]), true
}

// span resolves From and To for a frame of n bytes whose sum stands at sumAt;
// false where they leave the frame.
func (c Checksum) span(n, sumAt int) (from, to int, ok bool) {
	from, to = 0, sumAt
	if c.From != nil {
		if from = *c.From; from < 0 {
			from += n
		}
	}
	if c.To != nil {
		if to = *c.To; to < 0 {
			to += n
		}
	}
	return from, to, from >= 0 && from < to && to <= n
}

func sum8(b []byte) byte {
	var s byte
	for _, v := range b {
		s += v
	}
	return s
}

func hexDigit(c byte) (byte, bool) {
	switch {
	case c >= '0' && c <= '9':
		return c - '0', true
	case c >= 'A' && c <= 'F':
		return c - 'A' + 10, true
	case c >= 'a' && c <= 'f':
		return c - 'a' + 10, true
	}
	return 0, false
}

// CRC16 is the cyclic redundancy check of Modbus RTU: polynomial 0x8005
// reflected, initial value 0xFFFF, no final inversion (MODBUS over Serial Line
// Specification V1.02, section 6.2.2).
func CRC16(b []byte) uint16 {
	crc := uint16(0xFFFF)
	for _, v := range b {
		crc = crc>>8 ^ crc16Table[byte(crc)^v]
	}
	return crc
}

var crc16Table = func() (t [256]uint16) {
	for i := range t {
		c := uint16(i)
		for range 8 {
			if c&1 != 0 {
				c = c>>1 ^ 0xA001
			} else {
				c >>= 1
			}
		}
		t[i] = c
	}
	return t
}()
