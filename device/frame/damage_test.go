package frame_test

import "math/rand/v2"

// damager changes bytes in the ways a line, a driver or an enemy does. It
// reuses its buffers.
type damager struct {
	r      *rand.Rand
	stray  [][]byte // frames of other kinds, to be mixed in
	buf    []byte
	second []byte
}

func (d *damager) byte() byte { return byte(d.r.Uint32()) }

// cut removes p[i:j].
func cut(p []byte, i, j int) []byte { return append(p[:i], p[j:]...) }

// put inserts q at i; q must not lie in p.
func (d *damager) put(p []byte, i int, q []byte) []byte {
	d.second = append(d.second[:0], p[i:]...)
	return append(append(p[:i], q...), d.second...)
}

// span draws a stretch of p, at most 8 bytes long.
func (d *damager) span(p []byte) (i, j int) {
	i = d.r.IntN(len(p))
	return i, min(len(p), i+1+d.r.IntN(8))
}

// once does one fault of a single byte or a single cut; it says whether the
// length stayed (a flipped bit).
func (d *damager) once(p []byte) (out []byte, flipped bool) {
	i := d.r.IntN(len(p))
	switch d.r.IntN(4) {
	case 0:
		p[i] ^= 1 << d.r.IntN(8)
		return p, true
	case 1:
		return cut(p, i, i+1), false
	case 2:
		return d.put(p, i, []byte{d.byte()}), false
	}
	return p[:i], false
}

// wild does anything.
func (d *damager) wild(p []byte, other []byte) []byte {
	if len(p) == 0 {
		return append(p, other...)
	}
	i, j := d.span(p)
	switch d.r.IntN(14) {
	case 0:
		p[i] ^= 1 << d.r.IntN(8)
	case 1:
		p[i] = d.byte()
	case 2:
		return cut(p, i, j)
	case 3:
		return d.put(p, i, []byte{d.byte()})
	case 4:
		return d.put(p, i, []byte{p[d.r.IntN(len(p))]})
	case 5:
		return p[:i]
	case 6:
		return cut(p, 0, i)
	case 7: // a stretch sent twice
		return d.put(p, j, append([]byte(nil), p[i:j]...))
	case 8: // the head of one, the tail of another
		return append(p[:i], other[d.r.IntN(len(other)):]...)
	case 9:
		for ; i < j; i++ {
			p[i] = d.byte()
		}
	case 10: // a break or a parity error
		for ; i < j; i++ {
			p[i] = 0
		}
	case 11:
		k := d.r.IntN(len(p))
		p[i], p[k] = p[k], p[i]
	case 12: // another instrument in between
		return d.put(p, i, d.stray[d.r.IntN(len(d.stray))])
	case 13: // an eighth bit that should not be there
		for ; i < j; i++ {
			p[i] ^= 0x80
		}
	}
	return p
}
