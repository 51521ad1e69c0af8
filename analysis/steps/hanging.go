package steps

import "math"

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
		// A change without an estimate may have been one of several loads.
		if u.newton != nil && !u.fit.p.moves(j) {
			continue
		}
		// An estimate that rests on no value is none.
		can := u.newton != nil && (h.known[j] || h.estimated[j])
		if can {
			delta[j] = u.newton.MM * u.fit.p.share(j)
			h.newton[j] += delta[j]
			if math.Abs(h.newton[j]) < 1e-9*math.Abs(delta[j]) {
				h.newton[j] = 0 // rounding, of a load taken off whole
			}
		}
		h.known[j], h.estimated[j] = false, can
	}
	return delta
}

// gone says in words that an unmarked change is taken for the removal of all
// that hung of its loads; "" where some is left. To be asked after disturb.
func (h *hanging) gone(u *unmarkedStep) string {
	if u.newton == nil || u.newton.MM >= 0 {
		return ""
	}
	for j, n := range h.newton {
		if u.fit.p.moves(j) && (n != 0 || !h.estimated[j]) {
			return ""
		}
	}
	return "; within what the sags can tell it is all that hung there, and is taken for that"
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

// BelowBaseline returns the last step, behind the baseline, in which less of
// any load hung than at the baseline; -1 where there is none. Sags count from
// the loaded beam then, and what came back by that step is no recovery.
func (f *Findings) BelowBaseline() int {
	if f.Baseline >= len(f.Steps) {
		return -1
	}
	for k := len(f.Steps) - 1; k > f.Baseline; k-- {
		for name, n := range f.Steps[f.Baseline].Loads {
			if now, ok := f.Steps[k].Loads[name]; ok && now < n-1e-6 {
				return k
			}
		}
	}
	return -1
}
