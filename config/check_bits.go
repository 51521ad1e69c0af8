package config

import (
	"fmt"
	"slices"
	"strings"
)

func (c *checker) binary(p string, f *Frame) {
	b := f.Binary
	if b == nil {
		c.fail(p, "frame "+f.Name+" is binary and has no binary group", "add binary: {length: 8, offset: 2, width: 4, order: little, type: signed, scale: 0.001}")
		return
	}
	p += ".binary"
	if b.Length < 1 || b.Length > 1<<16 {
		c.fail(p, "length of a binary frame must lie between 1 and 65536 bytes", "add length: and the number of bytes of a whole frame")
		return
	}
	switch {
	case !slices.Contains([]int{1, 2, 3, 4, 8}, b.Width):
		c.fail(p, "width of the value must be 1, 2, 3, 4 or 8 bytes", "add width: and the number of bytes of the value")
	case b.Offset < 0 || b.Offset+b.Width > b.Length:
		c.fail(p+".offset", fmt.Sprintf("the value (%d bytes from byte %d) does not lie in a frame of %d bytes", b.Width, b.Offset, b.Length), "bytes count from 0; correct offset, width or length")
	}
	if b.Type == "" || b.Order == "" && b.Width > 1 {
		c.fail(p, "binary of frame "+f.Name+" needs type and order", "add type: signed, unsigned or float, and order: big or little")
	}
	c.oneOf(p+".type", "type", b.Type, "signed", "unsigned", "float")
	c.oneOf(p+".order", "order", b.Order, "big", "little")
	if b.Type == "float" && b.Width != 4 && b.Width != 8 {
		c.fail(p+".type", "a float is 4 or 8 bytes wide", "correct width or type")
	}
	if n, ok := hexBytes(b.Sync); !ok {
		c.fail(p+".sync", "sync "+quoted(b.Sync)+" is not of hex bytes", `write two hex digits a byte, in quotes: "AA55"`)
	} else if n > b.Offset && b.Offset+b.Width > 0 && n > 0 {
		c.fail(p+".sync", "the sync bytes reach into the value", "correct sync or offset")
	} else if n == 0 && f.Checksum == nil {
		c.warn(p, "binary frame "+f.Name+" has neither sync bytes nor a checksum: a lost byte would shift every value", "add what the manual says of both")
	}
	for i, flag := range b.Flags {
		at := at(p+".flags", i)
		if flag.Byte < 0 || flag.Byte >= b.Length || flag.Bit < 0 || flag.Bit > 7 {
			c.fail(at, fmt.Sprintf("bit %d of byte %d does not exist in a frame of %d bytes", flag.Bit, flag.Byte, b.Length), "bytes count from 0; bits from 0 (lowest) to 7")
		}
		c.oneOf(at+".means", "what the flag means", flag.Means, append([]string{"negative", "in"}, statusWords()...)...)
		if flag.Means == "" {
			c.fail(at, "the flag has no meaning", "add means: negative, in, "+strings.Join(statusWords(), ", "))
		}
		if flag.Means == "negative" && b.Type != "" && b.Type != "unsigned" {
			c.fail(at+".means", "the sign stands twice: in the value's type and in a flag", "make type: unsigned, or take the flag out")
		}
	}
	c.scale(p+".scale", b.Scale)
}

func (c *checker) nibbles(p string, f *Frame) {
	n := f.Nibbles
	if n == nil {
		c.fail(p, "frame "+f.Name+" is nibbles and has no nibbles group", "add nibbles: {count: ..., coding: packed, digits: {at: ..., count: ...}}")
		return
	}
	p += ".nibbles"
	if n.Count < 1 || n.Count > 1024 {
		c.fail(p, "count of nibbles must lie between 1 and 1024", "add count: and the number of nibbles of a whole frame")
		return
	}
	if n.Coding == "" {
		c.fail(p, "nibbles of frame "+f.Name+" has no coding", "add coding: packed (two digits a byte) or hex (a character each)")
	}
	c.oneOf(p+".coding", "coding", n.Coding, "packed", "hex")
	c.oneOf(p+".order", "order", n.Order, "high-first", "low-first")
	c.oneOf(p+".digits.first", "first", n.Digits.First, "most", "least")
	if n.Coding == "packed" && n.Count%2 == 1 {
		c.fail(p+".count", fmt.Sprintf("%d nibbles do not fill whole bytes", n.Count), "write an even count, or coding: hex")
	}
	if d := n.Digits; d.Count < 1 || d.Count > 15 || d.At < 0 || d.At+d.Count > n.Count {
		c.fail(p, fmt.Sprintf("the digits (%d from nibble %d) do not lie in a frame of %d nibbles", d.Count, d.At, n.Count), "write digits: {at: , count: }; nibbles count from 0")
	} else if d.Decimals < 0 || d.Decimals > d.Count {
		c.fail(p+".digits.decimals", "decimals must not be more than the digits", "write how many digits stand behind the point")
	}
	if strings.Trim(n.Header, "0123456789abcdefABCDEF") != "" || len(n.Header) > n.Count {
		c.fail(p+".header", "header "+quoted(n.Header)+" is not of hex digits, or longer than the frame", "write one hex digit a nibble, in quotes: \"FFFF\"")
	}
	taken := map[int]string{}
	for i := range min(n.Digits.Count, n.Count) {
		taken[n.Digits.At+i] = "digits"
	}
	for i := range len(n.Header) {
		if other, twice := taken[i]; twice {
			c.fail(p+".header", "the header reaches into the "+other, "correct the header or where the digits stand")
			break
		}
		taken[i] = "header"
	}
	for _, field := range []struct {
		key   string
		field *NibbleField
		words []string
	}{
		{"sign", n.Sign, []string{"+", "-"}}, {"point", n.Point, []string{"0", "1", "2", "3", "4", "5", "6"}},
		{"unit", n.Unit, []string{"mm", "in"}}, {"status", n.Status, statusWords()},
	} {
		if field.field != nil {
			c.nibble(p+"."+field.key, field.key, field.field, n.Count, field.words, taken)
		}
	}
	if n.Point != nil && n.Digits.Decimals != 0 {
		c.fail(p+".digits.decimals", "the point stands twice: in a nibble and as decimals", "keep point or decimals")
	}
	if n.Sign == nil {
		c.warn(p, "nibbles frame "+f.Name+" has no sign: a minus would be dropped", "add sign: {at: , codes: {\"0\": \"+\", \"8\": \"-\"}} after the manual")
	}
}

func (c *checker) nibble(p, key string, f *NibbleField, count int, words []string, taken map[int]string) {
	if f.At < 0 || f.At >= count {
		c.fail(p+".at", fmt.Sprintf("nibble %d (%s) does not exist in a frame of %d nibbles", f.At, key, count), "nibbles count from 0")
	} else if other, twice := taken[f.At]; twice {
		c.fail(p+".at", fmt.Sprintf("nibble %d is both %s and %s", f.At, other, key), "correct one of the two")
	} else {
		taken[f.At] = key
	}
	if len(f.Codes) == 0 {
		c.fail(p, key+" has no codes", "add codes: {\"0\": ..., }, after the manual")
	}
	for _, code := range sortedKeys(f.Codes) {
		means := f.Codes[code]
		if len(code) != 1 || !strings.Contains("0123456789abcdefABCDEF", code) {
			c.fail(p+".codes."+code, "code "+quoted(code)+" is not one hex digit", "write 0 to 9 or A to F, in quotes")
		}
		c.oneOf(p+".codes."+code, "meaning of "+key, means, words...)
	}
}

// checksum checks what guards a frame, and that what it covers can exist.
func (c *checker) checksum(p string, f *Frame) {
	s := f.Checksum
	if s.Kind == "" {
		c.fail(p, "checksum has no kind", "add kind: sum8, xor8, twos-complement or crc16")
	}
	c.oneOf(p+".kind", "kind of checksum", s.Kind, "none", "sum8", "xor8", "twos-complement", "crc16")
	c.oneOf(p+".form", "form", s.Form, "hex", "binary")
	c.oneOf(p+".order", "order", s.Order, "low-first", "high-first")
	if s.Order != "" && s.Kind != "crc16" {
		c.fail(p+".order", "a checksum of one byte has no order", "take order out, or make kind: crc16")
	}
	inPattern := slices.Contains(groupsOf(f.Pattern), "sum")
	switch {
	case s.Kind == "none" || s.Kind == "":
		if inPattern {
			c.fail(p+".kind", "the pattern has a group sum, and the checksum is none", "write its kind, or rename the group")
		}
		return
	case f.Kind == "text" && !inPattern:
		c.fail(p, "frame "+f.Name+" has a checksum, and its pattern has no group sum", "add (?P<sum>[0-9A-F]{2}) to the pattern where the sum stands")
	case f.Kind == "text" && s.At != nil:
		c.fail(p+".at", "a text frame has no at: the group sum says where the checksum stands", "take at out")
	case f.Kind == "binary" && s.At == nil:
		c.fail(p, "the checksum of binary frame "+f.Name+" has no place", "add at: -1 for the last byte (crc16: at: -2)")
	}
	c.cover(p, f)
}

// cover checks the stretch a checksum covers; offsets below zero count from
// the end.
func (c *checker) cover(p string, f *Frame) {
	s := f.Checksum
	if s.From != nil && s.To != nil && (*s.From < 0) == (*s.To < 0) && *s.From >= *s.To {
		c.fail(p+".to", "the checksum covers nothing: to is not behind from", "bytes count from 0, to itself is not covered; negative counts from the end")
		return
	}
	size := map[bool]int{true: 2, false: 1}[s.Kind == "crc16"]
	length, ok := f.guarded(&size)
	if !ok {
		return
	}
	place := func(n *int, otherwise int) int {
		switch {
		case n == nil:
			return otherwise
		case *n < 0:
			return length + *n
		}
		return *n
	}
	sum := place(s.At, length-size)
	from, to := place(s.From, 0), place(s.To, sum)
	switch {
	case s.At == nil && f.Kind == "binary":
	case sum < 0 || sum+size > length:
		c.fail(p+".at", fmt.Sprintf("the checksum (%d bytes from byte %d) does not lie in a frame of %d bytes", size, sum, length), "bytes count from 0; negative counts from the end")
	case from < 0 || to > length || from >= to:
		c.fail(p, fmt.Sprintf("the checksum covers bytes %d to %d of a frame of %d", from, to, length), "correct from and to")
	case from < sum+size && sum < to:
		c.fail(p, "the checksum covers itself", "end the stretch before it: to is the first byte that is not covered")
	}
}

// guarded is the length of a frame, in bytes without its terminator, whose
// checksum stands at a place of its own; false where that is not known. size is
// the checksum's, and doubled where it is sent as hex digits.
func (f *Frame) guarded(size *int) (length int, ok bool) {
	s := f.Checksum
	switch {
	case f.Kind == "binary" && f.Binary != nil && f.Binary.Length > 0:
		if s.Form == "hex" {
			*size *= 2
		}
		return f.Binary.Length, true
	case f.Kind == "nibbles" && f.Nibbles != nil && f.Nibbles.Count > 0:
		n := f.Nibbles.Count
		if f.Nibbles.Coding == "packed" {
			n /= 2
		}
		if s.Form == "hex" || s.Form == "" && f.Nibbles.Coding != "packed" {
			*size *= 2
		}
		if n += len(f.Start); s.At == nil {
			n += *size // it follows the nibbles
		}
		return n, true
	}
	return 0, false
}
