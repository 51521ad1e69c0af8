package stiffness

import (
	"fmt"
	"math"
)

// A load that hangs off the beam's middle line turns the beam about its axis,
// and a gauge off that line reads the turn as sag. The rig file states places
// along the beam only, so that this is bounded, not corrected: load and gauges
// are taken to be within offMiddle of the width off the middle (a careful
// hand's marking out), rectangular. Two gauges at one place are taken to stand
// on opposite edges: their mean has no turn in it, and their difference says
// how much of it there is.
const offMiddle = 1.0 / 50

// pair is two gauges on the beam at one place along it.
type pair struct {
	a, b  int
	apart map[int]float64 // by step: b less a, mm
	// d is the sum of the differences, with its variance v by the readings' own
	// errors; sag the sum of the means' sizes. mm and mm2.
	d, v, sag float64
}

// turned reports whether the two differ more than their readings could.
func (p pair) turned() bool {
	return math.Abs(p.d) > unlikely*math.Sqrt(p.v) && math.Abs(p.d) > 0.005*p.sag
}

// pairs lists the gauges that share a place, within a millimetre.
func (m *model) pairs() []pair {
	var out []pair
	read := m.readingCovariance()
	for i := range m.rig.Gauges {
		for j := range i {
			a, b := m.rig.Gauges[j], m.rig.Gauges[i]
			if sees(a) != "beam" || sees(b) != "beam" || len(a.Bar)+len(b.Bar) > 0 || math.Abs(a.At.Value-b.At.Value) > 1 {
				continue
			}
			p := pair{a: j, b: i, apart: map[int]float64{}}
			for q, o := range m.rows {
				for r, s := range m.rows {
					if s.gauge == i && o.gauge == j && s.step == o.step {
						p.apart[o.step] = s.mm - o.mm
						p.d += s.mm - o.mm
						p.sag += math.Abs(s.mm+o.mm) / 2
						p.v += read.At(q, q) + read.At(r, r)
					}
				}
			}
			if len(p.apart) > 0 {
				out = append(out, p)
			}
		}
	}
	return out
}

// twistCauses are what turning does: a share of all sags that gauges on the
// beam read, and for two gauges that turning sets apart, half their difference
// in each step, one up and one down, so that their mean alone counts.
func (m *model) twistCauses(in *Input) []cause {
	var out []cause
	pairs := m.pairs()
	share, source := m.turn(pairs)
	if share > 0 {
		out = append(out, cause{name: "load and gauges off the middle (twist)", kind: "B", unit: "1", u: share, rectangular: true, source: source,
			move: func(s *state, v float64) {
				for g, gauge := range m.rig.Gauges {
					if sees(gauge) == "beam" {
						s.gain[g] += v
					}
				}
			}})
	}
	for _, p := range pairs {
		if !p.turned() {
			continue
		}
		for k := range in.Steps {
			d := math.Abs(p.apart[k])
			if d == 0 {
				continue
			}
			name := fmt.Sprintf("twist between %s and %s in step %s", m.rig.Gauges[p.a].Name, m.rig.Gauges[p.b].Name, in.Steps[k].Name)
			out = append(out, cause{name: name, kind: "A", unit: "mm", u: d / 2, source: "half their difference: their mean counts",
				move: func(s *state, v float64) { s.turn(p.a, k, -v); s.turn(p.b, k, v) }})
		}
	}
	return out
}

// turn is the standard uncertainty of all sags on the beam by turning, as a
// share of them, and where it comes from; 0 where nothing bounds it.
//
// From two gauges on opposite edges: their difference d is what a width's
// distance makes of the turn, and so their mean, offMiddle of the width off,
// errs by offMiddle d. Else from the torsion of a beam whose supports keep it
// from turning (Saint-Venant): a force P at e off the middle turns a span L by
// P e L / 4 G J in its middle, which a gauge at y reads as y times that, beside
// a sag of P L^3 / 48 EI: a share of 12 EI e y / (G J L^2). For a cantilever it
// is P e L / G J beside P L^3 / 3 EI: 3 EI e y / (G J L^2).
func (m *model) turn(pairs []pair) (share float64, source string) {
	for _, p := range pairs {
		if p.sag > 0 {
			share = math.Max(share, offMiddle/math.Sqrt(3)*(math.Abs(p.d)+math.Sqrt(p.v))/p.sag)
		}
	}
	if share > 0 {
		return share, "bounded by the difference of the gauges that share a place; their mean within 1/50 of the width off the middle"
	}
	if !(m.sec.Torsion > 0) {
		return 0, ""
	}
	ratio, _ := assumedRatio(m.rig)
	l, of := m.bay(), 12.0
	if len(m.rig.Supports) == 1 {
		l, of = m.reach(), 3
	}
	if !(l > 0) {
		return 0, ""
	}
	u := offMiddle * m.sec.Breadth / math.Sqrt(3) // of e and of y
	return of * ratio * m.sec.SecondMoment.Value / m.sec.Torsion * u * u / (l * l),
		"bounded, not stated: load and gauges each within 1/50 of the width off the middle; two gauges on opposite edges would measure it"
}

// bay is the shortest distance between two supports, mm; 0 for one support.
func (m *model) bay() float64 {
	best := math.Inf(1)
	for i, s := range m.rig.Supports {
		for _, o := range m.rig.Supports[:i] {
			best = math.Min(best, math.Abs(s.At.Value-o.At.Value))
		}
	}
	if math.IsInf(best, 1) {
		return 0
	}
	return best
}

// reach is how far from its only support the beam's farther end lies, mm.
func (m *model) reach() float64 {
	s, from := m.rig.Supports[0].At.Value, m.rig.Specimen.From.Value
	return math.Max(from+m.rig.Specimen.Length.Value-s, s-from)
}

// twist tells of gauges at one place that differ, and of a section whose
// torsion nobody can work out.
func (e *Estimate) twist() {
	m := e.fit.m
	pairs := m.pairs()
	for _, p := range pairs {
		if p.turned() {
			a, b := m.rig.Gauges[p.a].Name, m.rig.Gauges[p.b].Name
			e.warn("twist", b, "gauges %s and %s at one place differ by %.3f\u202fmm over the steps: the beam twists or the load hangs off its middle; their mean counts", a, b, p.d)
		}
	}
	if share, _ := m.turn(pairs); share == 0 {
		e.warn("twist-not-bounded", "", "what a load off the beam's middle line does is left out: the section's shape does not tell its torsion; two gauges on opposite edges at one place would measure it")
	}
}
