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
	f := family{model: KelvinChain, names: []string{"d0"}, units: []string{"mm/N"}, terms: []term{instant}}
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
// differences as far as cross-validation asks. It takes the lags as they were
// found before.
func (s *system) solveChain() (*solution, error) {
	lags := s.searched
	s.searched = nil
	defer func() { s.searched = lags }()
	law, n := len(s.fam.names), s.linear()
	var blocks []lsq.Reduced
	for i := range s.parts {
		blocks = append(blocks, s.block(i, nil).Reduce(law))
	}
	a, y := lsq.Compact(blocks, law)
	free := make([]bool, n)
	free[0] = true
	for j := law; j < n; j++ {
		free[j] = true
	}
	scale := mat.Norm(a.ColView(1), 2)
	var lambdas []float64
	for e := -4.0; e <= 1; e++ {
		lambdas = append(lambdas, scale*math.Pow(10, e))
	}
	p := lsq.NonNegative{Problem: lsq.Problem{Design: a, Y: y, Names: s.names()}, Free: free,
		Smooth: lsq.SecondDifference(n, 1, len(s.fam.taus)), Observations: s.rows()}
	x, err := p.SolveGCV(lambdas)
	if err != nil {
		return nil, err
	}
	s.fam.effective, s.fam.lambda = x.Effective, x.Lambda
	sol := &solution{law: x.X[:law], zero: x.Zero[:law], chi2: x.Chi2, cov: mat.NewSymDense(law, nil)}
	for i := range law {
		for j := i; j < law; j++ {
			sol.cov.SetSym(i, j, x.Covariance.At(i, j))
		}
	}
	at := law
	for i := range s.parts {
		k := len(s.parts[i].extra)
		sol.own = append(sol.own, x.X[at:at+k])
		u := make([]float64, k)
		for j := range u {
			u[j] = math.Sqrt(x.Covariance.At(at+j, at+j))
		}
		sol.ownU = append(sol.ownU, u)
		at += k
	}
	return sol, nil
}
