package steps

// hanging is what hangs on the beam, by load of the rig. A load's value is
// unknown from an unmarked change until its next mark; an estimate may stand
// in for it.
type hanging struct {
	newton           []float64
	known, estimated []bool
}

func newHanging(newton []float64) *hanging {
	h := &hanging{newton: append([]float64(nil), newton...), known: make([]bool, len(newton)), estimated: make([]bool, len(newton))}
	for j := range h.known {
		h.known[j] = true
	}
	return h
}

func (h *hanging) allKnown() bool {
	for _, k := range h.known {
		if !k {
			return false
		}
	}
	return true
}

// disturb takes in a change that nobody marked and returns its estimate by
// load, 0 where there is none.
func (h *hanging) disturb(u *unmarkedStep) []float64 {
	delta := make([]float64, len(h.newton))
	for j := range h.newton {
		if !u.fit.p.moves(j) {
			continue
		}
		// An estimate that rests on no value is none.
		can := u.newton != nil && (h.known[j] || h.estimated[j])
		if can {
			delta[j] = u.newton.MM * u.fit.p.share(j)
			h.newton[j] += delta[j]
		}
		h.known[j], h.estimated[j] = false, can
	}
	return delta
}

// set takes in a marked change and returns its delta by load, and whether all
// of it is known: a load that somebody changed in the meantime has none.
func (h *hanging) set(c change) (delta []float64, known bool) {
	delta, known = make([]float64, len(h.newton)), true
	for j := range h.newton {
		if !c.set[j] {
			continue
		}
		if h.known[j] || h.estimated[j] {
			delta[j] = c.newton[j] - h.newton[j]
		}
		known = known && h.known[j]
		h.newton[j], h.known[j], h.estimated[j] = c.newton[j], true, false
	}
	return delta, known
}
