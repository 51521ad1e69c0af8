package guess

import (
	"encoding/hex"
	"slices"
	"strings"
	"time"

	"gaugelog/config"
)

// leastBinary is the number of frames a binary proposal stands on at least.
const leastBinary = 4

// fixed proposes frames of fixed length by what repeats in them.
func fixed(c Capture) (Proposal, bool) {
	if printable(c.Bytes()) > 0.9 {
		return Proposal{}, false
	}
	rows, total, byPause := fixedRows(c)
	if len(rows) < leastBinary {
		return Proposal{}, false
	}
	n := len(rows[0].body)
	p := Proposal{Frame: config.Frame{Kind: "binary", Unit: "mm"}, Frames: len(rows)}
	p.Share = min(1, float64(len(rows)*n)/float64(total))
	if p.Share < LeastShare {
		return p, false
	}
	if byPause {
		p.sure("%d bytes a frame, with a pause between frames", n)
	} else {
		p.unsure("%d bytes a frame, found by what repeats; no pauses show where a frame begins", n)
	}
	p.rank = p.Share
	end := n
	if t, ok := findTailSum(rows); ok {
		at := t.at - n
		p.Frame.Checksum = &config.Checksum{Kind: t.kind, At: &at, Order: t.order}
		if t.from > 0 {
			p.Frame.Checksum.From = &t.from
		}
		p.sure("byte %d begins a checksum (%s of the bytes from %d on): it holds in %d frames", t.at, t.kind, t.from, len(rows))
		end = t.at
		p.rank += 3 // at a wrong speed no sum holds
	} else {
		p.unsure("no checksum was found in the last bytes")
	}
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
	p.Frame.Binary = layout
	last = flagBits(&p, layout, rows, first, last)
	place(&p, layout, rows, sync, first, last, end)
	scale, err := config.ParseNumber("0.001")
	if err != nil {
		panic(err)
	}
	layout.Scale = &scale
	p.unsure("one count is taken as 0.001 mm: compare with the display at two places, one below zero")
	var starts []time.Duration
	for _, r := range rows {
		starts = append(starts, r.at)
	}
	pace(&p, c, starts)
	return p, true
}

// flagBits takes a last moving byte in which few bits change for flags, and
// returns the last byte of the value then. A bit without which the value jumps
// where it passes zero is its sign.
func flagBits(p *Proposal, l *config.Binary, rows []piece, first, last int) int {
	var seen []byte
	changed := byte(0)
	for _, r := range rows {
		b := r.body[last]
		changed |= b ^ rows[0].body[last]
		if !slices.Contains(seen, b) {
			seen = append(seen, b)
		}
	}
	busy := 0
	for i := first; i < last; i++ {
		busy = max(busy, kindsIn(rows, i))
	}
	if last-first < 1 || ones(changed) > 3 || len(seen) > 4 || busy < 2*len(seen) {
		return last
	}
	names := []string{}
	for bit := range 8 {
		if changed>>bit&1 == 0 {
			continue
		}
		if l.Flags == nil && signBit(rows, first, last-1, last, bit) {
			l.Flags = append(l.Flags, config.Flag{Byte: last, Bit: bit, Means: "negative"})
			l.Type = "unsigned"
			p.unsure("bit %d of byte %d is taken as the minus: with it the value passes zero without a jump", bit, last)
			continue
		}
		names = append(names, string(rune('0'+bit)))
	}
	if len(names) > 0 {
		p.unsure("byte %d has few values: taken as flags, of which bit %s changed: add flags: with what the manual says they mean", last, strings.Join(names, " and "))
	}
	return last - 1
}

// signBit tells whether a bit makes the moving bytes a smooth course through
// zero: without their sign the values turn back there, so that their second
// differences grow.
func signBit(rows []piece, first, last, flags, bit int) bool {
	rough := func(signed bool) (sum float64) {
		var v [3]float64
		for i, r := range rows {
			now := magnitude(r.body[first:last+1], littleEnd(rows, first, last))
			if signed && r.body[flags]>>bit&1 == 1 {
				now = -now
			}
			v[0], v[1], v[2] = v[1], v[2], now
			if d := v[2] - 2*v[1] + v[0]; i >= 2 {
				sum += d * d
			}
		}
		return sum
	}
	return rough(true) < 0.9*rough(false)
}

// magnitude is the whole number that bytes make.
func magnitude(p []byte, little bool) (v float64) {
	for i := range p {
		b := p[i]
		if little {
			b = p[len(p)-1-i]
		}
		v = v*256 + float64(b)
	}
	return v
}

// littleEnd tells which end of the value moves more: the byte that takes the
// most different values counts least.
func littleEnd(rows []piece, first, last int) bool {
	return kindsIn(rows, first) > kindsIn(rows, last)
}

// kindsIn is the number of different values byte i takes.
func kindsIn(rows []piece, i int) int {
	seen := map[byte]bool{}
	for _, r := range rows {
		seen[r.body[i]] = true
	}
	return len(seen)
}

// place finds where the value stands and which of its bytes counts least.
func place(p *Proposal, l *config.Binary, rows []piece, sync, first, last, end int) {
	l.Order = "big"
	if littleEnd(rows, first, last) {
		l.Order = "little"
	}
	if l.Flags != nil { // all between the header and the flags is the magnitude
		if w := last + 1 - sync; l.Order == "big" && w <= 4 {
			first = sync
		}
		l.Offset, l.Width = first, min(last+1-first, 4)
	} else {
		widen(l, sync, first, last, end)
	}
	p.unsure("bytes %d to %d move: taken as a number (%s) of %d bytes from byte %d, the %s end first", first, last, l.Type, l.Width, l.Offset, l.Order)
}

// widen takes the moving bytes and the still ones beside them to a width that
// numbers commonly have.
func widen(l *config.Binary, sync, first, last, end int) {
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
}
