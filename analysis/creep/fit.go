package creep

import (
	"errors"
	"fmt"
	"math"

	"gaugelog/analysis/lsq"

	"gonum.org/v1/gonum/mat"
)

// Note says something a reader must know; scripts read Code.
type Note struct{ Code, Text string }

// Parameter is a fitted figure with its standard uncertainty.
type Parameter struct {
	Name  string
	Value float64
	// U is the standard uncertainty; 0 where it is unknown (see AtBound).
	U       float64
	Unit    string
	AtBound bool
}

// Fit is one law fitted to the whole history.
type Fit struct {
	Model Model
	// Parameters are the law's: d0, d1, n and so on, in mm, N, h.
	Parameters []Parameter
	// Cov is the covariance of Parameters.
	Cov *mat.SymDense
	// Nuisance are the offsets (mm), drifts (mm/d), zeros (mm) and ambient
	// coefficients (mm per unit), in the order of the columns; Lags the lag
	// of each ambient record, h.
	Nuisance []Nuisance
	Lags     []Parameter
	// ResidualMM is reading minus fit by series and bin; CompensatedMM the
	// reading without everything that is neither load nor creep. TimeH are the
	// bins' times: bins were merged where there were more than mostBins.
	TimeH, ResidualMM, CompensatedMM [][]float64
	// RMSmm is that of the creep gauge's residuals; N the number of its bins,
	// NEffective what they are worth (for equal spacing N(1-r)/(1+r)), Lag1
	// the correlation of neighbouring residuals.
	RMSmm      float64
	N          int
	NEffective float64
	Lag1       float64
	// SlowMM and FadeH describe the residuals' correlated part in the creep
	// gauge: its standard deviation and its fading time, mm and h. Scale is
	// the factor on the bins' stated u.
	SlowMM, FadeH, Scale float64
	// K is the number of parameters, DOF NEffective - K (at least 1).
	K, DOF float64
	AICc   float64
	Status lsq.Status
	Notes  []Note

	fam     family
	changes []Change // of the creep gauge
	linear  []float64
	shape   float64
	// inner is the covariance of the law's coefficients and the search
	// coordinate, inflated.
	inner *mat.SymDense
	sys   *system
	q     []float64
}

// Nuisance is one fitted column beside the law.
type Nuisance struct {
	Parameter
	Kind    string // offset | drift | zero | ambient
	Series  int
	Ambient int
}

// ErrTooFew marks an error of too few readings for a law.
var ErrTooFew = errors.New("too few readings for a creep law")

// FitLaw fits one family to the whole history. Errors: unusable input,
// ErrTooFew, and columns that cannot be told apart (lsq.RankError).
func FitLaw(in Input, m Model) (*Fit, error) {
	if err := in.validate(); err != nil {
		return nil, err
	}
	in.compact()
	return fitLaw(&in, m, nil)
}

// span returns the least and greatest time since full load in the creep step
// among the creep gauge's bins, and how many bins there are.
func (in *Input) span() (tMin, tMax float64, n int) {
	for _, t := range in.Series[0].TimeH {
		if t > in.FullH && t <= in.EndH {
			if n == 0 {
				tMin = t - in.FullH
			}
			tMax = t - in.FullH
			n++
		}
	}
	return tMin, tMax, n
}

// fitLaw does the work of FitLaw on checked input; lags are starting values
// of ln lag, nil where nothing is known of them.
func fitLaw(in *Input, m Model, lags []float64) (*Fit, error) {
	tMin, tMax, n := in.span()
	if n < 5 || tMax < 3*tMin {
		return nil, fmt.Errorf("%w: %d bins from %.3g h to %.3g h after full load; at least 5 over a threefold time are needed", ErrTooFew, n, tMin, tMax)
	}
	s := newSystem(in, familyOf(m, tMin, tMax), lags)
	if len(s.y) <= s.columns()+s.shapes()+len(s.searched)+1 {
		return nil, fmt.Errorf("%w: %d bins for %d unknowns", ErrTooFew, len(s.y), s.columns()+s.shapes()+len(s.searched))
	}
	sol, err := s.settle(lags != nil)
	if err != nil {
		return nil, err
	}
	return s.result(sol), nil
}

// settle alternates between law and noise until both hold.
func (s *system) settle(knowLags bool) (*lsq.NonlinearSolution, error) {
	var starts [][]float64
	var sol *lsq.NonlinearSolution
	for pass := range 4 {
		var err error
		if starts == nil && s.shapes() == 1 && len(s.searched) > 0 {
			if starts, err = s.startsWithLags(knowLags); err != nil {
				return nil, err
			}
		}
		next, err := s.solve(starts)
		if err != nil {
			return nil, err
		}
		done := sol != nil && settled(sol, next)
		sol = next
		if done || pass == 3 {
			break
		}
		if q := sol.P[s.columns():]; len(q) > 0 {
			starts = [][]float64{append([]float64(nil), q...)}
		}
		s.learnNoise(sol)
	}
	return sol, nil
}

// settled reports whether no parameter moved by a hundredth of its u.
func settled(a, b *lsq.NonlinearSolution) bool {
	if b.Covariance == nil {
		return true
	}
	for j := range b.P {
		if math.Abs(a.P[j]-b.P[j]) > 0.01*b.U(j)+1e-12*math.Abs(b.P[j]) {
			return false
		}
	}
	return true
}

// startsWithLags fits with the lags held to find the shape, then offers
// several lags to the joint search.
func (s *system) startsWithLags(known bool) ([][]float64, error) {
	search := s.searched
	s.searched = nil
	sol, err := s.solve(nil)
	s.searched = search
	if err != nil {
		return nil, err
	}
	starts := [][]float64{{sol.P[s.columns()]}}
	for _, a := range search {
		lo, hi, _ := s.in.Ambient[a].lagBounds()
		offer := []float64{lo + 0.15*(hi-lo), lo + 0.5*(hi-lo), lo + 0.85*(hi-lo)}
		if known {
			offer = []float64{s.lag[a]}
		}
		var more [][]float64
		for _, q := range starts {
			for _, l := range offer {
				more = append(more, append(append([]float64(nil), q...), l))
			}
		}
		starts = more
	}
	return starts, nil
}

// solve fits with the noise as it stands.
func (s *system) solve(starts [][]float64) (*lsq.NonlinearSolution, error) {
	if s.fam.model == KelvinChain {
		return s.solveChain()
	}
	p := lsq.Separable{Columns: s.columns(), Y: s.whiteY(), Names: s.names(), Priors: s.priors(), Starts: starts,
		Lower: []float64{s.fam.lower}, Upper: []float64{s.fam.upper}}
	for _, a := range s.searched {
		lo, hi, _ := s.in.Ambient[a].lagBounds()
		p.Lower, p.Upper = append(p.Lower, lo), append(p.Upper, hi)
	}
	p.Design = func(q []float64, a *mat.Dense) {
		s.design(q, a)
		s.whiten(a)
	}
	p.Derivative = func(q []float64, k int, d *mat.Dense) {
		s.derivative(q, k, d)
		s.whiten(d)
	}
	return p.Fit()
}

// residuals returns reading minus fit of every row, mm.
func (s *system) residuals(linear, q []float64) []float64 {
	a := mat.NewDense(len(s.y), s.columns(), nil)
	s.design(q, a)
	r := make([]float64, len(s.y))
	for i := range r {
		r[i] = s.y[i]
		for j, c := range linear {
			r[i] -= a.At(i, j) * c
		}
	}
	return r
}

// learnNoise estimates every series' noise from the residuals.
func (s *system) learnNoise(sol *lsq.NonlinearSolution) {
	r := s.residuals(sol.P[:s.columns()], sol.P[s.columns():])
	lost := float64(len(sol.P)) / float64(len(s.in.Series))
	for i := range s.in.Series {
		if s.first[i+1] > s.first[i] {
			q := &s.in.Series[i]
			s.noise[i] = estimateNoise(q.TimeH, q.U, r[s.first[i]:s.first[i+1]], lost)
		}
	}
}

// result turns a solution into a Fit.
func (s *system) result(sol *lsq.NonlinearSolution) *Fit {
	nc := s.columns()
	f := &Fit{Model: s.fam.model, Status: sol.Status, fam: s.fam, changes: s.in.Series[0].Changes, sys: s,
		linear: sol.P[:len(s.fam.names)], q: sol.P[nc:], Notes: append([]Note(nil), s.notes...)}
	f.shape, _ = s.at(f.q)
	r := s.residuals(sol.P[:nc], f.q)
	f.spread(r)
	f.count(sol)
	f.parameters(sol)
	f.compensate(sol)
	f.remark(sol)
	return f
}

// spread fills the residuals and what they say of the noise.
func (f *Fit) spread(r []float64) {
	s := f.sys
	for i := range s.in.Series {
		f.TimeH = append(f.TimeH, s.in.Series[i].TimeH)
		f.ResidualMM = append(f.ResidualMM, r[s.first[i]:s.first[i+1]])
	}
	own := f.ResidualMM[0]
	f.N, f.RMSmm, f.NEffective = len(own), rms(own), s.noise[0].effectN
	var up, down float64
	for i, v := range own {
		down += v * v
		if i > 0 {
			up += v * own[i-1]
		}
	}
	if down > 0 {
		f.Lag1 = up / down
	}
	f.SlowMM, f.FadeH, f.Scale = s.noise[0].slow, s.noise[0].fadeH, s.noise[0].scale
}

// count fills K, DOF and AICc: minus twice the log likelihood of the
// correlated residuals plus 2k plus the correction for few observations
// (Hurvich and Tsai 1989), the observations counted as NEffective.
func (f *Fit) count(sol *lsq.NonlinearSolution) {
	s := f.sys
	f.K = float64(len(sol.P))
	if s.fam.model == KelvinChain {
		f.K = s.fam.effective
	}
	var logDet, eff float64
	for _, n := range s.noise {
		logDet += n.logDet
		eff += n.effectN
	}
	own := f.K
	for _, n := range s.extra {
		if n.prior != nil {
			own-- // a prior pays for its own parameter
		}
	}
	f.DOF = max(eff-own, 1)
	f.AICc = sol.Chi2 + logDet + 2*own + 2*own*(own+1)/max(eff-own-1, 0.5)
}

// inflation is the factor on the covariance for parameters taken from few
// effective observations.
func (f *Fit) inflation() float64 { return (f.DOF + f.K) / f.DOF }
