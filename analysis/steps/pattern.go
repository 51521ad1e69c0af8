package steps

import (
	"math"
)

// pattern is how a cause shows in the gauges, per unit of it.
type pattern struct {
	kind    Kind
	which   string // load, support or stand
	load    int    // index of the load, -1 otherwise
	v       []float64
	learned bool // seen in this run, so known better than foretold
	loose   bool // learned, but by how many newtons nobody knows
	newton  float64
	// shares is what part of the change each load took (rig's order), adding up
	// to 1; nil for the one load, or where nobody can tell.
	shares []float64
}

// moves says that the cause may have changed load j.
func (p *pattern) moves(j int) bool {
	switch {
	case p.shares != nil:
		return p.shares[j] != 0
	case p.load >= 0:
		return p.load == j
	}
	return true
}

// share is the part of the change that load j took.
func (p *pattern) share(j int) float64 {
	switch {
	case p.shares != nil:
		return p.shares[j]
	case p.load == j:
		return 1
	}
	return 0
}

// patterns lists the causes that move several gauges in known proportions.
func (r *run) patterns() []pattern {
	var out []pattern
	for j := range r.h.Rig.Loads {
		if r.opt.Influence != nil {
			out = append(out, r.foretold(j))
		}
	}
	out = append(out, r.learned()...)
	if len(r.h.Rig.Supports) == 2 {
		for s, sup := range r.h.Rig.Supports {
			out = append(out, pattern{kind: SupportShift, which: sup.Name, load: -1, v: r.supportPattern(s)})
		}
	}
	return out
}

// foretold is the pattern of load j by the influence that was given.
func (r *run) foretold(j int) pattern {
	v := make([]float64, len(r.gauges))
	for g := range v {
		v[g] = r.opt.Influence[g][j]
	}
	return pattern{kind: LoadChanged, which: r.h.Rig.Loads[j].Name, load: j, v: v, newton: 1}
}

// learned returns the patterns of the marked changes of load that were found.
func (r *run) learned() []pattern {
	var out []pattern
	for i, c := range r.changes {
		e := r.matchOf(i)
		if e == nil {
			continue
		}
		p := pattern{kind: LoadChanged, load: -1, learned: true, v: make([]float64, len(r.gauges)), newton: total(c.delta)}
		moved := 0
		for j, d := range c.delta {
			if d != 0 {
				moved++
				p.load, p.which = j, r.h.Rig.Loads[j].Name
			}
		}
		if moved != 1 {
			p.load, p.which = -1, c.name
			if p.newton != 0 {
				p.shares = make([]float64, len(c.delta))
				for j, d := range c.delta {
					p.shares[j] = d / p.newton
				}
			}
		}
		if p.newton == 0 {
			continue
		}
		for g := range p.v {
			p.v[g] = e.jump[g].MM / p.newton
		}
		p.newton = 1
		p.loose = r.inDoubt(i)
		out = append(out, p)
	}
	return out
}

// supportPattern is the shape of the beam when one of two supports goes down
// by 1 mm: a straight line, also over the overhangs.
func (r *run) supportPattern(s int) []float64 {
	sup := r.h.Rig.Supports
	this, other := sup[s].At.Value, sup[1-s].At.Value
	v := make([]float64, len(r.gauges))
	for g := range v {
		cfg := r.gauges[g].cfg
		shape := func(x float64) float64 { return (x - other) / (this - other) }
		switch {
		case cfg.Sees == "reference":
		case cfg.Sees == "seat":
			if r.supportUnder(g) == s {
				v[g] = 1
			}
		case len(cfg.Bar) == 2:
			// A straight movement is nothing to a gauge carried by the beam.
		default:
			v[g] = shape(cfg.At.Value)
		}
	}
	return v
}

// fitted is how well a pattern tells a cluster.
type fitted struct {
	p     pattern
	a, ua float64 // amount and its standard uncertainty
	worst float64 // greatest misfit in units of what is tolerable: below 1 fits
}

// fit holds a pattern against the jumps of the gauges that have readings on
// both sides. What is tolerable is four standard uncertainties and a share of
// the expected jump, the pattern itself being known only so well.
func (r *run) fit(c *cluster, p pattern) (fitted, bool) {
	share := 0.12
	if p.learned {
		share = 0.06
	}
	if p.kind != LoadChanged {
		share = 0.05
	}
	num, den := 0.0, 0.0
	for g := range p.v {
		if !c.known[g] {
			continue
		}
		u := r.jumpU(c, g)
		num += p.v[g] * c.jump[g].MM / sq(u)
		den += sq(p.v[g] / u)
	}
	if den == 0 {
		return fitted{}, false
	}
	f := fitted{p: p, a: num / den, ua: 1 / math.Sqrt(den)}
	// The amount is better taken without favouring the finest gauge.
	num, den = 0, 0
	for g := range p.v {
		if c.known[g] {
			w := 1 / (sq(r.jumpU(c, g)) + sq(share*f.a*p.v[g]))
			num += w * p.v[g] * c.jump[g].MM
			den += w * sq(p.v[g])
		}
	}
	f.a, f.ua = num/den, 1/math.Sqrt(den)
	most := 0.0
	for g := range p.v {
		most = max(most, math.Abs(f.a*p.v[g]))
	}
	for g := range p.v {
		if !c.known[g] {
			continue
		}
		tol := 4*r.jumpU(c, g) + share*math.Abs(f.a*p.v[g]) + 0.01*most
		if !r.seesBeam(g) && p.kind == LoadChanged {
			// Supports yield by an amount nobody stated.
			if r.gauges[g].cfg.Sees == "seat" {
				tol += 0.1 * most
			}
		}
		f.worst = max(f.worst, math.Abs(c.jump[g].MM-f.a*p.v[g])/tol)
	}
	return f, true
}

// jumpU is the uncertainty of a jump, at least half a count.
func (r *run) jumpU(c *cluster, g int) float64 {
	return max(c.jump[g].U, r.gauges[g].res/2)
}

// movedGauges lists the gauges that moved beyond doubt.
func (c *cluster) movedGauges() []int {
	var out []int
	for g, m := range c.moved {
		if m {
			out = append(out, g)
		}
	}
	return out
}

// peakGauges lists the gauges with an excursion though no lasting change.
func (r *run) peakGauges(c *cluster) []int {
	var out []int
	for g := range c.peak {
		gg := &r.gauges[g]
		if c.known[g] && math.Abs(c.peak[g]) > max(6*gg.noise, 2.5*gg.res) {
			out = append(out, g)
		}
	}
	return out
}

// alike is the cosine between a cluster's jumps and an expected pattern: 1 is
// the same proportions, -1 the reverse.
func (r *run) alike(c *cluster, v []float64) float64 {
	ab, aa, bb := 0.0, 0.0, 0.0
	for g := range v {
		if !c.known[g] {
			continue
		}
		x := c.jump[g].MM
		ab += x * v[g]
		aa += sq(x)
		bb += sq(v[g])
	}
	if aa == 0 || bb == 0 {
		return 0
	}
	return ab / math.Sqrt(aa*bb)
}
