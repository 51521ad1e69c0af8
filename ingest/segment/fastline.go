package segment

import (
	"encoding/binary"
	"math"
	"math/bits"
	"slices"
)

// Columns hold plain indications, one a row.
type columns struct {
	gauge []uint16
	micro []int64
	time  []int64
}

// interner gives each gauge name a small number. Names of up to eight bytes
// are found by their bytes as one word, in a table that is only a shortcut to
// the map.
type interner struct {
	ids   map[string]uint16
	names []string
	cache [256]struct {
		word uint64
		size uint8
		id   uint16
	}
}

func newInterner(names []string) *interner {
	in := &interner{ids: make(map[string]uint16)}
	for _, n := range names {
		if validName([]byte(n)) {
			in.add([]byte(n))
		}
	}
	return in
}

// add returns the number of a valid name, false where there are too many.
func (in *interner) add(name []byte) (uint16, bool) {
	if id, ok := in.ids[string(name)]; ok {
		return id, true
	}
	if len(in.names) >= math.MaxUint16 {
		return 0, false
	}
	id := uint16(len(in.names))
	s := string(name)
	in.ids[s] = id
	in.names = append(in.names, s)
	return id, true
}

// validName tells whether the fast path may take a gauge name: characters that
// line protocol neither escapes nor refuses.
func validName(name []byte) bool {
	if len(name) == 0 || len(name) > 64 {
		return false
	}
	for _, c := range name {
		if !(c >= 'a' && c <= 'z' || c >= '0' && c <= '9' || c == '_' || c == '-' || c == '.' || c >= 'A' && c <= 'Z') {
			return false
		}
	}
	return true
}

const (
	fastPrefix = "indication,gauge="
	// shortestLine is "indication,gauge=g mm=0 T" with its newline.
	shortestLine = len(fastPrefix) + 1 + len(" mm=") + 1 + 1 + 19 + 1
	spaces       = 0x2020202020202020
	ones         = 0x0101010101010101
	highs        = 0x8080808080808080
	zeros        = 0x3030303030303030
)

var (
	prefixA = binary.LittleEndian.Uint64([]byte(fastPrefix[0:8]))
	prefixB = binary.LittleEndian.Uint64([]byte(fastPrefix[8:16]))
	mmWord  = binary.LittleEndian.Uint32([]byte(" mm="))
)

var pow10 = [7]int64{1000000, 100000, 10000, 1000, 100, 10, 1}

// eightDigits turns eight ASCII digits, the first in the lowest byte, into
// their number; ok is false where one is no digit.
func eightDigits(w uint64) (v uint64, ok bool) {
	if w&0xF0F0F0F0F0F0F0F0 != zeros || (w+0x0606060606060606)&0xF0F0F0F0F0F0F0F0 != zeros {
		return 0, false
	}
	return joinDigits(w - zeros), true
}

// fastLines decodes plain indications from the start of text into cols, which
// must have been grown by the caller as it likes (append is used), and returns
// how many bytes it took: up to the end, or to the first line that is not
// exactly `indication,gauge=NAME mm=-?D{1,9}(.D{1,6})? T` with a 19-digit T.
func fastLines(text []byte, cols *columns, names *interner) int {
	have := len(cols.gauge)
	most := have + len(text)/shortestLine
	gauge := slices.Grow(cols.gauge, most-have)[:most]
	micro := slices.Grow(cols.micro, most-have)[:most]
	stamp := slices.Grow(cols.time, most-have)[:most]
	p, row := 0, have
	for {
		if len(text)-p < shortestLine || row == most {
			break
		}
		line := text[p:]
		if binary.LittleEndian.Uint64(line) != prefixA || binary.LittleEndian.Uint64(line[8:]) != prefixB || line[16] != '=' {
			break
		}
		// The name ends at the first blank.
		w := binary.LittleEndian.Uint64(line[17:])
		x := w ^ spaces
		found := (x - ones) &^ x & highs
		var id uint16
		var q int
		if found != 0 {
			n := bits.TrailingZeros64(found) >> 3
			key := w & (1<<(8*n) - 1)
			slot := &names.cache[(key*0x9E3779B97F4A7C15)>>56]
			q = 17 + n
			if slot.word == key && int(slot.size) == n && n > 0 {
				id = slot.id
			} else {
				name := line[17:q]
				if !validName(name) {
					break
				}
				var ok bool
				if id, ok = names.add(name); !ok {
					break
				}
				slot.word, slot.size, slot.id = key, uint8(n), id
			}
		} else {
			q = 25
			for q < len(line) && q < 17+65 && line[q] != ' ' {
				q++
			}
			name := line[17:q]
			if !validName(name) {
				break
			}
			var ok bool
			if id, ok = names.add(name); !ok {
				break
			}
		}
		// " mm=", the shortest number, a blank, 19 digits, a newline.
		if len(line)-q < 4+1+1+19+1 || binary.LittleEndian.Uint32(line[q:]) != mmWord {
			break
		}
		q += 4
		negative := line[q] == '-'
		if negative {
			q++
		}
		var v int64
		if n := wordNumber(binary.LittleEndian.Uint64(line[q:]), &v); n > 0 {
			q += n
		} else {
			var ok bool
			if v, q, ok = fastNumber(line, q); !ok {
				break
			}
		}
		if negative {
			v = -v
		}
		if len(line)-q < 1+19+1 {
			break
		}
		t := line[q : q+21]
		hi, ok1 := eightDigits(binary.LittleEndian.Uint64(t[1:]))
		lo, ok2 := eightDigits(binary.LittleEndian.Uint64(t[9:]))
		a, b, c := t[17]-'0', t[18]-'0', t[19]-'0'
		if t[0] != ' ' || !ok1 || !ok2 || a > 9 || b > 9 || c > 9 || t[20] != '\n' || t[1] == '0' {
			break
		}
		ns := hi*100000000000 + lo*1000 + uint64(a)*100 + uint64(b)*10 + uint64(c)
		if ns > math.MaxInt64 {
			break
		}
		gauge[row], micro[row], stamp[row] = id, v, int64(ns)
		row++
		p += q + 21
	}
	cols.gauge, cols.micro, cols.time = gauge[:row], micro[:row], stamp[:row]
	return p
}

// wordNumber reads D.D with at most six digits and something behind it, which
// is nearly every indication, from the eight bytes of w without a loop: it
// gives millionths and the length, 0 where the number has another form.
func wordNumber(w uint64, v *int64) int {
	t := w ^ zeros
	// The high bit of each byte that is no digit.
	other := ((t&^highs + 0x7676767676767676) | t) & highs
	point := bits.TrailingZeros64(other)
	end := bits.TrailingZeros64(other & (other - 1))
	point, end = point>>3, end>>3
	if end > 7 || point == 0 || end < point+2 || byte(w>>(8*point)) != '.' {
		return 0
	}
	places := end - point - 1
	whole := t & (1<<(8*point) - 1)
	digits := whole | t>>8&(1<<(8*(end-1))-1)&^(1<<(8*point)-1)
	digits <<= 8 * (9 - end)
	*v = int64(joinDigits(digits)) * pow10[places]
	return end
}

// joinDigits turns eight digit values, the first in the lowest byte, into their
// number.
func joinDigits(x uint64) uint64 {
	x = x*10 + x>>8
	return ((x&0x000000FF000000FF)*0x000F424000000064 + (x>>16&0x000000FF000000FF)*0x0000271000000001) >> 32
}

// fastNumber reads D{1,9}(.D{1,6})? at q as millionths and returns where it ends.
func fastNumber(line []byte, q int) (v int64, end int, ok bool) {
	start := q
	for q < len(line) && line[q]-'0' <= 9 {
		v = v*10 + int64(line[q]-'0')
		q++
		if q-start > 9 {
			return 0, q, false
		}
	}
	if q == start || q >= len(line) {
		return 0, q, false
	}
	if line[q] != '.' {
		return v * 1000000, q, true
	}
	q++
	start = q
	for q < len(line) && line[q]-'0' <= 9 {
		v = v*10 + int64(line[q]-'0')
		q++
		if q-start > 6 {
			return 0, q, false
		}
	}
	if q == start {
		return 0, q, false
	}
	return v * pow10[q-start], q, true
}
