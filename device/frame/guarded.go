package frame

import "fmt"

// place is a checksum's cover and seat in a frame of known length.
type place struct {
	sum      Checksum
	from, to int // bytes covered
	at, size int // where the sum stands; size 0: there is none
}

// placeOf resolves the checksum for a frame of n bytes (without terminator).
// Where At is not given the sum stands last.
func placeOf(c Checksum, n int) (place, error) {
	size, err := c.size()
	if err != nil || size == 0 {
		return place{}, err
	}
	if !c.Binary {
		size *= 2
	}
	at := n - size
	if c.At != nil {
		if at = *c.At; at < 0 {
			at += n
		}
	}
	if at < 0 || at+size > n {
		return place{}, fmt.Errorf("the checksum (%d bytes at %d) does not lie in a frame of %d bytes", size, at, n)
	}
	from, to, ok := c.span(n, at)
	if !ok {
		return place{}, fmt.Errorf("the checksum covers bytes %d to %d of a frame of %d bytes", from, to, n)
	}
	if from < at+size && at < to {
		return place{}, fmt.Errorf("the checksum covers itself: it stands at byte %d and covers %d to %d", at, from, to)
	}
	return place{sum: c, from: from, to: to, at: at, size: size}, nil
}

// holds reports whether the frame's checksum is that of its bytes.
func (p *place) holds(raw []byte) bool {
	sent, ok := p.sum.sent(raw[p.at : p.at+p.size])
	return ok && sent == p.sum.compute(raw[p.from:p.to])
}

// is reports whether byte i belongs to the checksum.
func (p *place) is(i int) bool { return i >= p.at && i < p.at+p.size }

// guardFor chooses what must follow a frame before it counts.
func guardFor(p *place, sync int) guard {
	switch {
	case p.size > 0 && p.sum.Kind == "crc16":
		return proven
	case sync > 0:
		return followed
	case p.size > 0:
		return repeated
	}
	return bracketed
}
