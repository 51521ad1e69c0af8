package creep

import (
	"errors"
	"fmt"

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
	// K is the number of parameters; DOF the degrees of freedom behind the
	// intervals: what the bins of all gauges are worth less the parameters that
	// no prior pays for, at least 1.
	K, DOF float64
	AICc   float64
	Status lsq.Status
	Notes  []Note

	fam     family
	changes []Change // of the creep gauge
	linear  []float64
	shape   float64
	// inner is the covariance of the law's coefficients and the search
	// coordinate, with all that widens it.
	inner *mat.SymDense
	sys   *system
	sol   *solution
	// widening is the factor by which averaging over noises and what gauges
	// have in common widen variances.
	widening float64
	// deviance is minus twice the log likelihood, less a constant; free the
	// number of parameters that no prior pays for; shared the factor by which
	// gauges repeat each other.
	deviance, free, shared float64
}

// Nuisance is one fitted column beside the law.
type Nuisance struct {
	Parameter
	Kind    string // offset | drift | zero | ambient | load | instant
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

// fitLaw does the work of FitLaw on checked input; known is a fit of another
// family to the same input whose lags and noise to start from, nil: none.
func fitLaw(in *Input, m Model, known *Fit) (*Fit, error) {
	tMin, tMax, n := in.span()
	if n < 5 || tMax < 3*tMin {
		return nil, fmt.Errorf("%w: %d bins from %.3g h to %.3g h after full load; at least 5 over a threefold time are needed", ErrTooFew, n, tMin, tMax)
	}
	var lags []float64
	if known != nil {
		_, lags = known.sys.at(known.sol.q)
	}
	s := newSystem(in, familyOf(m, tMin, tMax), lags)
	if unknowns := s.linear() + s.shapes() + len(s.searched); s.rows() <= unknowns+1 {
		return nil, fmt.Errorf("%w: %d bins for %d unknowns", ErrTooFew, s.rows(), unknowns)
	}
	sol, err := s.settle(known)
	if err != nil {
		return nil, err
	}
	return s.result(sol, known), nil
}

// result turns a solution into a Fit.
func (s *system) result(sol *solution, known *Fit) *Fit {
	f := &Fit{Model: s.fam.model, Status: sol.status, fam: s.fam, changes: s.in.Series[0].Changes, sys: s,
		linear: sol.law, sol: sol, Notes: append([]Note(nil), s.notes...)}
	f.shape, _ = s.at(sol.q)
	f.spread(s.residuals(sol))
	f.count()
	f.parameters(known)
	f.compensate()
	f.remark()
	return f
}

// spread fills the residuals and what they say of the noise.
func (f *Fit) spread(r [][]float64) {
	s := f.sys
	for i := range s.parts {
		f.TimeH = append(f.TimeH, s.parts[i].TimeH)
	}
	f.ResidualMM = r
	own, n := r[0], s.parts[0].noise
	f.N, f.RMSmm, f.NEffective = len(own), rms(own), n.effective(s.parts[0].U)
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
	f.SlowMM, f.FadeH, f.Scale = n.slow, n.fadeH, n.scale
	f.shared = s.between(r)
}

// count fills K, DOF and AICc.
func (f *Fit) count() {
	s := f.sys
	f.K = float64(s.linear() + len(f.sol.q))
	if s.fam.model == KelvinChain {
		f.K = s.fam.effective
	}
	f.free = f.K
	f.deviance = f.sol.chi2
	for i := range s.parts {
		f.deviance += s.parts[i].noise.logDet
		f.free -= float64(len(s.parts[i].priors())) // a prior pays for its own parameter
	}
	f.free = max(f.free, 1)
	f.AICc = f.aicc(f.effectiveBins(), f.shared)
	f.DOF = max(f.effectiveBins()-f.free, 1)
}

// effectiveBins is what the bins of all gauges are worth.
func (f *Fit) effectiveBins() float64 {
	var n float64
	for i := range f.sys.parts {
		n += f.sys.parts[i].noise.effective(f.sys.parts[i].U)
	}
	return n / f.shared
}

// aicc is Akaike's criterion, minus twice the log likelihood of the
// correlated residuals plus 2k, with the correction for few observations
// (Hurvich and Tsai 1989). shared tells how far gauges repeat each other.
func (f *Fit) aicc(observations, shared float64) float64 {
	k := f.free
	return f.deviance/shared + 2*k + 2*k*(k+1)/max(observations-k-1, 0.5)
}
