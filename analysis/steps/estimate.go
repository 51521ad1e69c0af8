package steps

import (
	"fmt"
	"math"
	"strings"

	"gaugelog/analysis/lsq"
)

// scaleU is the relative uncertainty of a load estimated from sags: what
// proportions, creep within the jump and support movement leave open.
const scaleU = 0.02

// rest is the greatest share of a load that may seem to be left where it was
// taken off whole.
const rest = 0.05

// newtons turns a fitted amount into a force; nil where the run holds no
// marked change that tells the scale. What takes a load off to within a
// twentieth and the estimate's 95 % took it off whole.
func (r *run) newtons(e *cluster, f fitted) *Value {
	k := r.kappa
	switch {
	case f.p.loose && f.p.load >= 0:
		var ok bool
		if f, k, ok = r.rescaled(e, f.p.load); !ok {
			return nil
		}
	case f.p.loose:
		return nil
	case f.p.learned:
		k = 1
	}
	if k == 0 {
		return nil
	}
	n := f.a / k
	v := Value{n, hypot(f.ua/k, scaleU*n)}
	if whole, ok := r.wholeOf(e, &f.p); ok && whole > 0 && math.Abs(v.MM+whole) <= min(2*v.U, rest*whole) {
		v.MM = -whole
	}
	return &v
}

// rescaled fits a pattern of load j whose scale is known to a cluster: one
// learned from an undoubted change, else the one foretold.
func (r *run) rescaled(e *cluster, j int) (f fitted, k float64, ok bool) {
	for _, p := range r.learned() {
		if p.load == j && !p.loose {
			if f, ok = r.fit(e, p); ok {
				return f, 1, true
			}
		}
	}
	if r.opt.Influence == nil || r.kappa == 0 {
		return f, 0, false
	}
	f, ok = r.fit(e, r.foretold(j))
	return f, r.kappa, ok
}

// wholeOf is what hung before a cluster of the loads that a pattern moves, N;
// only where the pattern has the very proportions of what hung.
func (r *run) wholeOf(e *cluster, p *pattern) (float64, bool) {
	hung := r.hangingBefore(e.lo)
	sum := 0.0
	for j, n := range hung.newton {
		if p.moves(j) {
			sum += n
			if !hung.known[j] {
				return 0, false
			}
		}
	}
	for j, n := range hung.newton {
		if p.moves(j) && math.Abs(n-sum*p.share(j)) > 1e-6*math.Abs(sum) {
			return 0, false
		}
	}
	return sum, true
}

// together is the pattern of all that hung before a cluster, where that is
// more than one load: they are often taken off at once.
func (r *run) together(e *cluster) []pattern {
	hung := r.hangingBefore(e.lo)
	sum := total(hung.newton)
	if sum <= 0 || !hung.allKnown() {
		return nil
	}
	p := pattern{kind: LoadChanged, load: -1, v: make([]float64, len(r.gauges)), newton: 1, shares: make([]float64, len(hung.newton))}
	var names []string
	for j, n := range hung.newton {
		if p.shares[j] = n / sum; n != 0 {
			names = append(names, r.h.Rig.Loads[j].Name)
		}
	}
	if len(names) < 2 {
		return nil
	}
	p.which = strings.Join(names, " + ")
	if r.opt.Influence != nil {
		for g := range p.v {
			for j, s := range p.shares {
				p.v[g] += s * r.opt.Influence[g][j]
			}
		}
		return []pattern{p}
	}
	return r.added(e, p, sum)
}

// added fills a pattern with what the gauges did at all changes before a
// cluster, where each of them answered and is beyond doubt.
func (r *run) added(e *cluster, p pattern, sum float64) []pattern {
	if total(r.before.newton) != 0 {
		return nil
	}
	p.learned = true
	for i, c := range r.changes {
		if c.first >= e.lo {
			break
		}
		m := r.matchOf(i)
		if m == nil || r.inDoubt(i) {
			return nil
		}
		for g := range p.v {
			p.v[g] += m.jump[g].MM / sum
		}
	}
	return []pattern{p}
}

// influenceScale is by how much the given influence must be multiplied to
// give the sags seen at the marked changes; 0 where unknown.
func (r *run) influenceScale() float64 {
	if r.opt.Influence == nil {
		return 0
	}
	var k []float64
	for i, c := range r.changes {
		e := r.matchOf(i)
		if e == nil || r.inDoubt(i) {
			continue
		}
		num, den := 0.0, 0.0
		for g, v := range r.expected(c) {
			if e.known[g] {
				num += v * e.jump[g].MM
				den += v * v
			}
		}
		if den > 0 {
			k = append(k, num/den)
		}
	}
	return lsq.Median(k)
}

// shareOut improves the estimates of unmarked changes of a load by its next
// mark: together they changed the load by what the marks say, each in
// proportion to its sags. No influence and no other step is needed for that.
func (r *run) shareOut() {
	open := map[int][]*unmarkedStep{}
	for _, v := range r.loadEvents(r.unmarked) {
		if u := v.unmarked; u != nil {
			for j := range r.h.Rig.Loads {
				if u.fit.p.load == j && u.fit.p.shares == nil {
					open[j] = append(open[j], u)
				} else if u.newton == nil || u.fit.p.moves(j) {
					open[j] = append(open[j], nil) // not of this load alone
				}
			}
			continue
		}
		c := r.changes[v.change]
		moved := -1
		for j, d := range c.delta {
			switch {
			case d == 0:
			case moved < 0:
				moved = j
			default:
				moved = len(c.delta) // several loads: nobody knows which did what
			}
		}
		if moved >= 0 && moved < len(c.delta) && len(open[moved]) > 0 {
			r.divide(c.delta[moved], open[moved], r.matchOf(v.change))
		}
		for j, set := range c.set {
			if set {
				delete(open, j)
			}
		}
	}
}

// shareU is the relative uncertainty of a share: the pattern's own error is
// common to all parts and falls out, the creep within the jumps does not.
const shareU = 0.01

// divide shares a marked total among unmarked changes and the one that closes
// them, N.
func (r *run) divide(sum float64, list []*unmarkedStep, closing *cluster) {
	if closing == nil || list[0] == nil {
		return
	}
	p := list[0].fit.p
	if f, ok := r.fit(closing, p); !ok || f.worst >= 1 {
		return
	}
	whole := r.along(closing, p.v)
	parts := make([]Value, len(list))
	for i, u := range list {
		if u == nil {
			return
		}
		parts[i] = r.along(u.event, p.v)
		whole = Value{whole.MM + parts[i].MM, hypot(whole.U, parts[i].U)}
	}
	if math.Abs(whole.MM) < 10*whole.U {
		return // what went on and came off again tells no scale
	}
	for i, u := range list {
		part := parts[i].MM / whole.MM
		n := Value{sum * part, math.Abs(sum) * hypot(parts[i].U/whole.MM, whole.U/whole.MM*part, shareU*part)}
		u.newton = &n
		r.out.Disturbances[u.told].Load = &n
	}
}

// along is how much of a pattern a cluster's jumps hold.
func (r *run) along(c *cluster, v []float64) Value {
	ab, bb, u := 0.0, 0.0, 0.0
	for g := range v {
		if c.known[g] {
			ab += v[g] * c.jump[g].MM
			bb += sq(v[g])
			u = hypot(u, v[g]*r.jumpU(c, g))
		}
	}
	if bb == 0 {
		return Value{}
	}
	return Value{ab / bb, u / bb}
}

// estimate says in words by how much the load changed; "" where unknown.
func (u *unmarkedStep) estimate() string {
	if u.newton == nil {
		return ""
	}
	return fmt.Sprintf("by some %.4g\u202fN (u = %.2g\u202fN, estimated from the sags) ", u.newton.MM, u.newton.U)
}
