package steps

import (
	"fmt"
	"math"
	"strconv"

	"gaugelog/analysis/history"
)

// standardGravity is the conventional value, m/s2 (ISO 80000-4).
const standardGravity = 9.80665

// apart is how near marks must follow one another to be one change.
const apart = 20 * second

// change is one marked change of load.
type change struct {
	first, last int64     // instants of its first and last mark
	newton      []float64 // loads after it, by load of the rig
	kilogram    map[string]float64
	set         []bool    // loads its marks name
	delta       []float64 // as marked
	name        string
}

func (c change) mark() int64 { return c.first }

// total returns the sum of the changes, N.
func total(x []float64) float64 {
	s := 0.0
	for _, v := range x {
		s += v
	}
	return s
}

// readMarks groups the load marks into changes and returns what hung before
// the first reading.
func (r *run) readMarks() (start change) {
	n := len(r.h.Rig.Loads)
	start = change{newton: make([]float64, n), kilogram: map[string]float64{}, delta: make([]float64, n)}
	state := start
	var open *change
	closeOpen := func() {
		if open == nil {
			return
		}
		open.delta = make([]float64, n)
		moved := false
		for i := range open.newton {
			open.delta[i] = open.newton[i] - state.newton[i]
			moved = moved || math.Abs(open.delta[i]) > 1e-9
		}
		if moved {
			if open.first <= r.h.First {
				start = *open
			} else {
				r.changes = append(r.changes, *open)
			}
			state = *open
		}
		open = nil
	}
	for _, m := range r.h.Marks {
		if m.Kind != "load" {
			continue
		}
		i := r.load(m.Load)
		if i < 0 {
			r.warn("unknown-load", -1, m.Time, fmt.Sprintf("a mark sets load %q, which the rig file does not name; it was left out", m.Load))
			continue
		}
		if open != nil && m.Time-open.last > apart {
			closeOpen()
		}
		if open == nil {
			open = &change{first: m.Time, newton: append([]float64(nil), state.newton...), set: make([]bool, n), kilogram: cloneMap(state.kilogram)}
		}
		open.last = m.Time
		if v := r.newton(i, m); open.set[i] && math.Abs(v-open.newton[i]) > 1e-9 {
			r.warn("contradictory-marks", -1, m.Time, fmt.Sprintf("load %s was marked as %.5g\u202fN and as %.5g\u202fN within %d s; the later mark counts: withdraw the wrong one", m.Load, open.newton[i], v, apart/second))
		}
		open.newton[i] = r.newton(i, m)
		open.set[i] = true
		if m.Kilogram != nil {
			open.kilogram[m.Load] = *m.Kilogram
		} else {
			delete(open.kilogram, m.Load)
		}
		if m.Step != "" {
			open.name = m.Step
		}
	}
	closeOpen()
	r.nameChanges()
	return start
}

func cloneMap(m map[string]float64) map[string]float64 {
	c := make(map[string]float64, len(m))
	for k, v := range m {
		c[k] = v
	}
	return c
}

func (r *run) load(name string) int {
	for i, l := range r.h.Rig.Loads {
		if l.Name == name {
			return i
		}
	}
	return -1
}

// newton returns the force a mark puts on the beam: mass by gravity, the
// load's lever, and its tare where it is not zero.
func (r *run) newton(i int, m history.Mark) float64 {
	l := r.h.Rig.Loads[i]
	lever := 1.0
	if l.Lever != nil {
		lever = l.Lever.Value
	}
	tare := 0.0
	if l.Tare != nil {
		tare = l.Tare.Value
	}
	f := m.Newton
	if m.Kilogram != nil {
		f = *m.Kilogram * r.opt.Gravity
	}
	if f != 0 {
		f += tare * r.opt.Gravity
	}
	return f * lever
}

// nameChanges gives a name to each change whose marks gave none: that of a
// step mark beside it, else the plan's in the same place, else its number.
func (r *run) nameChanges() {
	used := map[string]bool{}
	for i := range r.changes {
		c := &r.changes[i]
		for _, m := range r.h.Marks {
			if c.name == "" && m.Kind == "step" && m.Time >= c.first-apart && m.Time <= c.last+apart {
				c.name = m.Step
			}
		}
		if c.name == "" {
			c.name = r.planName(i + 1)
		}
		for used[c.name] {
			c.name += "-again"
		}
		used[c.name] = true
	}
}

// planName is the plan's name for the i-th step, the zero step being 0.
func (r *run) planName(i int) string {
	plan := r.h.Rig.Plan
	if len(plan) > 0 && len(plan[0].Set) > 0 {
		i-- // the plan has no zero step
	}
	if i >= 0 && i < len(plan) && plan[i].Step != "" {
		return plan[i].Step
	}
	if i <= 0 {
		return "zero"
	}
	return "step-" + strconv.Itoa(i)
}

func (r *run) warn(code string, gauge int, t int64, text string) {
	r.out.Warnings = append(r.out.Warnings, Warning{Code: code, Gauge: gauge, Time: t, Text: text})
}
