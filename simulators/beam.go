package simulators

import (
	"math"

	"gaugelog/simulators/creep"
	"gaugelog/simulators/statics"
)

// spring is a plunger's spring on the beam.
type spring struct{ at, stiffness, friction float64 }

// view is a displacement somebody looks at: a weighted sum of the beam's
// displacements at places, or a support's seat.
type view struct {
	terms []viewTerm
	seat  int // index of a support; -1 for terms
	// net leaves out whatever the supports do.
	net bool
}

type viewTerm struct{ at, weight float64 }

// beam is the specimen on its supports: what a newton does where.
type beam struct {
	layout         *statics.Layout
	bending, shear float64 // N mm2, N (may be infinite)
	law            creep.Law
	compliance     []float64 // mm/N, elastic only, which a seat follows
	crushing       []float64 // mm/N, creeping with the beam
}

// effect is what one newton of load does to a view: creeping is multiplied by
// the creep law, rigid is not (mm/N).
func (b *beam) effect(v view, load statics.Load) (creeping, rigid float64) {
	if v.seat >= 0 {
		return 0, b.compliance[v.seat] * b.layout.Reactions(load)[v.seat]
	}
	for _, t := range v.terms {
		bend, shear := b.layout.Sag(t.at, load)
		creeping += t.weight * (bend/b.bending + shear/b.shear)
		if !v.net {
			creeping += t.weight * b.layout.Settle(t.at, load, b.crushing)
			rigid += t.weight * b.layout.Settle(t.at, load, b.compliance)
		}
	}
	return creeping, rigid
}

// shifted is what the supports' own movements until t do to a view, in mm.
func (b *beam) shifted(v view, shifts []shift, t float64) float64 {
	sum := 0.0
	for _, s := range shifts {
		by := s.by * rampShare(t, s.from, s.to)
		if by == 0 || v.net {
			continue
		}
		if v.seat >= 0 {
			if v.seat == s.support {
				sum += by
			}
			continue
		}
		for _, term := range v.terms {
			sum += term.weight * b.layout.Follow(term.at)[s.support] * by
		}
	}
	return sum
}

// frictions are the plungers' friction forces: against the movement from the
// first change of load on, turning when a change moves the place the other way.
func (b *beam) frictions(loads []*pusher, springs []spring, moments []float64) []*pusher {
	var out []*pusher
	for _, s := range springs {
		if s.friction == 0 {
			continue
		}
		p := &pusher{where: statics.Load{From: s.at, To: s.at}}
		now := 0.0
		for _, t := range moments {
			moved, until := 0.0, t
			for _, l := range loads {
				for _, c := range l.changes {
					if c.from == t {
						creeping, rigid := b.effect(view{terms: []viewTerm{{s.at, 1}}, seat: -1}, l.where)
						moved += (creeping + rigid) * c.by
						until = math.Max(until, c.to)
					}
				}
			}
			if want := -math.Copysign(s.friction, moved); math.Abs(moved) > 1e-9 && want != now {
				p.changes = append(p.changes, change{from: t, to: until, by: want - now})
				now = want
			}
		}
		out = append(out, p)
	}
	return out
}

// spread is the creeping force of a pusher at t: its history with every change
// multiplied by the law of the time since.
func (b *beam) spread(p *pusher, t float64) float64 {
	sum := 0.0
	for _, c := range p.changes {
		sum += c.by * b.law.Ramp(t, c.from, c.to)
	}
	return sum
}
