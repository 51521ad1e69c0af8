package analysis

import (
	"math"

	"gaugelog/analysis/beam"
	"gaugelog/analysis/creep"
	"gaugelog/analysis/history"
	"gaugelog/analysis/steps"
	"gaugelog/config"
)

// common is what all readings of the creep step share and scatter cannot
// show: it must be added to what the fit says of the law.
type common struct {
	// gain and load are relative standard uncertainties of the gauge's gain and
	// of the load.
	gain, load float64
	// relief is the share of the creep gauge's sag that the plungers' springs
	// take off. It grows as the beam creeps, which the law reads as a slightly
	// lesser creep: no exponent is known better than to this share of itself.
	relief float64
}

// commonOf works these out for the creep task.
func commonOf(h *history.History, f *steps.Findings, t *creepTask, own instrument, gravity, ei, s float64) (common, error) {
	c := common{gain: own.uGain(t.gauge)}
	var total, variance float64
	for _, l := range stepLoads(h, f.Steps[t.step], gravity) {
		total += l.N
		variance += l.U * l.U
	}
	if total != 0 {
		c.load = math.Sqrt(variance) / math.Abs(total)
	}
	var err error
	c.relief, err = relief(h.Rig, f.Steps[t.step].Loads, t.gauge, ei, s)
	return c, err
}

// relief compares the sag at a gauge with and without the plungers' springs.
func relief(rig *config.Rig, loads map[string]float64, gauge int, ei, s float64) (float64, error) {
	with := beamOf(rig, ei, s, true)
	without := with
	without.Springs = nil
	units := unitLoads(rig)
	for i := range units {
		units[i].Force = loads[rig.Loads[i].Name]
	}
	var seenBy [2]float64
	for i, b := range []beam.Beam{with, without} {
		sol, err := b.Solve(units)
		if err != nil {
			return 0, err
		}
		seenBy[i] = seen(rig.Gauges[gauge], sol, b)
	}
	if seenBy[1] == 0 {
		return 0, nil
	}
	return math.Abs(1 - seenBy[0]/seenBy[1]), nil
}

// parameter adds the common part to a parameter of the law: sags per newton
// take gain and load in, exponents and times the plungers' relief.
func (c common) parameter(p creep.Parameter) Q {
	rel := c.relief
	if p.Unit != "1" && p.Unit != "h" {
		rel = math.Hypot(rel, math.Hypot(c.gain, c.load))
	}
	return quantity(p.Value, math.Hypot(p.U, rel*p.Value), p.Unit)
}

// sagRate adds the common part to a rate of sag: the load cancels, for it is
// the rate of this beam under this load.
func (c common) sagRate(q *Q) *Q {
	if q == nil {
		return nil
	}
	u := math.Hypot(c.gain, c.relief) * math.Abs(q.Value)
	if q.U != nil {
		u = math.Hypot(u, *q.U)
	}
	if u > 0 {
		q.U = &u
	}
	return q
}
