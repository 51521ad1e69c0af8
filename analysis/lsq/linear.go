package lsq

import (
	"errors"
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"
)

// Problem is a linear least-squares problem: observations Y, each a sum over
// columns of Design times an unknown, plus an error.
type Problem struct {
	Design *mat.Dense // one row an observation, one column an unknown
	Y      []float64
	// Names of the unknowns, for errors; may be short or nil.
	Names []string
	// U holds the standard uncertainties of Y, all positive. Nil: all 1.
	U []float64
	// Covariance of Y, full; it goes before U. Nil: independent observations.
	Covariance *mat.SymDense
	// Priors are what is known of unknowns beforehand; each counts as one
	// more observation.
	Priors []Prior
}

// Prior is knowledge of one unknown from elsewhere: a value and its standard
// uncertainty (positive), in the unknown's unit.
type Prior struct {
	Column   int
	Value, U float64
}

// Solution is the answer to a Problem.
type Solution struct {
	X []float64
	// Covariance of X as it follows from the stated uncertainties of the
	// observations. Where those were not stated (U and Covariance nil), use
	// Scaled.
	Covariance *mat.SymDense
	// Residuals are observation minus fit, in the observations' unit, without
	// the priors' own.
	Residuals []float64
	Fitted    []float64
	// Chi2 is the sum of squares of whitened residuals, priors included.
	Chi2 float64
	// DOF is observations plus priors less unknowns.
	DOF int
	// Condition of the whitened design with columns scaled to unit length.
	Condition float64
}

// Solve solves p by whitening and Householder QR with columns scaled to unit
// length, and refines the answer. Errors: shapes that do not agree, numbers
// that are not finite, uncertainties that are not positive, a covariance that
// is not positive definite, fewer observations than unknowns, and *RankError.
func Solve(p Problem) (*Solution, error) {
	if err := p.validate(); err != nil {
		return nil, err
	}
	a, b, err := p.whiten()
	if err != nil {
		return nil, err
	}
	m, n := a.Dims()
	if m < n {
		return nil, fmt.Errorf("%d observations cannot fix %d unknowns; add readings or fix unknowns", m, n)
	}
	f := newFactor(a)
	cond, err := f.check(p.Names)
	if err != nil {
		return nil, err
	}
	z := f.solve(b, true)
	s := &Solution{X: z, Covariance: f.covariance(), DOF: m - n, Condition: cond}
	s.Chi2 = f.chi2(b, z)
	for j := range z {
		z[j] /= f.scale[j]
	}
	s.Fitted, s.Residuals = p.residuals(z)
	return s, nil
}

// chi2 returns |b - A z|^2 for scaled unknowns.
func (f *factor) chi2(b, z []float64) float64 {
	var total float64
	for i := range b {
		s := sum2{high: b[i]}
		for j := range z {
			s.addProduct(-f.a.At(i, j), z[j])
		}
		r := s.value()
		total += r * r
	}
	return total
}

// residuals returns fit and observation minus fit.
func (p Problem) residuals(x []float64) (fitted, res []float64) {
	fitted, res = make([]float64, len(p.Y)), make([]float64, len(p.Y))
	for i := range p.Y {
		var fit sum2
		left := sum2{high: p.Y[i]}
		for j, v := range x {
			fit.addProduct(p.Design.At(i, j), v)
			left.addProduct(-p.Design.At(i, j), v)
		}
		fitted[i], res[i] = fit.value(), left.value()
	}
	return fitted, res
}

func finite(v float64) bool { return !math.IsNaN(v) && !math.IsInf(v, 0) }

// validate reports the first thing wrong with p.
func (p Problem) validate() error {
	if p.Design == nil {
		return errors.New("no design matrix")
	}
	m, n := p.Design.Dims()
	switch {
	case len(p.Y) != m:
		return fmt.Errorf("%d observations for %d rows of the design", len(p.Y), m)
	case p.U != nil && len(p.U) != m:
		return fmt.Errorf("%d uncertainties for %d observations", len(p.U), m)
	case p.Covariance != nil && p.Covariance.SymmetricDim() != m:
		return fmt.Errorf("covariance of %d for %d observations", p.Covariance.SymmetricDim(), m)
	}
	for i := range m {
		if !finite(p.Y[i]) {
			return fmt.Errorf("observation %d is not a finite number", i+1)
		}
		if p.U != nil && !(p.U[i] > 0 && finite(p.U[i])) {
			return fmt.Errorf("the uncertainty of observation %d is %g; it must be positive", i+1, p.U[i])
		}
		for j := range n {
			if !finite(p.Design.At(i, j)) {
				return fmt.Errorf("%s is not a finite number in observation %d", pick(p.Names, []int{j})[0], i+1)
			}
		}
	}
	for _, q := range p.Priors {
		if q.Column < 0 || q.Column >= n {
			return fmt.Errorf("a prior names column %d of %d", q.Column+1, n)
		}
		if !(q.U > 0) || !finite(q.U) || !finite(q.Value) {
			return fmt.Errorf("the prior of %s needs a finite value and a positive uncertainty", pick(p.Names, []int{q.Column})[0])
		}
	}
	return nil
}

// whiten returns design and observations in units of their uncertainty, with
// a row for each prior below.
func (p Problem) whiten() (*mat.Dense, []float64, error) {
	m, n := p.Design.Dims()
	a := mat.NewDense(m+len(p.Priors), n, nil)
	b := make([]float64, m+len(p.Priors))
	top := a.Slice(0, m, 0, n).(*mat.Dense)
	top.Copy(p.Design)
	copy(b, p.Y)
	switch {
	case p.Covariance != nil:
		var c mat.Cholesky
		if !c.Factorize(p.Covariance) {
			return nil, nil, errors.New("the covariance of the observations is not positive definite; a variance is missing or two observations are counted twice")
		}
		var l mat.TriDense
		c.LTo(&l)
		y := mat.NewVecDense(m, b[:m])
		if err := y.SolveVec(&l, y); err != nil {
			return nil, nil, fmt.Errorf("the covariance of the observations is nearly singular: %w", err)
		}
		if err := top.Solve(&l, top); err != nil {
			return nil, nil, fmt.Errorf("the covariance of the observations is nearly singular: %w", err)
		}
	case p.U != nil:
		for i, u := range p.U {
			b[i] /= u
			for j := range n {
				a.Set(i, j, a.At(i, j)/u)
			}
		}
	}
	for i, q := range p.Priors {
		a.Set(m+i, q.Column, 1/q.U)
		b[m+i] = q.Value / q.U
	}
	return a, b, nil
}

// U returns the standard uncertainty of unknown j from the Covariance.
func (s *Solution) U(j int) float64 { return math.Sqrt(s.Covariance.At(j, j)) }

// Correlation returns the correlation of unknowns i and j, -1..1.
func (s *Solution) Correlation(i, j int) float64 { return Correlation(s.Covariance, i, j) }

// ResidualSD returns sqrt(Chi2/DOF), in the observations' unit where no
// uncertainties were given, else a factor on them (Birge's ratio); 0 where
// DOF is 0.
func (s *Solution) ResidualSD() float64 { return residualSD(s.Chi2, s.DOF) }

// Scaled returns a copy whose Covariance is multiplied by Chi2/DOF: the
// uncertainty judged from the scatter alone. With DOF 0 it is unchanged.
func (s *Solution) Scaled() *Solution {
	t := *s
	t.Covariance = scaledCovariance(s.Covariance, s.Chi2, s.DOF)
	return &t
}

// PredictU returns the standard uncertainty of the linear combination g of
// the unknowns: sqrt(g^T Covariance g).
func (s *Solution) PredictU(g []float64) float64 { return PropagateU(s.Covariance, g) }

// PropagateU returns sqrt(g^T c g), the standard uncertainty of a quantity
// with sensitivities g (JCGM 100:2008, equation 13).
func PropagateU(c mat.Symmetric, g []float64) float64 {
	var s float64
	for i := range g {
		for j := range g {
			s += g[i] * c.At(i, j) * g[j]
		}
	}
	return math.Sqrt(max(s, 0))
}

// Correlation returns the correlation of i and j in covariance c; 0 where a
// variance is 0.
func Correlation(c mat.Symmetric, i, j int) float64 {
	d := c.At(i, i) * c.At(j, j)
	if !(d > 0) {
		return 0
	}
	return c.At(i, j) / math.Sqrt(d)
}

func residualSD(chi2 float64, dof int) float64 {
	if dof <= 0 {
		return 0
	}
	return math.Sqrt(chi2 / float64(dof))
}

func scaledCovariance(c *mat.SymDense, chi2 float64, dof int) *mat.SymDense {
	out := mat.NewSymDense(c.SymmetricDim(), nil)
	f := 1.0
	if dof > 0 {
		f = chi2 / float64(dof)
	}
	out.ScaleSym(f, c)
	return out
}
