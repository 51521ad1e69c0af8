package guess

import (
	"encoding/hex"
	"fmt"
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
	p, ok := nibbles(rows, "hex", len(list))
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

// packedNibbles proposes digits packed two to a byte, in bursts of one length.
func packedNibbles(c Capture) (Proposal, bool) {
	list := bursts(c)
	if printable(c.Bytes()) > 0.9 || len(list) < 3 {
		return Proposal{}, false
	}
	var rows []string
	for _, l := range list {
		rows = append(rows, strings.ToUpper(hex.EncodeToString(l.body)))
	}
	rows = usualLength(rows)
	p, ok := nibbles(rows, "packed", len(list))
	if !ok {
		return p, false
	}
	p.unsure("whether the high or the low half of a byte comes first: high-first makes all digits decimal here")
	p.Share = float64(len(rows)) / float64(len(list))
	var starts []time.Duration
	for _, l := range list {
		starts = append(starts, l.at)
	}
	pace(&p, c, starts)
	p.rank = p.Share * 2
	return p, true
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

// nibbles finds header, sign, digits, place of the point and unit in rows of
// hex digits of one length: the layout that cables of digital calipers and
// indicators commonly use (common practice).
func nibbles(rows []string, coding string, all int) (Proposal, bool) {
	p := Proposal{Frame: config.Frame{Kind: "nibbles"}, Frames: len(rows)}
	if len(rows) < 3 || len(rows)*2 < all {
		return p, false
	}
	n := len(rows[0])
	at := make([]string, n) // the codes seen in each place
	for i := range n {
		for _, r := range rows {
			if !strings.Contains(at[i], r[i:i+1]) {
				at[i] += r[i : i+1]
			}
		}
	}
	head := 0
	for head < n && len(at[head]) == 1 && at[head] > "9" {
		head++
	}
	if head == 0 {
		return p, false // without letters in front these are digits of a text
	}
	rest := n - head
	if rest < 5 {
		return p, false
	}
	layout := &config.Nibbles{Count: n, Coding: coding, Header: rows[0][:head]}
	p.sure("%d nibbles a frame, the first %d always %s", n, head, layout.Header)
	from, to := head, n
	if subset(at[head], "08") {
		layout.Sign = &config.NibbleField{At: head, Codes: map[string]string{"0": "+", "8": "-"}}
		from++
		if strings.Contains(at[head], "8") {
			p.sure("nibble %d is 0 or 8", head)
			p.unsure("0 is taken as plus and 8 as minus")
		} else {
			p.unsure("nibble %d is always 0: taken as the sign, with 8 for minus, which was not seen", head)
		}
	} else {
		p.unsure("no sign was found: a minus would be lost; see the manual")
	}
	if subset(at[n-1], "01") && to-from > 5 {
		layout.Unit = &config.NibbleField{At: n - 1, Codes: map[string]string{"0": "mm", "1": "in"}}
		p.unsure("the last nibble is %s: taken as the unit, 0 for mm and 1 for in", among(at[n-1]))
		to--
	} else {
		p.Frame.Unit = "mm"
		p.unsure("no unit was found: mm is assumed")
	}
	if subset(at[to-1], "0123456") && to-from > 4 && len(at[to-1]) <= 2 {
		codes := map[string]string{}
		for d := range 6 {
			codes[fmt.Sprint(d)] = fmt.Sprint(d)
		}
		layout.Point = &config.NibbleField{At: to - 1, Codes: codes}
		p.unsure("nibble %d is %s: taken as the number of digits behind the point", to-1, among(at[to-1]))
		to--
	} else {
		layout.Digits.Decimals = min(3, to-from)
		p.unsure("no place for the point was found: 3 digits behind it are assumed")
	}
	layout.Digits.At, layout.Digits.Count = from, to-from
	for i := from; i < to; i++ {
		if !subset(at[i], "0123456789") {
			return p, false
		}
	}
	if to-from > 15 || coding == "packed" && n%2 == 1 {
		return p, false
	}
	if len(at[from]) > 1 && len(at[to-1]) == 1 {
		layout.Digits.First = "least"
		p.unsure("the first digit moves most: taken as the least significant")
	} else {
		p.unsure("the most significant digit is taken to come first")
	}
	p.sure("nibbles %d to %d are decimal digits in every frame", from, to-1)
	p.Frame.Nibbles = layout
	return p, true
}

// among lists codes as words.
func among(codes string) string {
	list := strings.Split(codes, "")
	slices.Sort(list)
	return strings.Join(list, " or ")
}

func subset(codes, of string) bool { return strings.Trim(codes, of) == "" }
