package guess

import (
	"bytes"
	"regexp"
	"time"
)

// piece is one stretch of bytes that may be a frame.
type piece struct {
	at   time.Duration // arrival of its first byte
	body []byte
}

// pieces splits a capture at the terminator that its control characters show.
// end and start are the control bytes around every piece. The first piece may
// have lost its beginning and is left out where it is shorter than all others
// and came unasked; an unfinished last piece is left out.
func pieces(c Capture) (list []piece, start, end []byte) {
	all := c.Bytes()
	last := terminator(all)
	if last < 0 {
		return nil, nil, nil
	}
	from := 0
	for i, b := range all {
		if b == byte(last) {
			list = append(list, piece{arrival(c, from), all[from : i+1]})
			from = i + 1
		}
	}
	end = commonSuffix(list)
	for i := range list {
		list[i].body = bytes.TrimSuffix(list[i].body, end)
	}
	start = commonPrefix(list)
	for i := range list {
		list[i].body = bytes.TrimPrefix(list[i].body, start)
	}
	if len(c.Request) == 0 && len(list) > 2 && len(list[0].body) < shortest(list[1:]) {
		list = list[1:]
	}
	return list, start, end
}

func shortest(list []piece) int {
	n := len(list[0].body)
	for _, p := range list {
		n = min(n, len(p.body))
	}
	return n
}

// terminator finds the control character that closes the frames: a line feed
// before a carriage return before any other (common practice), -1 for none.
func terminator(p []byte) int {
	var count [32]int
	for _, b := range p {
		if b < 32 {
			count[b]++
		}
	}
	for _, b := range []int{'\n', '\r', 3, 4} {
		if count[b] > 0 {
			return b
		}
	}
	return -1
}

// commonSuffix is the run of control characters that ends every piece but
// perhaps the first.
func commonSuffix(list []piece) []byte {
	if len(list) == 0 {
		return nil
	}
	model := list[len(list)-1].body
	n := 0
	for n < len(model) && n < 3 && model[len(model)-1-n] < 32 {
		n++
	}
	for ; n > 1; n-- {
		whole := true
		for i, p := range list {
			if i > 0 && !bytes.HasSuffix(p.body, model[len(model)-n:]) {
				whole = false
			}
		}
		if whole {
			break
		}
	}
	return model[len(model)-n:]
}

// commonPrefix is the control character that begins every piece but perhaps
// the first.
func commonPrefix(list []piece) []byte {
	if len(list) == 0 {
		return nil
	}
	model := list[len(list)-1].body
	if len(model) == 0 || model[0] >= 32 {
		return nil
	}
	for i, p := range list {
		if i > 0 && !bytes.HasPrefix(p.body, model[:1]) {
			return nil
		}
	}
	return model[:1]
}

// arrival is when byte number n of a capture came.
func arrival(c Capture, n int) time.Duration {
	for _, k := range c.Chunks {
		if n < len(k.Bytes) {
			return k.At
		}
		n -= len(k.Bytes)
	}
	return 0
}

// bursts splits a capture at its pauses: stretches of bytes with silence
// around them, which is how frames without terminator come.
func bursts(c Capture) []piece {
	var longest time.Duration
	for i := 1; i < len(c.Chunks); i++ {
		longest = max(longest, c.Chunks[i].At-c.Chunks[i-1].At)
	}
	pause := max(longest/4, 10*time.Millisecond)
	var out []piece
	for i, k := range c.Chunks {
		if i == 0 || k.At-c.Chunks[i-1].At > pause {
			out = append(out, piece{at: k.At})
		}
		b := &out[len(out)-1]
		b.body = append(b.body, k.Bytes...)
	}
	return out
}

var numeral = regexp.MustCompile(`([ +-]*)(\d*)([.,])(\d+)`)

var whole = regexp.MustCompile(`([ +-]*)(\d+)()()`)
