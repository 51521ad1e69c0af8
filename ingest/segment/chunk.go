package segment

import (
	"bytes"
	"hash/crc32"
)

const (
	// chunkSize is about how much plain text one worker takes at a time: whole
	// blocks, at least this much but for the last. With twice as much the text
	// falls out of a core's cache between being read and being decoded; with half,
	// handing over and cutting bins in two costs more.
	chunkSize = 512 << 10
	// frameSize is the same of what a compressed frame holds.
	frameSize = 256 << 10
)

// itemKind says what an item is.
type itemKind uint8

const (
	itemHeader itemKind = iota
	itemBlock
	itemLoss // bytes that no valid comment accounts for
	itemLine // a line that is no record
	itemTail // what lies behind the last comment of a file
)

// item is one thing found in a chunk, in order.
type item struct {
	kind       itemKind
	from, to   int // in the chunk's text
	h          header
	c          checkpoint
	whole      bool // block: its CRC is right
	rows, more int  // block: where its rows and others end in the batch
	why        string
}

// nextComment returns the bounds (without the newline) of the first whole line
// of text at or behind p that begins with '#'; p must be the start of a line.
func nextComment(text []byte, p int) (from, to int, ok bool) {
	if p >= len(text) {
		return 0, 0, false
	}
	for {
		i := bytes.IndexByte(text[p:], '#')
		if i < 0 {
			return 0, 0, false
		}
		p += i
		if p == 0 || text[p-1] == '\n' {
			break
		}
		p++
	}
	end := bytes.IndexByte(text[p:], '\n')
	if end < 0 {
		return 0, 0, false
	}
	return p, p + end, true
}

// splitBlocks finds the items of a stretch of own text that begins at the start
// of a file or directly behind a valid comment. What lies behind the last valid
// comment becomes a tail. Each block's CRC is checked against the words of its
// own comment; whether the comments follow each other is the caller's to check.
func splitBlocks(text []byte, items []item) []item {
	done := 0 // everything before is accounted for
	for p := 0; ; {
		from, to, ok := nextComment(text, p)
		if !ok {
			break
		}
		line := text[from:to]
		p = to + 1
		if h, err := parseHeader(line); err == nil {
			items = passOver(items, from, &h)
			items = append(items, item{kind: itemHeader, from: from, to: p, h: h})
			done = p
			continue
		}
		c, ok := parseCheckpoint(line)
		if !ok {
			continue
		}
		start := from - int(c.length)
		if start < done {
			// Bytes were lost inside the block: less lies here than was written.
			items = append(items, item{kind: itemBlock, from: done, to: p, c: c, why: "bytes are missing in it"})
			done = p
			continue
		}
		if start > done {
			items = append(items, item{kind: itemLoss, from: done, to: start, why: "no whole block"})
		}
		whole := crc32.Update(c.after, castagnoli, text[start:from]) == c.crc
		it := item{kind: itemBlock, from: start, to: p, c: c, whole: whole}
		if !whole {
			it.why = "its CRC-32C does not match its bytes"
		}
		items = append(items, it)
		done = p
	}
	if done < len(text) {
		items = append(items, item{kind: itemTail, from: done, to: len(text)})
	}
	return items
}

// passOver takes back what lies in the torn stretch before the header at from:
// a writer that saw its sync fail may have left a whole block there, which
// stands again behind the header. Bytes before that stretch that nothing
// accounts for are a loss. The comment that the header follows always stays.
func passOver(items []item, from int, h *header) []item {
	cut := from - int(min(h.Torn, int64(from)))
	n := len(items)
	for n > 0 && items[n-1].from >= cut && !items[n-1].is(h.after) {
		n--
	}
	items = items[:n]
	end := 0
	if n > 0 {
		if last := &items[n-1]; last.kind == itemLoss {
			last.to = min(last.to, cut)
		}
		end = items[n-1].to
	}
	if end < cut {
		items = append(items, item{kind: itemLoss, from: end, to: cut, why: "no whole block"})
	}
	return items
}

// is tells whether the item is the comment of that self.
func (it *item) is(self uint32) bool {
	return it.kind == itemHeader && it.h.self == self || it.kind == itemBlock && it.c.self == self
}

// lastCut returns the end (behind the newline) of the last valid comment in
// text, 0 where there is none. It looks from the end backward.
func lastCut(text []byte) int {
	limit := len(text)
	for window := 8 << 10; limit > 0; window *= 4 {
		low := max(0, limit-window)
		// A comment that begins before low and ends behind it is found too.
		for at := limit; at > low; {
			i := bytes.LastIndexByte(text[low:at], '#')
			if i < 0 {
				break
			}
			at = low + i
			if at > 0 && text[at-1] != '\n' {
				continue
			}
			end := bytes.IndexByte(text[at:min(len(text), at+maxComment+1)], '\n')
			if end < 0 {
				continue
			}
			line := text[at : at+end]
			if _, ok := parseCheckpoint(line); ok {
				return at + end + 1
			}
			if _, err := parseHeader(line); err == nil {
				return at + end + 1
			}
		}
		limit = low
	}
	return 0
}

// own tells whether the start of a file is of this format: it begins with our
// word or holds a valid comment of ours.
func own(start []byte) bool {
	return bytes.HasPrefix(start, []byte(headerWord)) || lastCut(start) > 0
}
