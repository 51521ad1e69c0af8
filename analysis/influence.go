package analysis

import (
	"math"

	"gaugelog/analysis/beam"
	"gaugelog/analysis/stiffness"
	"gaugelog/config"
)

// beamOf is the rig's beam with its plungers as springs. Supports are rigid
// where net is true: a net sag has their movement taken off already.
func beamOf(rig *config.Rig, ei, s float64, net bool) beam.Beam {
	b := beam.Beam{From: rig.Specimen.From.Value, Length: rig.Specimen.Length.Value, EI: ei, S: s}
	for _, p := range rig.Supports {
		sup := beam.Support{Name: p.Name, At: p.At.Value, Clamp: p.Kind == "clamp"}
		if p.Compliance != nil && !net {
			sup.Compliance = p.Compliance.Value
		}
		b.Supports = append(b.Supports, sup)
	}
	for _, g := range rig.Gauges {
		if touches(g) && g.Contact != nil && g.Contact.Stiffness != nil {
			b.Springs = append(b.Springs, beam.Spring{Name: g.Name, At: g.At.Value, Stiffness: g.Contact.Stiffness.Value})
		}
	}
	return b
}

// touches reports whether a gauge's plunger rests on the beam.
func touches(g config.Gauge) bool { return g.Sees == "" || g.Sees == "beam" }

// unitLoads is one newton of each load at its place.
func unitLoads(rig *config.Rig) []beam.Load {
	var out []beam.Load
	for _, l := range rig.Loads {
		switch {
		case l.At != nil:
			out = append(out, beam.Point(l.At.Value, 1))
		case l.From != nil && l.To != nil:
			out = append(out, beam.Spread(l.From.Value, l.To.Value, 1))
		}
	}
	return out
}

// nominal is the bending and shear stiffness to judge proportions by before
// anything was fitted: the expected modulus, or 10 000 MPa, which cancels.
func nominal(rig *config.Rig) (ei, s float64, err error) {
	sec, err := stiffness.SectionOf(rig.Specimen.Section)
	if err != nil {
		return 0, 0, err
	}
	e := 10000.0
	if m := rig.Specimen.Expect.Modulus; m != nil && m.Value > 0 {
		e = m.Value
	}
	s = math.Inf(1)
	if area := sec.ShearFactor * sec.Area.Value; area > 0 {
		ratio := map[string]float64{"timber": 16, "plastic": 2.6, "metal": 2.6}[rig.Specimen.Material]
		if g := rig.Specimen.Expect.ShearModulus; g != nil && g.Value > 0 {
			s = area * g.Value
		} else if ratio > 0 {
			s = area * e / ratio
		}
	}
	return e * sec.SecondMoment.Value, s, nil
}

// influence is the sag at each gauge (rows) per newton of each load, mm/N.
// Rows of seat gauges hold the support's own yielding, those of gauges on a
// bar the difference to its feet, those of reference gauges nothing.
func influence(rig *config.Rig, ei, s float64, net bool) ([][]float64, error) {
	b := beamOf(rig, ei, s, net)
	out := make([][]float64, len(rig.Gauges))
	for i := range out {
		out[i] = make([]float64, len(rig.Loads))
	}
	for j, l := range unitLoads(rig) {
		sol, err := b.Solve([]beam.Load{l})
		if err != nil {
			return nil, err
		}
		for i, g := range rig.Gauges {
			out[i][j] = seen(g, sol, b)
		}
	}
	return out, nil
}

// seen is what one gauge sees of an elastic line.
func seen(g config.Gauge, sol *beam.Solution, b beam.Beam) float64 {
	switch {
	case g.Sees == "reference":
		return 0
	case g.Sees == "seat":
		for i, s := range b.Supports {
			if s.At == g.At.Value {
				return s.Compliance * sol.Reactions()[i].Force
			}
		}
		return 0
	case len(g.Bar) == 2:
		lo, hi := g.Bar[0].Value, g.Bar[1].Value
		f := (g.At.Value - lo) / (hi - lo)
		return sol.Deflection(g.At.Value) - (1-f)*sol.Deflection(lo) - f*sol.Deflection(hi)
	}
	return sol.Deflection(g.At.Value)
}
