package guess

import (
	"bytes"
	"encoding/hex"
	"slices"
	"strings"
	"time"

	"gaugelog/config"
	"gaugelog/device/frame"
)

// leastBinary is the number of frames a binary proposal stands on at least.
const leastBinary = 4

// fixed proposes frames of fixed length by what repeats in them.
func fixed(c Capture) (Proposal, bool) {
	if printable(c.Bytes()) > 0.9 {
		return Proposal{}, false
	}
	rows, byPause := fixedRows(c)
	if len(rows) < leastBinary {
		return Proposal{}, false
	}
	n := len(rows[0].body)
	p := Proposal{Frame: config.Frame{Kind: "binary", Unit: "mm"}, Frames: len(rows)}
	p.Share = float64(len(rows)*n) / float64(len(c.Bytes()))
	if p.Share < LeastShare {
		return p, false
	}
	if byPause {
		p.sure("%d bytes a frame, with a pause between frames", n)
	} else {
		p.unsure("%d bytes a frame, found by what repeats; no pauses show where a frame begins", n)
	}
	end := sumAtEnd(&p, rows)
	varies := varying(rows)
	first, last := slices.Index(varies[:end], true), lastTrue(varies[:end])
	if first < 0 {
		return p, false // nothing moves: there is no value to find
	}
	sync := 0
	for sync < first && rows[0].body[sync] != 0 && rows[0].body[sync] != 0xff {
		sync++
	}
	layout := &config.Binary{Length: n, Sync: strings.ToUpper(hex.EncodeToString(rows[0].body[:sync])), Type: "signed"}
	if sync > 0 {
		p.sure("the first bytes are always %s", layout.Sync)
	} else {
		p.unsure("no fixed first bytes were found: a lost byte would shift every value")
	}
	place(&p, layout, rows, sync, first, last, end)
	scale, err := config.ParseNumber("0.001")
	if err != nil {
		panic(err)
	}
	layout.Scale = &scale
	p.unsure("one count is taken as 0.001 mm, and no bit as a flag: compare with the display at two places, one below zero")
	p.Frame.Binary = layout
	var starts []time.Duration
	for _, r := range rows {
		starts = append(starts, r.at)
	}
	pace(&p, c, starts)
	p.rank = p.Share
	return p, true
}

// place finds where the value stands and which of its bytes counts least: the
// one that takes the most different values.
func place(p *Proposal, l *config.Binary, rows []piece, sync, first, last, end int) {
	kinds := func(i int) int {
		seen := map[byte]bool{}
		for _, r := range rows {
			seen[r.body[i]] = true
		}
		return len(seen)
	}
	l.Order = "big"
	if kinds(first) > kinds(last) {
		l.Order = "little"
	}
	for _, width := range []int{2, 4, 8} {
		if last-first+1 > width {
			continue
		}
		l.Width = width
		if l.Offset = last + 1 - width; l.Order == "little" {
			l.Offset = first
		}
		l.Offset = max(sync, min(l.Offset, end-width))
		if l.Offset+width <= end {
			break
		}
	}
	if l.Offset+l.Width > end || l.Width == 0 { // odd room: take what there is
		l.Offset, l.Width = first, min(last-first+1, 3)
	}
	p.unsure("bytes %d to %d move: taken as a signed number of %d bytes from byte %d, the %s end first", first, last, l.Width, l.Offset, l.Order)
}

// fixedRows cuts a capture into frames of one length: by pauses, or else by
// the period after which fixed bytes come again.
func fixedRows(c Capture) (rows []piece, byPause bool) {
	list := bursts(c)
	count := map[int]int{}
	best := 0
	for _, l := range list {
		if count[len(l.body)]++; count[len(l.body)] > count[best] {
			best = len(l.body)
		}
	}
	if best >= 3 && best <= 64 && count[best] >= leastBinary && count[best]*10 >= len(list)*8 {
		return slices.DeleteFunc(list, func(l piece) bool { return len(l.body) != best }), true
	}
	all := c.Bytes()
	for n := 3; n <= 64 && n*leastBinary <= len(all); n++ {
		if at, ok := phase(all, n); ok {
			for i := at; i+n <= len(all); i += n {
				rows = append(rows, piece{arrival(c, i), all[i : i+n]})
			}
			return rows, false
		}
	}
	return nil, false
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

// sumAtEnd looks for a checksum in the last byte or two and returns where the
// bytes before it end.
func sumAtEnd(p *Proposal, rows []piece) int {
	n := len(rows[0].body)
	for _, kind := range []string{"crc16", "sum8", "xor8", "twos-complement"} {
		size := 1
		if kind == "crc16" {
			size = 2
		}
		for _, from := range []int{0, 1, 2} {
			for _, order := range []string{"", "high-first"} {
				if order != "" && kind != "crc16" || from >= n-size {
					continue
				}
				if !holds(rows, kind, order, from, size) {
					continue
				}
				at := -size
				p.Frame.Checksum = &config.Checksum{Kind: kind, At: &at, Order: order}
				if from > 0 {
					p.Frame.Checksum.From = &from
				}
				p.sure("the last %d bytes are a checksum (%s, from byte %d): it holds in all %d frames", size, kind, from, len(rows))
				return n - size
			}
		}
	}
	p.unsure("no checksum was found in the last bytes")
	return n
}

func holds(rows []piece, kind, order string, from, size int) bool {
	different := map[string]bool{}
	for _, r := range rows {
		body, sum := r.body[from:len(r.body)-size], r.body[len(r.body)-size:]
		want, _ := hex.DecodeString(sumOf(body, kind, order))
		if !bytes.Equal(want, sum) {
			return false
		}
		different[string(body)] = true
	}
	return len(different) >= leastSums
}

// ModbusRead is the request to read count registers (function 3 or 4) from
// first on at a bus address (MODBUS Application Protocol V1.1b3, 6.3 and 6.4).
func ModbusRead(address, function byte, first, count uint16) []byte {
	p := []byte{address, function, byte(first >> 8), byte(first), byte(count >> 8), byte(count)}
	crc := frame.CRC16(p)
	return append(p, byte(crc), byte(crc>>8))
}
