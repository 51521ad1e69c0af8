package lsq

import (
	"errors"
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"
)

// Nonlinear is a general nonlinear least-squares problem.
type Nonlinear struct {
	// Model writes the expected observations for parameters p into f.
	Model func(p, f []float64)
	// Jacobian writes the derivatives of Model (rows observations, columns
	// parameters) into j. Nil: central differences.
	Jacobian func(p []float64, j *mat.Dense)
	Y        []float64
	U        []float64 // standard uncertainties of Y; nil: all 1
	Start    []float64
	// Lower and Upper bound the parameters; nil or infinite: none.
	Lower, Upper []float64
	Names        []string
	Priors       []Prior
	// MaxIterations cuts the search off; 0 means 2000.
	MaxIterations int
}

// NonlinearSolution is the answer to a Nonlinear or Separable problem. For a
// Separable one P holds the linear unknowns first.
type NonlinearSolution struct {
	P []float64
	// Covariance of P as it follows from the stated uncertainties (see
	// Scaled); nil where Status is Unidentifiable. A parameter at its bound
	// has a row of zeros: its uncertainty is unknown, not zero.
	Covariance *mat.SymDense
	AtBound    []bool
	Residuals  []float64 // observation minus fit
	Fitted     []float64
	Chi2       float64
	DOF        int
	Condition  float64 // of the scaled Jacobian; 0 where unidentifiable
	Iterations int
	Status     Status
	// Unclear names the parameters that cannot be told apart, if any.
	Unclear []string
}

// U returns the standard uncertainty of parameter j; 0 where it is unknown.
func (s *NonlinearSolution) U(j int) float64 {
	if s.Covariance == nil {
		return 0
	}
	return math.Sqrt(s.Covariance.At(j, j))
}

// ResidualSD returns sqrt(Chi2/DOF), as Solution.ResidualSD does.
func (s *NonlinearSolution) ResidualSD() float64 { return residualSD(s.Chi2, s.DOF) }

// Scaled returns a copy whose Covariance is multiplied by Chi2/DOF.
func (s *NonlinearSolution) Scaled() *NonlinearSolution {
	t := *s
	if s.Covariance != nil {
		t.Covariance = scaledCovariance(s.Covariance, s.Chi2, s.DOF)
	}
	return &t
}

// Fit searches for the parameters by Levenberg–Marquardt (Moré, The
// Levenberg-Marquardt algorithm, 1978, for the scaling; Nielsen 1999 for the
// damping) within the bounds. The search is local: what it finds depends on
// Start. Errors are those of shapes and numbers; a search that does not end
// well is a Status.
func (p Nonlinear) Fit() (*NonlinearSolution, error) {
	if err := p.validate(); err != nil {
		return nil, err
	}
	m, n := len(p.Y), len(p.Start)
	f := make([]float64, m)
	s := &search{m: m + len(p.Priors), lower: p.Lower, upper: p.Upper, limit: p.MaxIterations}
	if s.limit == 0 {
		s.limit = 2000
	}
	s.residual = func(x, r []float64) bool {
		p.Model(x, f)
		for i := range f {
			r[i] = (f[i] - p.Y[i]) / at(p.U, i)
		}
		for i, q := range p.Priors {
			r[m+i] = (x[q.Column] - q.Value) / q.U
		}
		return allFinite(r)
	}
	raw := mat.NewDense(m, n, nil)
	s.jacobian = func(x []float64, j *mat.Dense) {
		if p.Jacobian != nil {
			p.Jacobian(x, raw)
		} else {
			Differences(p.Model, x, raw)
		}
		fillWhite(j, raw, p.U, p.Priors)
	}
	status := s.run(p.Start)
	if !finite(s.chi2) {
		return nil, errors.New("the model gives no finite number at the start; choose another")
	}
	out := &NonlinearSolution{P: s.p, Chi2: s.chi2, DOF: s.m - n, Iterations: s.taken, Status: status}
	p.Model(s.p, f)
	out.Fitted = f
	out.Residuals = make([]float64, m)
	for i := range f {
		out.Residuals[i] = p.Y[i] - f[i]
	}
	j := mat.NewDense(s.m, n, nil)
	s.jacobian(s.p, j)
	out.AtBound = make([]bool, n)
	for i := range n {
		out.AtBound[i] = s.bound(i)
	}
	out.uncertainty(j, p.Names)
	return out, nil
}

// uncertainty fills Covariance from the whitened Jacobian, parameters at a
// bound held there.
func (s *NonlinearSolution) uncertainty(j *mat.Dense, names []string) {
	m, n := j.Dims()
	var cols []int
	for i := range n {
		if !s.AtBound[i] {
			cols = append(cols, i)
		}
	}
	s.Covariance = mat.NewSymDense(n, nil)
	if len(cols) == 0 {
		s.Condition = 1
		return
	}
	sub := mat.NewDense(m, len(cols), nil)
	for k, c := range cols {
		for i := range m {
			sub.Set(i, k, j.At(i, c))
		}
	}
	f := newFactor(sub)
	cond, err := f.check(pick(names, cols))
	if err != nil {
		s.Covariance, s.Status = nil, Unidentifiable
		var rank *RankError
		if errors.As(err, &rank) {
			s.Unclear = rank.Names
		}
		return
	}
	s.Condition = cond
	c := f.covariance()
	for a, i := range cols {
		for b, k := range cols {
			if b >= a {
				s.Covariance.SetSym(i, k, c.At(a, b))
			}
		}
	}
}

// Differences writes central differences of model at p into j, with steps
// of the cube root of the rounding unit relative to each parameter (or 1e-6
// absolute at 0). Good to about ten digits where the model is smooth.
func Differences(model func(p, f []float64), p []float64, j *mat.Dense) {
	m, n := j.Dims()
	q := append([]float64(nil), p...)
	hi, lo := make([]float64, m), make([]float64, m)
	for k := range n {
		h := 6e-6 * math.Abs(p[k])
		if h == 0 {
			h = 1e-6
		}
		q[k] = p[k] + h
		up := q[k]
		model(q, hi)
		q[k] = p[k] - h
		width := up - q[k]
		model(q, lo)
		q[k] = p[k]
		for i := range m {
			j.Set(i, k, (hi[i]-lo[i])/width)
		}
	}
}

// fillWhite writes raw in units of u, then a row for each prior, into j.
func fillWhite(j, raw *mat.Dense, u []float64, priors []Prior) {
	m, n := raw.Dims()
	j.Zero()
	for i := range m {
		for k := range n {
			j.Set(i, k, raw.At(i, k)/at(u, i))
		}
	}
	for i, q := range priors {
		j.Set(m+i, q.Column, 1/q.U)
	}
}

// at returns u[i], 1 where u is nil.
func at(u []float64, i int) float64 {
	if u == nil {
		return 1
	}
	return u[i]
}

func allFinite(v []float64) bool {
	for _, x := range v {
		if !finite(x) {
			return false
		}
	}
	return true
}

func (p Nonlinear) validate() error {
	n := len(p.Start)
	if p.Model == nil || n == 0 {
		return errors.New("a nonlinear fit needs a model and a start")
	}
	return validateSearch(p.Y, p.U, p.Lower, p.Upper, p.Priors, n, n)
}

// validateSearch checks what Nonlinear and Separable have in common: n
// parameters searched, total unknowns.
func validateSearch(y, u, lower, upper []float64, priors []Prior, n, total int) error {
	if len(y)+len(priors) < total {
		return fmt.Errorf("%d observations cannot fix %d unknowns; add readings or fix unknowns", len(y)+len(priors), total)
	}
	if u != nil && len(u) != len(y) {
		return fmt.Errorf("%d uncertainties for %d observations", len(u), len(y))
	}
	for i, v := range y {
		if !finite(v) {
			return fmt.Errorf("observation %d is not a finite number", i+1)
		}
		if !(at(u, i) > 0) || !finite(at(u, i)) {
			return fmt.Errorf("the uncertainty of observation %d is %g; it must be positive", i+1, at(u, i))
		}
	}
	if lower != nil && len(lower) != n || upper != nil && len(upper) != n {
		return fmt.Errorf("bounds for another number of parameters than %d", n)
	}
	for i := range n {
		if lower != nil && upper != nil && !(lower[i] < upper[i]) {
			return fmt.Errorf("the bounds of parameter %d are %g and %g", i+1, lower[i], upper[i])
		}
	}
	for _, q := range priors {
		if q.Column < 0 || q.Column >= total || !(q.U > 0) || !finite(q.U) || !finite(q.Value) {
			return fmt.Errorf("the prior of unknown %d needs a finite value and a positive uncertainty", q.Column+1)
		}
	}
	return nil
}
