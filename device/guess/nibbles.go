package guess

import (
	"encoding/hex"
	"slices"
	"strings"
	"time"

	"gaugelog/config"
)

// hexNibbles proposes digits sent as one hex character each.
func hexNibbles(c Capture) (Proposal, bool) {
	list, start, end := pieces(c)
	if len(list) == 0 {
		return Proposal{}, false
	}
	var rows []string
	for _, l := range list {
		if s := string(l.body); len(s) >= 6 && strings.Trim(s, "0123456789ABCDEFabcdef") == "" {
			rows = append(rows, strings.ToUpper(s))
		}
	}
	rows = usualLength(rows)
	p, ok := nibbles(rows, "hex", len(list), false)
	if !ok {
		return p, false
	}
	p.Frame.Start, p.Frame.End = string(start), string(end)
	p.Share = float64(len(rows)) / float64(len(list))
	var starts []time.Duration
	for _, l := range list {
		starts = append(starts, l.at)
	}
	pace(&p, c, starts)
	p.rank = p.Share * 3.2 // above a text frame of digits without a point
	return p, true
}

// packedNibbles proposes digits packed two to a byte, in rows of one length:
// perhaps between a start and an end byte, perhaps with a sum behind them.
func packedNibbles(c Capture) (Proposal, bool) {
	if printable(c.Bytes()) > 0.9 {
		return Proposal{}, false
	}
	list, total, byPause := fixedRows(c)
	if len(list) < leastBinary || !byPause && tailLength(list) == 0 {
		return Proposal{}, false
	}
	n := len(list[0].body)
	tail := tailLength(list)
	t, summed := findTailSum(list)
	from, to := 0, n-tail
	if summed {
		to, tail = t.at, n-t.at-t.size
	}
	if first := list[0].body[0]; (first == 1 || first == 2) && !varying(list)[0] {
		from = 1
	}
	p, ok := packedOrder(list, from, to, summed)
	if !ok {
		return p, false
	}
	p.Frame.Start, p.Frame.End = string(list[0].body[:from]), string(list[0].body[n-tail:])
	p.Share = min(1, float64(len(list)*n)/float64(total))
	p.rank = p.Share * 2
	if summed {
		p.Frame.Checksum = &config.Checksum{Kind: t.kind, Order: t.order}
		if t.from > 0 {
			p.Frame.Checksum.From = &t.from
		}
		p.sure("a checksum stands behind the nibbles (%s of the bytes from %d on): it holds in %d frames", t.kind, t.from, len(list))
		p.rank = p.Share * 4.5 // above the same bytes as one binary number
	}
	var starts []time.Duration
	for _, l := range list {
		starts = append(starts, l.at)
	}
	pace(&p, c, starts)
	return p, true
}

// packedOrder reads rows of packed nibbles with either half of a byte first,
// and keeps the one in which the digits move the more the less they count.
func packedOrder(list []piece, from, to int, summed bool) (best Proposal, found bool) {
	least := 0
	for _, order := range []string{"high-first", "low-first"} {
		var rows []string
		for _, l := range list {
			row := strings.ToUpper(hex.EncodeToString(l.body[from:to]))
			if order == "low-first" {
				b := []byte(row)
				for i := 0; i+1 < len(b); i += 2 {
					b[i], b[i+1] = b[i+1], b[i]
				}
				row = string(b)
			}
			rows = append(rows, row)
		}
		p, ok := nibbles(rows, "packed", len(list), summed)
		if !ok {
			continue
		}
		d := p.Frame.Nibbles.Digits
		bad := inversions(rows, d.At, d.Count, d.First == "least")
		if !found || bad < least {
			if order == "low-first" {
				p.Frame.Nibbles.Order = order
			}
			p.unsure("that the %s half of a byte comes first: so the digits move the more the less they count", strings.TrimSuffix(order, "-first"))
			best, found, least = p, true, bad
		}
	}
	return best, found
}

// inversions counts the pairs of neighbouring digits of which the one that
// should move less takes more values.
func inversions(rows []string, at, count int, leastFirst bool) (n int) {
	for i := at; i+1 < at+count; i++ {
		a, b := len(codesAt(rows, i)), len(codesAt(rows, i+1))
		if leastFirst && a < b || !leastFirst && a > b {
			n++
		}
	}
	return n
}

// usualLength keeps the rows of the commonest length.
func usualLength(rows []string) []string {
	count := map[int]int{}
	best := 0
	for _, r := range rows {
		if count[len(r)]++; count[len(r)] > count[best] {
			best = len(r)
		}
	}
	return slices.DeleteFunc(slices.Clone(rows), func(r string) bool { return len(r) != best })
}

// among lists codes as words.
func among(codes string) string {
	list := strings.Split(codes, "")
	slices.Sort(list)
	return strings.Join(list, " or ")
}

func subset(codes, of string) bool { return strings.Trim(codes, of) == "" }
