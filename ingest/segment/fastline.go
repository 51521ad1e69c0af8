package segment

import (
	"encoding/binary"
	"math"
	"math/bits"
	"slices"
)

// columns hold plain indications, one a row.
type columns struct {
	gauge []uint16
	micro []int64
	time  []int64
}

const (
	fastPrefix = "indication,gauge="
	// shortestLine is "indication,gauge=g mm=0 T" with its newline.
	shortestLine = len(fastPrefix) + 1 + len(" mm=") + 1 + 1 + 19 + 1
	spaces       = 0x2020202020202020
	ones         = 0x0101010101010101
	highs        = 0x8080808080808080
	zeros        = 0x3030303030303030
	endZeros     = 0x0A303030 // three of them and a newline
	fastName     = len(fastPrefix)
)

// The words of a line that are always the same, the first byte the lowest.
const (
	prefixA = 0x6974616369646e69 // "indicati"
	prefixB = 0x65677561672c6e6f // "on,gauge"
	mmWord  = 0x3d6d6d20         // " mm="
)

var pow10 = [8]int64{1000000, 100000, 10000, 1000, 100, 10, 1}

// lineRoom is more than the longest line of the form has.
const lineRoom = 128

// fastLines decodes plain indications from the start of text into cols, which
// must have been grown by the caller as it likes (append is used), and returns
// how many bytes it took: up to the end, or to the first line that is not
// exactly `indication,gauge=NAME mm=-?D{1,9}(.D{1,6})? T` with a 19-digit T.
//
// Where a line begins follows from the length of the one before, and waiting for
// that is what costs most. So each gauge remembers which gauge came behind it
// and how long that one's line was: both are compared with what stands there,
// and while they are right the processor is some lines ahead.
func fastLines(text []byte, cols *columns, names *interner) int {
	have := len(cols.gauge)
	most := have + len(text)/shortestLine
	gauge := slices.Grow(cols.gauge, most-have)[:most]
	micro := slices.Grow(cols.micro, most-have)[:most]
	stamp := slices.Grow(cols.time, most-have)[:most]
	p, row := 0, have
	var pad [lineRoom]byte
	known := stampHead{word: 0x3030303030303031, value: 10000000 * headUnit}
	s := &names.start
	for row < most {
		// A view of fixed length, so that few places need checks of their own.
		// The zeros behind the end belong to no line.
		line := &pad
		if rest := text[p:]; len(rest) >= lineRoom {
			line = (*[lineRoom]byte)(rest)
		} else {
			clear(pad[copy(pad[:], rest):])
		}
		if binary.LittleEndian.Uint64(line[0:]) != prefixA || binary.LittleEndian.Uint64(line[8:]) != prefixB || line[16] != '=' {
			break
		}
		if t := s.next; t.stands(line) {
			s = t
		} else if t = names.find(line); t != nil {
			s.next, s = t, t
		} else {
			break
		}
		v, q := fastNumber(line, fastName+int(s.size))
		if q == 0 {
			break
		}
		t, ok := known.stamp(line, q)
		if !ok {
			break
		}
		gauge[row], micro[row], stamp[row] = s.id, v, t
		row++
		p += int(s.length)
		if n := q + stampLength; n != int(s.length) {
			p += n - int(s.length)
			s.length = uint8(n)
		}
	}
	cols.gauge, cols.micro, cols.time = gauge[:row], micro[:row], stamp[:row]
	return p
}

// stampLength is that of a blank, 19 digits and a newline.
const stampLength = 1 + 19 + 1

// stampHead is the first eight digits of a stamp, which stay for 100 s, and
// their value. It always holds digits.
type stampHead struct{ word, value uint64 }

// headUnit is the value of the last of a stamp's first eight digits, in ns.
const headUnit = 100_000_000_000

// stamp reads a blank, 19 digits without a leading zero and a newline at q.
func (h *stampHead) stamp(line *[lineRoom]byte, q int) (int64, bool) {
	t := line[q : q+stampLength]
	if w := binary.LittleEndian.Uint64(t[1:]); w != h.word {
		v, ok := eightDigits(w)
		if !ok || t[1] == '0' {
			return 0, false
		}
		h.word, h.value = w, v*headUnit
	}
	lo, ok := eightDigits(binary.LittleEndian.Uint64(t[9:]))
	end := binary.LittleEndian.Uint32(t[17:]) ^ endZeros
	if !ok || t[0] != ' ' || ((end+0x00767676)|end)&0xFF808080 != 0 {
		return 0, false
	}
	ns := h.value + lo*1000 + uint64(end&0xFF)*100 + uint64(end>>8&0xFF)*10 + uint64(end>>16)
	return int64(ns), ns <= math.MaxInt64
}

// eightDigits turns eight ASCII digits, the first in the lowest byte, into
// their number; ok is false where one is no digit.
func eightDigits(w uint64) (v uint64, ok bool) {
	return joinDigits(w - zeros), ((w+0x4646464646464646)|(w-zeros))&highs == 0
}

// fastNumber reads " mm=" and -?D{1,9}(.D{1,6})? at q as millionths and returns
// where it ends, 0 where something else stands there.
func fastNumber(line *[lineRoom]byte, q int) (v int64, end int) {
	if binary.LittleEndian.Uint32(line[q:]) != mmWord {
		return 0, 0
	}
	q += 4
	negative := line[q] == '-'
	if negative {
		q++
	}
	// D.D with at most six digits and something behind it, which is nearly every
	// indication, is taken from eight bytes without a loop.
	t := binary.LittleEndian.Uint64(line[q:]) ^ zeros
	// The high bit of each byte that is no digit.
	other := ((t&^highs + 0x7676767676767676) | t) & highs
	point := bits.TrailingZeros64(other) &^ 7 // in bits, as all places here
	after := bits.TrailingZeros64(other&(other-1)) &^ 7
	if other&(other-1) == 0 || point == 0 || after < point+16 || byte(t>>(point&63)) != '.'^'0' {
		if v, end = longNumber(line[:], q); end == 0 {
			return 0, 0
		}
	} else {
		low := uint64(1)<<(point&63) - 1
		digits := t&low | t>>8&^low&(1<<((after-8)&63)-1)
		v = int64(joinDigits(digits<<((72-after)&63))) * pow10[((after-point)>>3-1)&7]
		end = q + after>>3
	}
	if negative {
		v = -v
	}
	return v, end
}

// joinDigits turns eight digit values, the first in the lowest byte, into their
// number.
func joinDigits(x uint64) uint64 {
	x = x*10 + x>>8
	return ((x&0x000000FF000000FF)*0x000F424000000064 + (x>>16&0x000000FF000000FF)*0x0000271000000001) >> 32
}

// longNumber reads D{1,9}(.D{1,6})? at q as millionths and returns where it ends,
// 0 where something else stands there.
func longNumber(line []byte, q int) (v int64, end int) {
	start := q
	for q < len(line) && line[q]-'0' <= 9 {
		v = v*10 + int64(line[q]-'0')
		q++
		if q-start > 9 {
			return 0, 0
		}
	}
	if q == start || q >= len(line) {
		return 0, 0
	}
	if line[q] != '.' {
		return v * 1000000, q
	}
	q++
	start = q
	for q < len(line) && line[q]-'0' <= 9 {
		v = v*10 + int64(line[q]-'0')
		q++
		if q-start > 6 {
			return 0, 0
		}
	}
	if q == start {
		return 0, 0
	}
	return v * pow10[q-start], q
}
