package creep

import (
	"math"

	"gaugelog/analysis/lsq"

	"gonum.org/v1/gonum/mat"
)

// solution is what a search found.
type solution struct {
	law []float64   // the law's coefficients
	own [][]float64 // the series' own, by series
	// q are the search coordinates, atBound those at a bound.
	q       []float64
	atBound []bool
	// zero marks coefficients of a chain held at 0.
	zero []bool
	// cov is the covariance of law and q at the noise as it stands, ownU the
	// standard uncertainties of the series' own; nil where not identifiable.
	cov     *mat.SymDense
	ownU    [][]float64
	chi2    float64
	status  lsq.Status
	unclear []string
}

// passes bounds the rounds between law and noise.
const passes = 5

// settle alternates between law and noise until both hold: first with the
// stated scatter, then with noise from the residuals, last by restricted
// likelihood. A long record is settled on merged bins first, so that only the
// last rounds go over all of them.
func (s *system) settle(known *Fit) (*solution, error) {
	var sol *solution
	var q []float64
	if known != nil {
		s.adopt(known.sys)
	}
	first, step := 0, wideStep
	if c := s.coarse(); c != nil {
		if near, err := c.settle(known); err == nil {
			s.adopt(c)
			s.holdLaw(near.law, c.shape(near))
			q, first, step = near.q, 2, fineStep
		}
	}
	for pass := first; pass < passes; pass++ {
		next, err := s.solve(q, roughly)
		if err != nil {
			return nil, err
		}
		done := pass > 2 && settled(sol, next)
		sol, q = next, next.q
		if done || pass == passes-1 {
			break
		}
		s.holdLaw(sol.law, s.shape(sol))
		if pass == 0 || s.fam.model == KelvinChain || sol.cov == nil {
			s.learnNoise(sol)
		} else {
			s.restricted(sol, step)
		}
	}
	return s.solve(q, exactly)
}

// adopt takes over the noise of another system of the same series.
func (s *system) adopt(o *system) {
	if len(o.parts) != len(s.parts) {
		return
	}
	for i := range s.parts {
		p, n := &s.parts[i], o.parts[i].noise
		p.noise = newNoise(p.TimeH, p.U, n.scale, n.slow, n.fadeH)
	}
}

// roughBins is about how many bins of a series a first look takes.
const roughBins = 150

// coarse is the same system over merged bins; nil where it would not be much
// smaller.
func (s *system) coarse() *system {
	in := *s.in
	in.Series = make([]Series, len(s.in.Series))
	rows := 0
	for i := range s.in.Series {
		in.Series[i] = s.in.Series[i].compacted(roughBins)
		rows += len(in.Series[i].TimeH)
	}
	if 3*rows > s.rows() {
		return nil
	}
	return newSystem(&in, s.fam, s.lag)
}

// roughly is enough of a search while the noise is still being found.
const roughly, exactly = 3, 0

// enough is the share of the misfit below which a step is not worth taking:
// far below what a standard uncertainty is to it.
const enough = 1e-13

// shape is the shape parameter of a solution.
func (s *system) shape(sol *solution) float64 {
	shape, _ := s.at(sol.q)
	return shape
}

// settled reports whether no parameter moved by a hundredth of its u.
func settled(a, b *solution) bool {
	if b.cov == nil || a == nil {
		return true
	}
	x, y := append(append([]float64(nil), a.law...), a.q...), append(append([]float64(nil), b.law...), b.q...)
	for j := range y {
		if math.Abs(x[j]-y[j]) > 0.01*math.Sqrt(b.cov.At(j, j))+1e-12*math.Abs(y[j]) {
			return false
		}
	}
	return true
}

// learnNoise estimates every series' noise from the residuals.
func (s *system) learnNoise(sol *solution) {
	r := s.residuals(sol)
	for i := range s.parts {
		p := &s.parts[i]
		if len(p.TimeH) > 0 {
			lost := float64(len(sol.law)+len(sol.q))/float64(len(s.parts)) + float64(len(sol.own[i])-len(p.priors()))
			p.noise = estimateNoise(p.TimeH, p.U, r[i], lost)
		}
	}
}

// bounds are those of the search coordinates.
func (s *system) bounds() (lower, upper []float64) {
	if s.shapes() == 1 {
		lower, upper = append(lower, s.fam.lower), append(upper, s.fam.upper)
	}
	for _, a := range s.searched {
		lo, hi, _ := s.in.Ambient[a].lagBounds()
		lower, upper = append(lower, lo), append(upper, hi)
	}
	return lower, upper
}

// solve fits with the noise as it stands, from q, or from wherever the misfit
// is least where q is nil, by limit steps or, at 0, until nothing improves it.
func (s *system) solve(q []float64, limit int) (*solution, error) {
	if s.fam.model == KelvinChain {
		return s.solveChain()
	}
	if q == nil {
		q = s.start()
	}
	g := lsq.Grouped{Groups: len(s.parts), Shared: len(s.fam.names), Names: s.names(), Starts: [][]float64{q}, MaxIterations: limit, Enough: enough,
		Design: func(q []float64, i int) lsq.AngularBlock { return s.block(i, q) },
		Derivative: func(q []float64, k, i int, law, own []float64) []float64 {
			v := s.tangent(i, k, q, law, own)
			s.parts[i].noise.whiten(v)
			return v
		}}
	g.Lower, g.Upper = s.bounds()
	f, err := g.Fit()
	if err != nil {
		return nil, err
	}
	return &solution{law: f.Shared, own: f.Private, q: f.Q, atBound: f.AtBound, cov: f.Covariance, ownU: f.PrivateU,
		chi2: f.Chi2, status: f.Status, unclear: f.Unclear}, nil
}

// start looks for coordinates near the least misfit: first the shape with
// lags as they stand, then each lag, then the shape again.
func (s *system) start() []float64 {
	lower, upper := s.bounds()
	q := make([]float64, len(lower))
	for k, a := range s.searched {
		q[s.shapes()+k] = s.lag[a]
	}
	along := func(k, points int, tolerance float64) {
		trial := append([]float64(nil), q...)
		q[k] = lsq.Minimize(func(x float64) float64 {
			trial[k] = x
			return s.misfit(trial)
		}, lower[k], upper[k], points, tolerance)
	}
	along(0, 16, 0.01)
	for k := s.shapes(); k < len(q); k++ {
		along(k, 6, 0.05)
	}
	if len(q) > 1 {
		along(0, 12, 0.01)
	}
	return q
}

// misfit is the sum of squares at q.
func (s *system) misfit(q []float64) float64 {
	a := lsq.Angular{Shared: len(s.fam.names)}
	for i := range s.parts {
		a.Blocks = append(a.Blocks, s.block(i, q))
	}
	sol, err := a.Solve()
	if err != nil || !finite(sol.LogDet) {
		return math.Inf(1)
	}
	return sol.Chi2
}
