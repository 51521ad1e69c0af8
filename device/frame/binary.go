package frame

import (
	"bytes"
	"encoding/binary"
	"fmt"
	"math"
	"slices"
)

// binaryShape reads frames of fixed length with the value as a raw number.
type binaryShape struct {
	o       *BinaryOptions
	unit    Unit
	sum     place
	scratch [32]byte
}

func newBinary(o Options) (Decoder, error) {
	b := o.Binary
	if b == nil {
		return nil, fmt.Errorf("a binary frame needs its layout: length, offset, width, order and type")
	}
	if err := b.check(); err != nil {
		return nil, err
	}
	if o.Unit == NoUnit && !slices.ContainsFunc(b.Flags, func(f Flag) bool { return f.Means == "in" }) {
		return nil, fmt.Errorf("the frame sends no unit: give unit: mm or in, or a flag that means in")
	}
	s := &binaryShape{o: b, unit: o.Unit}
	if s.unit == NoUnit {
		s.unit = Millimetre // where the flag is clear
	}
	var err error
	if s.sum, err = placeOf(o.Checksum, b.Length); err != nil {
		return nil, err
	}
	t := newFramer(s, guardFor(&s.sum, len(b.Sync)), len(b.Sync), b.Length)
	t.doubtful = s.sum.size == 0
	return t, nil
}

// check refuses a layout that no bytes can have.
func (b *BinaryOptions) check() error {
	switch {
	case b.Length < 1 || b.Length > 1<<16:
		return fmt.Errorf("a binary frame of %d bytes: its length must be from 1 to 65536", b.Length)
	case !slices.Contains([]int{1, 2, 3, 4, 8}, b.Width):
		return fmt.Errorf("a value %d bytes wide: 1, 2, 3, 4 and 8 are known", b.Width)
	case b.Offset < 0 || b.Offset+b.Width > b.Length:
		return fmt.Errorf("the value (%d bytes at %d) does not lie in a frame of %d bytes", b.Width, b.Offset, b.Length)
	case len(b.Sync) > b.Offset:
		return fmt.Errorf("the %d sync bytes reach into the value at byte %d", len(b.Sync), b.Offset)
	case b.Type != "signed" && b.Type != "unsigned" && b.Type != "float":
		return fmt.Errorf("type of value %q: signed, unsigned and float are known", b.Type)
	case b.Type == "float" && b.Width != 4 && b.Width != 8:
		return fmt.Errorf("a float %d bytes wide: 4 and 8 exist", b.Width)
	case b.Scale.Digits == 0:
		return fmt.Errorf("the scale is zero")
	}
	for _, f := range b.Flags {
		if f.Byte < 0 || f.Byte >= b.Length || f.Bit < 0 || f.Bit > 7 {
			return fmt.Errorf("flag %s: bit %d of byte %d does not exist in a frame of %d bytes", f.Means, f.Bit, f.Byte, b.Length)
		}
		if f.Means == "negative" && b.Type != "unsigned" {
			return fmt.Errorf("the sign stands twice: in a %s value and in a flag", b.Type)
		}
	}
	return nil
}

func (s *binaryShape) size(b []byte) (int, bool) {
	n := min(len(b), len(s.o.Sync))
	return s.o.Length, bytes.Equal(b[:n], s.o.Sync[:n])
}

func (s *binaryShape) read(f *Frame) (Reason, bool) {
	intact := false
	if s.sum.size > 0 {
		if !s.sum.holds(f.Raw) {
			return BadChecksum, false
		}
		intact = true
	}
	negative := false
	f.Unit = s.unit
	for _, flag := range s.o.Flags {
		if f.Raw[flag.Byte]&(1<<flag.Bit) == 0 {
			continue
		}
		switch flag.Means {
		case "negative":
			negative = true
		case "in":
			f.Unit = Inch
		default:
			f.Status = graver(f.Status, flag.Means)
		}
	}
	why := s.value(f, negative)
	if f.Status == "over-range" || f.Status == "under-range" || f.Status == "error" {
		why = None // there is no number to be wrong
	}
	return why, intact
}

// value reads the number.
func (s *binaryShape) value(f *Frame, negative bool) Reason {
	u := number(f.Raw[s.o.Offset:s.o.Offset+s.o.Width], s.o.BigEndian)
	raw := Decimal{Digits: int64(u)}
	switch s.o.Type {
	case "float":
		v, size := math.Float64frombits(u), 64
		if s.o.Width == 4 {
			v, size = float64(math.Float32frombits(uint32(u))), 32
		}
		return readFloat(f, v, size, s.o.Scale, s.scratch[:])
	case "signed":
		shift := 64 - 8*s.o.Width
		raw.Digits = int64(u<<shift) >> shift
	default:
		if u > math.MaxInt64 {
			return BadNumber
		}
	}
	if negative {
		raw.Digits = -raw.Digits
	}
	return readInteger(f, raw, s.o.Scale)
}

// number reads up to eight bytes as one unsigned number.
func number(b []byte, bigEndian bool) uint64 {
	var w [8]byte
	if bigEndian {
		copy(w[8-len(b):], b)
		return binary.BigEndian.Uint64(w[:])
	}
	copy(w[:], b)
	return binary.LittleEndian.Uint64(w[:])
}

func readInteger(f *Frame, raw, scale Decimal) Reason {
	var ok bool
	if f.Value, ok = raw.Times(scale); !ok {
		return BadNumber
	}
	f.HasValue = true
	return None
}

// readFloat takes the shortest decimal that rounds to v as what was meant: an
// instrument that sends 1.234 in 32 bits means 1.234, and no other short
// decimal has these bits.
func readFloat(f *Frame, v float64, size int, scale Decimal, scratch []byte) Reason {
	switch {
	case math.IsNaN(v):
		f.NoReading = NotANumber
		return None
	case math.IsInf(v, 1):
		f.NoReading = Infinite
		return None
	case math.IsInf(v, -1):
		f.NoReading = MinusInfinite
		return None
	}
	raw, ok := fromFloat(v, size, scratch)
	if !ok {
		return BadNumber
	}
	if why := readInteger(f, raw, scale); why == None {
		return None
	}
	// More digits than a Decimal holds (a 64-bit float and a long scale): the
	// product is rounded once, beyond what a float64 can tell.
	if f.Value, ok = fromFloat(raw.Float64()*scale.Float64(), 64, scratch); !ok {
		return BadNumber
	}
	f.HasValue = true
	return None
}

// The reasons for a non-reading that the program gives itself.
const (
	NotANumber    = "not a number"
	Infinite      = "infinity"
	MinusInfinite = "minus infinity"
)

// statusOrder is how much a status says of the value, the gravest first: a
// frame that flags several carries the first of them.
var statusOrder = []string{"error", "over-range", "under-range", "hold", "high-limit", "low-limit", "battery-low"}

func graver(a, b string) string {
	for _, s := range statusOrder {
		if s == a || s == b {
			return s
		}
	}
	return a
}
