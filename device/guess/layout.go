package guess

import (
	"fmt"
	"strings"

	"gaugelog/config"
)

// codesAt are the different nibbles that the rows have in one place.
func codesAt(rows []string, i int) string {
	codes := ""
	for _, r := range rows {
		if !strings.Contains(codes, r[i:i+1]) {
			codes += r[i : i+1]
		}
	}
	return codes
}

// nibbleRows is what is known of rows of nibbles while their layout is found.
type nibbleRows struct {
	p        *Proposal
	l        *config.Nibbles
	at       []string // the codes seen in each place
	from, to int      // where digits may stand
}

// nibbles finds header, sign, digits, place of the point and unit in rows of
// hex digits of one length: the layouts that digital calipers and indicators
// commonly have (common practice), sign, point and unit before or behind the
// digits.
//
// bare lets them begin with an ordinary digit: a checksum was found, so these
// are frames.
func nibbles(rows []string, coding string, all int, bare bool) (Proposal, bool) {
	p := Proposal{Frame: config.Frame{Kind: "nibbles"}, Frames: len(rows)}
	if len(rows) < 3 || len(rows)*2 < all {
		return p, false
	}
	n := len(rows[0])
	r := nibbleRows{p: &p, l: &config.Nibbles{Count: n, Coding: coding}, to: n}
	for i := range n {
		r.at = append(r.at, codesAt(rows, i))
	}
	head := 0
	for head < n && len(r.at[head]) == 1 && r.at[head] > "9" {
		head++
	}
	r.from = head
	if n-head < 5 || coding == "packed" && n%2 == 1 {
		return p, false
	}
	signed := r.frontSign(bare)
	if head == 0 && !signed && coding == "hex" {
		return p, false // without letters these are digits of a text
	}
	signed = r.behind(signed)
	r.direction()
	if r.to-r.from < 3 || r.to-r.from > 15 {
		return p, false
	}
	moves := false
	for i := r.from; i < r.to; i++ {
		if !subset(r.at[i], "0123456789") {
			return p, false
		}
		moves = moves || len(r.at[i]) > 2
	}
	if !moves || head == 0 && !signed && !bare {
		return p, false
	}
	r.l.Header = rows[0][:r.header(head)]
	if r.l.Header != "" {
		p.sure("%d nibbles a frame, the first %d always %s", n, len(r.l.Header), r.l.Header)
	}
	r.l.Digits.At, r.l.Digits.Count = r.from, r.to-r.from
	if r.l.Point == nil {
		r.l.Digits.Decimals = min(3, r.to-r.from)
		p.unsure("no place for the point was found: 3 digits behind it are assumed")
	}
	if r.l.Unit == nil {
		p.Frame.Unit = "mm"
		p.unsure("no unit was found: mm is assumed")
	}
	if !signed {
		p.unsure("no sign was found: a minus would be lost; see the manual")
	}
	p.sure("nibbles %d to %d are decimal digits in every frame", r.from, r.to-1)
	p.Frame.Nibbles = r.l
	return p, true
}

// header is where the fixed front ends: behind the letters, and behind digits
// that stand still although the digit that counts least would stand there.
func (r *nibbleRows) header(letters int) int {
	if letters == 0 {
		return 0
	}
	if r.l.Sign != nil && r.l.Sign.At == letters {
		return letters
	}
	return r.from
}

// signCodes are the nibbles that commonly say plus and minus.
var signCodes = []struct{ plus, minus string }{{"0", "8"}, {"0", "F"}, {"C", "D"}, {"A", "B"}}

// frontSign takes the first nibble behind the header for a sign where it has
// the codes of one.
func (r *nibbleRows) frontSign(bare bool) bool {
	codes := r.at[r.from]
	for _, s := range signCodes {
		if !subset(codes, s.plus+s.minus) || r.from == 0 && !bare && !strings.Contains(codes, s.minus) {
			continue
		}
		r.sign(r.from, s.plus, s.minus)
		r.from++
		return true
	}
	return false
}

func (r *nibbleRows) sign(at int, plus, minus string) {
	r.l.Sign = &config.NibbleField{At: at, Codes: map[string]string{plus: "+", minus: "-"}}
	if len(r.at[at]) == 2 {
		r.p.unsure("nibble %d is %s: taken as the sign, %s for plus and %s for minus", at, among(r.at[at]), plus, minus)
		return
	}
	r.p.unsure("nibble %d is always %s: taken as the sign, %s for plus and %s for minus", at, r.at[at], plus, minus)
}

// behind takes what stands behind the digits for what it may be: letters for a
// sign, the last nibble for the unit, one that hardly changes for the point's.
func (r *nibbleRows) behind(signed bool) bool {
	if subset(r.at[r.to-1], "01") && r.to-r.from > 5 {
		r.l.Unit = &config.NibbleField{At: r.to - 1, Codes: map[string]string{"0": "mm", "1": "in"}}
		r.p.unsure("the last nibble is %s: taken as the unit, 0 for mm and 1 for in; it may be a status", among(r.at[r.to-1]))
		r.to--
	}
	for _, s := range signCodes {
		if at := r.to - 1; !signed && r.to-r.from > 5 && (subset(r.at[at], s.plus+s.minus) && r.at[at] > "9" || r.at[at] == s.plus+s.minus || r.at[at] == s.minus+s.plus) {
			r.sign(at, s.plus, s.minus)
			r.to--
			signed = true
		}
	}
	least := r.front() < r.to-1 && len(r.at[r.front()]) > len(r.at[r.to-1])
	for q := r.to - 1; q > r.from+3 && len(r.at[q]) <= 2; q-- {
		if !subset(r.at[q], "12345") || q < r.to-1 && (len(r.at[q]) > 1 || !least) {
			continue
		}
		codes := map[string]string{}
		for d := range 6 {
			codes[fmt.Sprint(d)] = fmt.Sprint(d)
		}
		r.l.Point = &config.NibbleField{At: q, Codes: codes}
		r.p.unsure("nibble %d is %s: taken as the number of digits behind the point", q, among(r.at[q]))
		if q < r.to-1 {
			r.p.unsure("what stands behind it, before nibble %d, is left out: see the manual whether it is a status", r.to)
		}
		r.to = q
		break
	}
	if at := r.to - 1; !signed && least && r.to-r.from > 5 && len(r.at[at]) == 2 && subset(r.at[at], "01") {
		r.sign(at, "0", "1")
		r.to--
		signed = true
	}
	return signed
}

// front is the first place that a digit may have: those before are fixed and
// not 0.
func (r *nibbleRows) front() int {
	i := r.from
	for i < r.to-1 && len(r.at[i]) == 1 && r.at[i] != "0" {
		i++
	}
	return i
}

// direction tells which digit comes first: the least significant one moves
// most. A fixed digit before that is no digit of the number.
func (r *nibbleRows) direction() {
	front := r.front()
	if len(r.at[front]) > len(r.at[r.to-1]) {
		if front > r.from && r.from > 0 {
			r.p.unsure("the fixed digits before nibble %d are taken as part of the header", front)
			r.from = front
		}
		r.l.Digits.First = "least"
		r.p.unsure("the first digit moves most: taken as the least significant")
		return
	}
	r.p.unsure("the most significant digit is taken to come first")
}
