package frame_test

import (
	"encoding/binary"
	"math"
	"math/big"
	"strings"
	"testing"

	"pgregory.net/rapid"

	"gaugelog/device/frame"
)

// exact is a Decimal as a rational number.
func exact(d frame.Decimal) *big.Rat {
	ten := new(big.Int).Exp(big.NewInt(10), big.NewInt(int64(max(d.Scale, -d.Scale))), nil)
	r := new(big.Rat).SetInt64(d.Digits)
	if d.Scale >= 0 {
		return r.Quo(r, new(big.Rat).SetInt(ten))
	}
	return r.Mul(r, new(big.Rat).SetInt(ten))
}

// Integers of any width, order, sign and scale are read exactly, or, where
// the product has too many digits, not at all. The bytes are written by
// encoding/binary and math/big.
func TestBinaryIntegersAreExact(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		width := rapid.SampledFrom([]int{1, 2, 3, 4, 8}).Draw(t, "width")
		signed := rapid.Bool().Draw(t, "signed")
		big8 := rapid.Bool().Draw(t, "big")
		negative := !signed && rapid.Bool().Draw(t, "negative flag")
		scale := frame.Decimal{
			Digits: rapid.Int64Range(-9999, 9999).Filter(func(n int64) bool { return n != 0 }).Draw(t, "digits"),
			Scale:  rapid.IntRange(-3, 9).Draw(t, "scale"),
		}
		u := rapid.Uint64().Draw(t, "bits") >> (64 - 8*width)
		value := new(big.Int).SetUint64(u)
		if signed && u>>(8*width-1) == 1 {
			value.Sub(value, new(big.Int).Lsh(big.NewInt(1), uint(8*width)))
		}
		o := &frame.BinaryOptions{Length: 12, Sync: []byte{0x7E}, Offset: 2, Width: width, BigEndian: big8, Type: "unsigned", Scale: scale,
			Flags: []frame.Flag{{Byte: 11, Bit: 5, Means: "negative"}}}
		if signed {
			o.Type, o.Flags = "signed", nil
		}
		p := make([]byte, 12)
		p[0] = 0x7E
		var w [8]byte
		if big8 {
			binary.BigEndian.PutUint64(w[:], u)
			copy(p[2:], w[8-width:])
		} else {
			binary.LittleEndian.PutUint64(w[:], u)
			copy(p[2:2+width], w[:])
		}
		if negative {
			p[11] |= 1 << 5
			value.Neg(value)
		}
		d, err := frame.New(frame.Options{Kind: frame.Binary, Unit: frame.Millimetre, Binary: o})
		if err != nil {
			t.Fatal(err)
		}
		want := new(big.Rat).SetInt(value)
		want.Mul(want, exact(scale))
		frames := 0
		emit := func(f *frame.Frame) {
			frames++
			if f.HasValue && exact(f.Value).Cmp(want) != 0 {
				t.Fatalf("%x: read %v, want %v", p, f.Value, want)
			}
			// 15 digits and 4 of the scale's always fit.
			if !f.HasValue && value.CmpAbs(big.NewInt(1e14)) < 0 {
				t.Fatalf("%x: %v", p, f.Rejected)
			}
		}
		d.Feed(p, emit)
		d.Quiet(emit)
		if frames == 0 {
			t.Fatal("no frame")
		}
	})
}

// A float that was rounded from a decimal of six digits reads as that decimal.
func TestFloatsReadAsTheDecimalMeant(t *testing.T) {
	for _, width := range []int{4, 8} {
		d, err := frame.New(frame.Options{Kind: frame.Binary, Unit: frame.Millimetre, Binary: &frame.BinaryOptions{
			Length: width, Width: width, BigEndian: true, Type: "float", Scale: one}})
		if err != nil {
			t.Fatal(err)
		}
		rapid.Check(t, func(t *rapid.T) {
			digits := rapid.Int64Range(-999999, 999999).Draw(t, "digits")
			decimals := rapid.IntRange(0, 6).Draw(t, "decimals")
			want := frame.Decimal{Digits: digits, Scale: decimals}
			var p []byte
			if width == 4 {
				p = binary.BigEndian.AppendUint32(nil, math.Float32bits(float32(want.Float64())))
			} else {
				p = binary.BigEndian.AppendUint64(nil, math.Float64bits(want.Float64()))
			}
			d.Reset(0)
			emit := func(f *frame.Frame) {
				if !f.HasValue || exact(f.Value).Cmp(exact(want)) != 0 {
					t.Fatalf("%x: %v %v, want %v", p, f.Rejected, f.Value, want)
				}
			}
			d.Feed(p, emit)
			d.Quiet(emit)
		})
	}
}

// A description that cannot be is refused, with the reason.
func TestLayoutsRefused(t *testing.T) {
	bin := func(change func(*frame.Options)) frame.Options {
		b := *counts(4, false, "signed")
		o := frame.Options{Kind: frame.Binary, Unit: frame.Millimetre, Binary: &b}
		change(&o)
		return o
	}
	nib := func(change func(*frame.Options)) frame.Options {
		o := frame.Options{Kind: frame.Nibbles, Unit: frame.Millimetre, Nibbles: packed()}
		change(&o)
		return o
	}
	for want, o := range map[string]frame.Options{
		"length must be": bin(func(o *frame.Options) { o.Binary.Length = 0 }),
		"bytes wide":     bin(func(o *frame.Options) { o.Binary.Width = 5 }),
		"does not lie":   bin(func(o *frame.Options) { o.Binary.Offset = 7 }),
		"reach into":     bin(func(o *frame.Options) { o.Binary.Offset = 1 }),
		"type of value":  bin(func(o *frame.Options) { o.Binary.Type = "" }),
		"a float":        bin(func(o *frame.Options) { o.Binary.Type, o.Binary.Width = "float", 3 }),
		"scale is zero":  bin(func(o *frame.Options) { o.Binary.Scale = frame.Decimal{} }),
		"does not exist": bin(func(o *frame.Options) { o.Binary.Flags[0].Bit = 8 }),
		"stands twice":   bin(func(o *frame.Options) { o.Binary.Flags[0].Means = "negative" }),
		"covers itself": bin(func(o *frame.Options) {
			o.Checksum = frame.Checksum{Kind: "sum8", Binary: true, To: new(int)}
			*o.Checksum.To = 10
		}),
		"unknown checksum":   bin(func(o *frame.Options) { o.Checksum.Kind = "md5" }),
		"needs its layout":   bin(func(o *frame.Options) { o.Binary = nil }),
		"count must be":      nib(func(o *frame.Options) { o.Nibbles.Count = 0 }),
		"whole bytes":        nib(func(o *frame.Options) { o.Nibbles.Count = 11 }),
		"the digits":         nib(func(o *frame.Options) { o.Nibbles.Digits = 9 }),
		"header of":          nib(func(o *frame.Options) { o.Nibbles.Header = []byte{1, 2, 3} }),
		"nibble 10 does not": nib(func(o *frame.Options) { o.Nibbles.Sign.At = 10 }),
		"sends no unit":      nib(func(o *frame.Options) { o.Unit = frame.NoUnit }),
	} {
		if _, err := frame.New(o); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%v, want %q", err, want)
		}
	}
}
