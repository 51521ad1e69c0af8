package creep

import (
	"math"

	"gaugelog/analysis/lsq"

	"gonum.org/v1/gonum/mat"
)

// The residuals of a fit scatter less than the noise did, and most so at the
// slow end, where creep, drift and temperature follow the noise: noise taken
// from residuals alone is too small, and so are the intervals. So the noise is
// found by restricted likelihood (Patterson and Thompson, Biometrika 58, 1971),
// which counts what the fit took away; and since even then a few slow waves fix
// the slow noise poorly, figures are averaged over all noises the readings
// allow, by their likelihood.

// linearised is a fit's regression for small corrections: every series' own
// columns, the law's and the search coordinates' derivatives, and the residual.
type linearised struct {
	own, shared [][][]float64 // by series, column, row; not whitened
	residual    [][]float64
	priors      [][]lsq.Prior
	n           int // shared columns
}

// linearise works out the columns at a solution; coordinates held at a bound
// are left out. held lists those kept.
func (s *system) linearise(sol *solution) (l *linearised, kept []int) {
	l = &linearised{residual: s.residuals(sol)}
	for k := range sol.q {
		if !sol.atBound[k] {
			kept = append(kept, k)
		}
	}
	for i := range s.parts {
		own, law := s.columns(i, sol.q)
		for _, k := range kept {
			law = append(law, s.tangent(i, k, sol.q, sol.law, sol.own[i]))
		}
		var priors []lsq.Prior
		for _, p := range s.parts[i].priors() {
			priors = append(priors, lsq.Prior{Column: p.Column, Value: p.Value - sol.own[i][p.Column], U: p.U})
		}
		l.own, l.shared, l.priors = append(l.own, own), append(l.shared, law), append(l.priors, priors)
	}
	l.n = len(s.fam.names) + len(kept)
	return l, kept
}

// reduce whitens series i by n and eliminates its own columns.
func (l *linearised) reduce(i int, n *noise) lsq.Reduced {
	b := lsq.AngularBlock{Private: copied(l.own[i]), Shared: copied(l.shared[i]), Y: append([]float64(nil), l.residual[i]...), Priors: l.priors[i]}
	n.whitenAll(b.Private, b.Shared, [][]float64{b.Y})
	return b.Reduce(l.n)
}

func copied(cols [][]float64) [][]float64 {
	out := make([][]float64, len(cols))
	for j, c := range cols {
		out[j] = append([]float64(nil), c...)
	}
	return out
}

// lnNoise are the coordinates in which noise is searched: logarithms of the
// factor on the stated u, of the slow part (mm) and of its fading time (h).
type lnNoise [3]float64

func (v lnNoise) noise(p *seriesPart) *noise {
	return newNoise(p.TimeH, p.U, math.Exp(v[0]), math.Exp(v[1]), math.Exp(v[2]))
}

// noiseBounds bounds the search for a series: the slow part from a
// twentieth of the readings' own scatter, its fading from a minute to a fifth
// of the record, beyond which it is no noise but part of the sag.
func (p *seriesPart) noiseBounds() (lo, hi lnNoise) {
	span := 1.0
	if n := len(p.TimeH); n > 1 {
		span = p.TimeH[n-1] - p.TimeH[0]
	}
	u := math.Log(rms(p.U))
	lo = lnNoise{math.Log(leastScale), u + math.Log(0.05), math.Log(1.0 / 60)}
	hi = lnNoise{math.Log(1e3), u + math.Log(1e4), math.Log(max(span/5, 0.1))}
	return lo, hi
}

// wideStep and fineStep begin the search for noise far from it and near it, as
// factors' logarithms.
const wideStep, fineStep = 0.8, 0.2

// restricted improves every series' noise by restricted likelihood, one
// series after the other, by a pattern search that begins with step.
func (s *system) restricted(sol *solution, step float64) {
	l, _ := s.linearise(sol)
	reduced := make([]lsq.Reduced, len(s.parts))
	for i := range s.parts {
		reduced[i] = l.reduce(i, s.parts[i].noise)
	}
	for i := range s.parts {
		p := &s.parts[i]
		if len(p.TimeH) < leastForSlow {
			continue
		}
		trial := append([]lsq.Reduced(nil), reduced...)
		lo, hi := p.noiseBounds()
		cost := func(v lnNoise) float64 {
			n := v.noise(p)
			trial[i] = l.reduce(i, n)
			sol, err := lsq.Join(trial, l.n, nil)
			if err != nil || !finite(sol.LogDet) {
				return math.Inf(1)
			}
			return n.logDet + sol.LogDet + sol.Chi2
		}
		at := lnNoise{math.Log(p.noise.scale), math.Log(max(p.noise.slow, 0.3*rms(p.U))), math.Log(p.noise.fadeH)}
		at = patternSearch(cost, at, lo, hi, step)
		p.noise = at.noise(p)
		reduced[i] = l.reduce(i, p.noise)
	}
}

// leastForSlow is the number of bins below which no slow noise is looked for.
const leastForSlow = 8

// patternSearch goes downhill along the axes with steps halved where none
// helps (Hooke and Jeeves 1961, without its longer moves).
func patternSearch(cost func(lnNoise) float64, at, lo, hi lnNoise, step float64) lnNoise {
	for k := range at {
		at[k] = min(max(at[k], lo[k]), hi[k])
	}
	best := cost(at)
	for step > 0.04 {
		moved := false
		for k := range at {
			for _, d := range []float64{step, -step} {
				v := at
				if v[k] = min(max(v[k]+d, lo[k]), hi[k]); v[k] == at[k] {
					continue
				}
				if c := cost(v); c < best-1e-6 {
					at, best, moved = v, c, true
					break
				}
			}
		}
		if !moved {
			step /= 2
		}
	}
	return at
}

// averaged is what averaging over noises gives: the covariance of the shared
// columns and the variances of the others.
type averaged struct {
	shared *mat.SymDense
	own    [][]float64 // standard uncertainties by series
	// factor is the variance of the law's second coefficient over what the
	// likeliest noise alone gives.
	factor float64
}

// node is one noise of the average.
type node struct {
	cost float64
	sol  *lsq.AngularSolution
}

// average integrates over slow parts and fading times about the likeliest,
// in all series together, uniform in their logarithms.
func (s *system) average(l *linearised) *averaged {
	var nodes []node
	db, dc := 0.35, 0.5
	from, to := [2]int{-6, -4}, [2]int{5, 5}
	if s.rows() > 2000 {
		db, dc = 0.6, 0.9
		from, to = [2]int{-3, -2}, [2]int{3, 3}
	}
	least := math.Inf(1)
	for b := from[0]; b <= to[0]; b++ {
		for c := from[1]; c <= to[1]; c++ {
			n, ok := s.nodeAt(l, db*float64(b), dc*float64(c))
			if !ok {
				continue
			}
			nodes = append(nodes, n)
			least = min(least, n.cost)
		}
	}
	return combine(nodes, least, l, len(s.parts))
}

// nodeAt solves with every series' noise shifted; false where a shift leaves
// the bounds of some series (each node counts once).
func (s *system) nodeAt(l *linearised, b, c float64) (node, bool) {
	var reduced []lsq.Reduced
	var logDet float64
	inside := false
	for i := range s.parts {
		p := &s.parts[i]
		n := p.noise
		if len(p.TimeH) >= leastForSlow && n.slow > 0 {
			lo, hi := p.noiseBounds()
			v := lnNoise{math.Log(n.scale), math.Log(n.slow) + b, math.Log(n.fadeH) + c}
			if v[1] >= lo[1]-1e-9 && v[2] >= lo[2]-1e-9 && v[2] <= hi[2]+1e-9 {
				n, inside = v.noise(p), true
			}
		}
		logDet += n.logDet
		reduced = append(reduced, l.reduce(i, n))
	}
	if !inside && (b != 0 || c != 0) {
		return node{}, false
	}
	sol, err := lsq.Join(reduced, l.n, nil)
	if err != nil || !finite(sol.LogDet) {
		return node{}, false
	}
	return node{logDet + sol.LogDet + sol.Chi2, sol}, true
}

// combine weighs nodes by their likelihood.
func combine(nodes []node, least float64, l *linearised, series int) *averaged {
	out := &averaged{shared: mat.NewSymDense(l.n, nil), factor: 1}
	var sum float64
	mean := make([]float64, l.n)
	type weighed struct {
		node
		w float64
		c *mat.SymDense
	}
	var kept []weighed
	for _, n := range nodes {
		if w := math.Exp(-(n.cost - least) / 2); w > 1e-4 {
			kept = append(kept, weighed{n, w, n.sol.SharedCovariance()})
			sum += w
		}
	}
	if len(kept) == 0 {
		return nil
	}
	variance := make([][]float64, series)
	ownMean := make([][]float64, series)
	for i := range series {
		variance[i], ownMean[i] = make([]float64, len(l.own[i])), make([]float64, len(l.own[i]))
	}
	for _, k := range kept {
		for a := range mean {
			mean[a] += k.w / sum * k.sol.Shared[a]
		}
		for i := range series {
			for j, x := range k.sol.Private[i] {
				ownMean[i][j] += k.w / sum * x
			}
		}
	}
	for _, k := range kept {
		w := k.w / sum
		for a := range l.n {
			for b := a; b < l.n; b++ {
				v := k.c.At(a, b) + (k.sol.Shared[a]-mean[a])*(k.sol.Shared[b]-mean[b])
				out.shared.SetSym(a, b, out.shared.At(a, b)+w*v)
			}
		}
		for i := range series {
			for j, u := range k.sol.PrivateU(i, k.c) {
				d := k.sol.Private[i][j] - ownMean[i][j]
				variance[i][j] += w * (u*u + d*d)
			}
		}
	}
	for i := range variance {
		u := make([]float64, len(variance[i]))
		for j, v := range variance[i] {
			u[j] = math.Sqrt(v)
		}
		out.own = append(out.own, u)
	}
	likeliest := kept[0]
	for _, k := range kept {
		if k.cost < likeliest.cost {
			likeliest = k
		}
	}
	if v := likeliest.c.At(1, 1); v > 0 {
		out.factor = out.shared.At(1, 1) / v
	}
	return out
}
