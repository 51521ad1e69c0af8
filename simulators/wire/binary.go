package wire

import (
	"encoding/binary"
	"encoding/hex"
	"fmt"
	"math"
	"slices"
	"strings"

	"gaugelog/config"
)

// fixed writes binary frames of fixed length.
type fixed struct {
	request  []byte
	frame    []byte // with the sync bytes, all else zero
	offset   int
	width    int
	order    binary.ByteOrder
	kind     string // signed, unsigned, float
	scale    float64
	unit     string
	inFlag   bool
	negative bool
	flags    []config.Flag
	sum      *sum
	sumAt    int
}

func newFixed(f *config.Frame, i Instrument) (*fixed, error) {
	c := f.Binary
	if c == nil {
		return nil, fmt.Errorf("frame %q has no binary group", f.Name)
	}
	b := &fixed{offset: c.Offset, width: c.Width, order: binary.BigEndian, kind: c.Type, scale: scaleOf(c.Scale), unit: f.Unit, flags: c.Flags}
	if c.Order == "little" {
		b.order = binary.LittleEndian
	}
	for _, flag := range c.Flags {
		b.inFlag = b.inFlag || flag.Means == "in"
		b.negative = b.negative || flag.Means == "negative"
	}
	var err error
	if b.request, err = request(f, i.Channel); err != nil {
		return nil, err
	}
	sync, err := hex.DecodeString(strings.ReplaceAll(c.Sync, " ", ""))
	if err != nil {
		return nil, fmt.Errorf("frame %q: sync %q is not of hex bytes", f.Name, c.Sync)
	}
	switch {
	case c.Length < 1 || c.Offset < 0 || c.Offset+c.Width > c.Length || len(sync) > c.Length:
		return nil, fmt.Errorf("frame %q: value or sync lie outside the %d bytes of a frame", f.Name, c.Length)
	case c.Width != 1 && c.Width != 2 && c.Width != 3 && c.Width != 4 && c.Width != 8 || c.Type == "float" && c.Width != 4 && c.Width != 8:
		return nil, fmt.Errorf("frame %q: there is no %s value %d bytes wide", f.Name, c.Type, c.Width)
	}
	for _, flag := range c.Flags {
		if flag.Byte < 0 || flag.Byte >= c.Length || flag.Bit < 0 || flag.Bit > 7 {
			return nil, fmt.Errorf("frame %q: bit %d of byte %d does not exist", f.Name, flag.Bit, flag.Byte)
		}
	}
	b.frame = make([]byte, c.Length)
	copy(b.frame, sync)
	return b, b.guard(f)
}

// guard adds the checksum.
func (b *fixed) guard(f *config.Frame) error {
	if f.Checksum == nil || f.Checksum.Kind == "none" || f.Checksum.Kind == "" {
		return nil
	}
	c := *f.Checksum
	if c.Form == "" {
		c.Form = "binary"
	}
	var err error
	if b.sum, err = newSum(&c); err != nil {
		return fmt.Errorf("frame %q: %w", f.Name, err)
	}
	if c.At == nil {
		return fmt.Errorf("frame %q: the checksum has no place", f.Name)
	}
	if b.sumAt = *c.At; b.sumAt < 0 {
		b.sumAt += len(b.frame)
	}
	if b.sumAt < 0 || b.sumAt+len(b.sum.blank) > len(b.frame) || !b.sum.put(make([]byte, len(b.frame)), b.sumAt) {
		return fmt.Errorf("frame %q: the checksum or what it covers lies outside the frame", f.Name)
	}
	return nil
}

// Request returns the bytes the instrument answers to.
func (b *fixed) Request() []byte { return b.request }

// SaysUnit tells whether a flag says inches.
func (b *fixed) SaysUnit() bool { return b.inFlag }

// Step is the least step of a number, the same in both units; 0 for a float.
func (b *fixed) Step(string) float64 {
	if b.kind == "float" {
		return 0
	}
	return math.Abs(b.scale)
}

// Says tells whether a flag can say a word.
func (b *fixed) Says(status string) bool {
	return slices.ContainsFunc(b.flags, func(f config.Flag) bool { return f.Means == status })
}

// Ends is 0: the length ends the frame.
func (b *fixed) Ends() int { return 0 }

// Append writes one frame.
func (b *fixed) Append(dst []byte, v *Value) ([]byte, bool) {
	begin := len(dst)
	dst = append(dst, b.frame...)
	frame := dst[begin:]
	shown, unit := inUnit(v, b.unit, b.inFlag)
	less, ok := b.put(frame, shown)
	said := v.NoReading == ""
	for _, flag := range b.flags {
		set := false
		switch flag.Means {
		case "negative":
			set = less
		case "in":
			set = unit == "in"
		default:
			set = flag.Means == v.Status || flag.Means == v.NoReading
			said = said || flag.Means == v.NoReading
		}
		if set {
			frame[flag.Byte] |= 1 << flag.Bit
		}
	}
	if !ok || !said || b.sum != nil && !b.sum.put(frame, b.sumAt) {
		return dst[:begin], false
	}
	return dst, true
}

// put writes the number; less tells whether a flag has to say its minus.
func (b *fixed) put(frame []byte, shown float64) (less, ok bool) {
	value := frame[b.offset : b.offset+b.width]
	if b.kind == "float" {
		if x := shown / b.scale; b.width == 4 {
			b.order.PutUint32(value, math.Float32bits(float32(x)))
		} else {
			b.order.PutUint64(value, math.Float64bits(x))
		}
		return false, true
	}
	raw, ok := count(shown, b.scale)
	if b.kind == "unsigned" && raw < 0 {
		raw, less = -raw, true
		ok = ok && b.negative
	}
	return less, ok && putWhole(value, raw, b.kind == "signed", b.order)
}

// putWhole writes a whole number into as many bytes as there are; false where
// it does not go in.
func putWhole(value []byte, raw int64, signed bool, order binary.ByteOrder) bool {
	bits := 8 * len(value)
	if bits < 64 {
		low, high := int64(0), int64(1)<<bits-1
		if signed {
			low, high = -(int64(1) << (bits - 1)), int64(1)<<(bits-1)-1
		}
		if raw < low || raw > high {
			return false
		}
	}
	var all [8]byte
	if order == binary.ByteOrder(binary.BigEndian) {
		binary.BigEndian.PutUint64(all[:], uint64(raw))
		copy(value, all[8-len(value):])
		return true
	}
	binary.LittleEndian.PutUint64(all[:], uint64(raw))
	copy(value, all[:])
	return true
}

// scaleOf is a frame's scale, 1 where it gives none.
func scaleOf(n *config.Number) float64 {
	if n == nil || n.Value == 0 {
		return 1
	}
	return n.Value
}
