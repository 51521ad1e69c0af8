package lsq

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// Coverage95 returns the two-sided 95 % coverage factor of Student's t with
// dof degrees of freedom (not necessarily whole; JCGM 100:2008, annex G).
// Below 1 it is taken at 1 (12.7), above 1e6 it is the normal's 1.96.
func Coverage95(dof float64) float64 {
	if !(dof <= 1e6) {
		return 1.959963984540054
	}
	return distuv.StudentsT{Mu: 0, Sigma: 1, Nu: max(dof, 1)}.Quantile(0.975)
}

// Chi2P returns the probability that chi-squared with dof degrees of freedom
// is chi2 or greater: small means the model or the stated uncertainties do
// not hold. It is 1 where dof is 0.
func Chi2P(chi2 float64, dof int) float64 {
	if dof <= 0 {
		return 1
	}
	p := 1 - distuv.ChiSquared{K: float64(dof)}.CDF(chi2)
	if math.IsNaN(p) {
		return 0
	}
	return min(max(p, 0), 1)
}
