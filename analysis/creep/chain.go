package creep

import (
	"fmt"
	"math"

	"gaugelog/analysis/lsq"

	"gonum.org/v1/gonum/mat"
)

// chainFamily is a Kelvin chain with one element per decade or a little
// more, from a third of the first time read to three times the last.
func chainFamily(tMin, tMax float64) family {
	f := family{model: KelvinChain, names: []string{"d0"}, units: []string{"mm/N"}, terms: []response{instant}}
	lo, hi := math.Log10(0.3*tMin), math.Log10(3*tMax)
	n := max(int(math.Ceil((hi-lo)*1.2))+1, 3)
	for i := range n {
		f.taus = append(f.taus, math.Pow(10, lo+(hi-lo)*float64(i)/float64(n-1)))
		f.names = append(f.names, fmt.Sprintf("d%d", i+1))
		f.units = append(f.units, "mm/N")
		f.terms = append(f.terms, exponential)
	}
	return f
}

// solveChain fits a chain: none of its elements negative, smoothed by second
// differences as far as cross-validation asks.
func (s *system) solveChain() (*lsq.NonlinearSolution, error) {
	lags := s.searched
	s.searched = nil // a chain takes the lags as they were found before
	defer func() { s.searched = lags }()
	a := mat.NewDense(len(s.y), s.columns(), nil)
	s.design(nil, a)
	s.whiten(a)
	free := make([]bool, s.columns())
	for j := len(s.fam.names); j < len(free); j++ {
		free[j] = true
	}
	free[0] = true
	scale := mat.Norm(a.ColView(1), 2)
	var lambdas []float64
	for e := -4.0; e <= 1; e++ {
		lambdas = append(lambdas, scale*math.Pow(10, e))
	}
	p := lsq.NonNegative{Problem: lsq.Problem{Design: a, Y: s.whiteY(), Names: s.names(), Priors: s.priors()},
		Free: free, Smooth: lsq.SecondDifference(s.columns(), 1, len(s.fam.taus))}
	sol, err := p.SolveGCV(lambdas)
	if err != nil {
		return nil, err
	}
	s.fam.effective = sol.Effective
	return &lsq.NonlinearSolution{P: sol.X, Covariance: sol.Covariance, Chi2: sol.Chi2, DOF: sol.DOF,
		Condition: sol.Condition, AtBound: sol.Zero, Residuals: sol.Residuals, Fitted: sol.Fitted}, nil
}
