package creep

import (
	"math"
	"slices"

	"gaugelog/analysis/lsq"

	"gonum.org/v1/gonum/mat"
)

// stopping works out the interval of one forecast for any length of the test.
type stopping struct {
	in     *Input
	far    *Forecast
	law    *Fit
	steady []Change
	// scale turns the law's own uncertainty into that of the forecast, which is
	// averaged over laws, or a chain's.
	scale    float64
	coverage float64
}

// mayStop fills MayStop and Shrunk for the farthest forecast that stands. After
// an unloading the durations count on from it, had the load stayed.
func (a *Analysis) mayStop(in *Input, o Options) {
	var far *Forecast
	for i := range a.Forecast {
		if f := &a.Forecast[i]; f.Refused == "" && (far == nil || f.AfterH > far.AfterH) {
			far = f
		}
	}
	law := a.plannedBy()
	if far == nil || law == nil {
		return
	}
	s := &stopping{in: in, far: far, law: law, steady: in.steady(), coverage: a.Best.Coverage()}
	if u := law.sagSteady(in.FullH+far.AfterH, s.steady).U; u > 0 {
		s.scale = far.UWithin / u
	}
	more := o.MoreH
	if more == nil {
		more = []float64{24, 168, 720}
	}
	now := in.steadyEnd()
	for _, m := range append([]float64{0}, more...) {
		if w, ok := s.until(now + m); ok && in.FullH+far.AfterH > now+m {
			w.MoreH = m
			a.MayStop = append(a.MayStop, w)
		}
	}
	for _, share := range []float64{0.1, 0.25, 0.5, 0.75} {
		at := in.FullH + share*(now-in.FullH)
		if w, ok := s.until(at); ok {
			w.MoreH = at - now
			a.Shrunk = append(a.Shrunk, w)
		}
	}
}

// plannedBy is the law whose design tells what time buys: the best one, or the
// next where that is a chain, whose smoothing tells nothing of it.
func (a *Analysis) plannedBy() *Fit {
	var best *Candidate
	for i := range a.Candidates {
		c := &a.Candidates[i]
		if c.Admissible && c.Model != KelvinChain && c.Fit.inner.At(0, 0) > 0 && (best == nil || c.AICc < best.AICc) {
			best = c
		}
	}
	if best == nil {
		return nil
	}
	return best.Fit
}

// steadyEnd is the end of what was read under the creep step's load.
func (in *Input) steadyEnd() float64 { return min(in.EndH, in.lastH()) }

// until returns the forecast's interval were the test read until untilH: from
// the law's design at the bins there were, and beyond the last at bins 20 a
// decade.
func (s *stopping) until(untilH float64) (MayStop, bool) {
	cov, used := s.law.planned(s.in, untilH)
	if cov == nil {
		return MayStop{}, false
	}
	_, own := s.law.gradient(s.in.FullH+s.far.AfterH, s.steady)
	g := make([]float64, cov.SymmetricDim())
	copy(g, own[:used])
	u := lsq.PropagateU(cov, g) * math.Sqrt(s.law.widening) * s.scale
	u = math.Sqrt(u*u + s.far.UBetween*s.far.UBetween + s.far.UResidual*s.far.UResidual)
	return MayStop{ForecastH: s.far.AfterH, U: u, Width: 2 * s.coverage * u}, finite(u) && u > 0
}

// planned is the covariance of what the law and the lags share among gauges,
// were the test read until untilH; used is how many of the law's derivatives it
// begins with (the shape is left out at a bound). Nil where so short a test
// fixes nothing.
func (f *Fit) planned(in *Input, untilH float64) (c *mat.SymDense, used int) {
	plan := in.until(math.Min(untilH, in.steadyEnd()) + 1e-9)
	plan.EndH = untilH
	plan.Series = slices.Clone(plan.Series)
	for i := range plan.Series {
		p := &plan.Series[i]
		n := min(len(p.Changes), len(f.sys.in.steady())) // no unloading
		if p.Changes = p.Changes[:n]; p.Parts != nil {
			p.Parts = p.Parts[:n]
		}
		p.extend(in.FullH, untilH)
	}
	shape, lag := f.sys.at(f.sol.q)
	s := newSystem(&plan, f.fam, lag)
	s.holdLaw(f.linear, f.shape)
	l, kept := s.linearise(f.planFor(s, shape, lag))
	var reduced []lsq.Reduced
	for i := range s.parts {
		reduced = append(reduced, l.reduce(i, s.parts[i].noise))
	}
	x, err := lsq.Join(reduced, l.n, nil)
	if err != nil || !finite(x.LogDet) {
		return nil, 0
	}
	used = len(f.fam.names)
	if s.shapes() == 1 && len(kept) > 0 && kept[0] == 0 {
		used++
	}
	return x.SharedCovariance(), used
}

// planFor is f's solution for a system of the same series read for another
// time, which takes f's noise over: columns not felt there are missing in it,
// and lags that cannot be searched.
func (f *Fit) planFor(s *system, shape float64, lag []float64) *solution {
	sol := &solution{law: f.sol.law}
	if s.shapes() == 1 {
		sol.q, sol.atBound = append(sol.q, shape), append(sol.atBound, f.sol.atBound[0])
	}
	for _, a := range s.searched {
		held := true
		for k, b := range f.sys.searched {
			if c := f.sys.shapes() + k; a == b && c < len(f.sol.atBound) {
				held = f.sol.atBound[c]
			}
		}
		sol.q, sol.atBound = append(sol.q, lag[a]), append(sol.atBound, held)
	}
	for i := range s.parts {
		p, n := &s.parts[i], f.sys.parts[i].noise
		p.noise = newNoise(p.TimeH, p.U, n.scale, n.slow, n.fadeH)
		own := make([]float64, len(p.extra))
		next := 0 // both lists have one order
		for j, x := range p.extra {
			for k := next; k < len(f.sys.parts[i].extra); k++ {
				if f.sys.parts[i].extra[k].name == x.name {
					own[j], next = f.sol.own[i][k], k+1
					break
				}
			}
		}
		sol.own = append(sol.own, own)
	}
	return sol
}

// extend adds bins 20 a decade from the last to untilH, as uncertain as the
// last ten were.
func (s *Series) extend(fullH, untilH float64) {
	n := len(s.TimeH)
	if n == 0 || s.TimeH[n-1] >= untilH {
		return
	}
	u := lsq.Median(s.U[max(0, n-10):])
	s.TimeH, s.SagMM, s.U = slices.Clone(s.TimeH), slices.Clone(s.SagMM), slices.Clone(s.U)
	s.N = nil
	for age := s.TimeH[n-1] - fullH; age > 0; {
		age *= math.Pow(10, 1.0/20)
		if fullH+age > untilH {
			break
		}
		s.TimeH, s.SagMM, s.U = append(s.TimeH, fullH+age), append(s.SagMM, 0), append(s.U, u)
	}
	if s.TimeH[len(s.TimeH)-1] < untilH {
		s.TimeH, s.SagMM, s.U = append(s.TimeH, untilH), append(s.SagMM, 0), append(s.U, u)
	}
}
