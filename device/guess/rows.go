package guess

import (
	"bytes"
	"encoding/hex"
	"slices"
	"strings"
)

// fixedRows cuts a capture into frames of one length: by pauses, or else by
// the period after which fixed bytes come again. total is the number of bytes
// they were cut from.
func fixedRows(c Capture) (rows []piece, total int, byPause bool) {
	list := bursts(c)
	count := map[int]int{}
	best := 0
	for _, l := range list {
		if count[len(l.body)]++; count[len(l.body)] > count[best] {
			best = len(l.body)
		}
	}
	if best >= 3 && best <= 64 && count[best] >= leastBinary && count[best]*10 >= len(list)*8 {
		if len(list[0].body) != best {
			list = list[1:] // torn, or what had gathered before the port was opened
		}
		for _, l := range list {
			total += len(l.body)
		}
		return slices.DeleteFunc(list, func(l piece) bool { return len(l.body) != best }), total, true
	}
	all := c.Bytes()
	for n := 3; n <= 64 && n*leastBinary <= len(all); n++ {
		if at, ok := phase(all, n); ok {
			for i := at; i+n <= len(all); i += n {
				rows = append(rows, piece{arrival(c, i), all[i : i+n]})
			}
			return rows, len(all), false
		}
	}
	return nil, 0, false
}

// phase finds where in a period of n bytes the fixed bytes begin; false where
// none are fixed, or all are.
func phase(p []byte, n int) (int, bool) {
	steady := make([]bool, n)
	some, others := false, false
	for k := range n {
		steady[k] = true
		for i := k + n; i < len(p); i += n {
			steady[k] = steady[k] && p[i] == p[k]
		}
		some, others = some || steady[k], others || !steady[k]
	}
	if !some || !others {
		return 0, false
	}
	best, at := 0, 0
	for k := range n {
		run := 0
		for run < n && steady[(k+run)%n] {
			run++
		}
		if run > best {
			best, at = run, k
		}
	}
	return at, true
}

func varying(rows []piece) []bool {
	v := make([]bool, len(rows[0].body))
	for _, r := range rows {
		for i, b := range r.body {
			v[i] = v[i] || b != rows[0].body[i]
		}
	}
	return v
}

func lastTrue(v []bool) int {
	for i := len(v) - 1; i >= 0; i-- {
		if v[i] {
			return i
		}
	}
	return -1
}

// tailSum is a checksum found near the end of frames of one length.
type tailSum struct {
	kind, order string
	from        int // the first byte covered
	at          int // where it stands
	size        int
}

// findTailSum looks for a checksum in the last byte or two, or before the
// constant control characters that close every frame.
func findTailSum(rows []piece) (tailSum, bool) {
	n := len(rows[0].body)
	for tail := range tailLength(rows) + 1 {
		for _, kind := range []string{"crc16", "sum8", "xor8", "twos-complement"} {
			size := 1
			if kind == "crc16" {
				size = 2
			}
			for _, from := range []int{0, 1, 2} {
				for _, order := range []string{"", "high-first"} {
					t := tailSum{kind, order, from, n - tail - size, size}
					if order != "" && kind != "crc16" || from >= t.at || !t.holds(rows) {
						continue
					}
					return t, true
				}
			}
		}
	}
	return tailSum{}, false
}

// tailLength is the number of terminating control characters, at most two,
// that every row ends with.
func tailLength(rows []piece) int {
	varies := varying(rows)
	n := len(varies)
	k := 0
	for k < 2 && k < n && !varies[n-1-k] && strings.IndexByte("\x03\x04\r\n", rows[0].body[n-1-k]) >= 0 {
		k++
	}
	return k
}

// holds tells whether the sum is right in every row but one in ten, and in
// enough different ones.
func (t tailSum) holds(rows []piece) bool {
	different := map[string]bool{}
	damaged := 0
	for _, r := range rows {
		body, sum := r.body[t.from:t.at], r.body[t.at:t.at+t.size]
		want, err := hex.DecodeString(sumOf(body, t.kind, t.order))
		if err != nil {
			panic(err) // sumOf writes hex digits
		}
		if !bytes.Equal(want, sum) {
			damaged++
			continue
		}
		different[string(body)] = true
	}
	return len(different) >= leastSums && damaged*10 <= len(rows)
}
