package steps

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"

	"gaugelog/analysis/lsq"
)

// Location returns the median of x and its standard uncertainty: 1.253 s/sqrt(n)
// with s the scaled median absolute deviation, and never less than the
// resolution's floor d/sqrt(12).
func Location(x []float64, resolution float64) Value {
	if len(x) == 0 {
		return Value{}
	}
	u := 1.253 * lsq.MADScale * lsq.MAD(x) / math.Sqrt(float64(len(x)))
	return Value{lsq.Median(x), max(u, floorU(resolution))}
}

func floorU(resolution float64) float64 { return resolution / math.Sqrt(12) }

// polyFit is a local polynomial in x, fitted by Huber-weighted least squares.
type polyFit struct {
	coef  []float64 // of powers of (x-centre)/scale
	cov   *mat.Dense
	c, s  float64
	sigma float64 // scatter of the residuals relative to u: 1 is as stated
}

// fitPoly fits a polynomial of the given degree to (x, y) with standard
// uncertainties u; ok is false where the points cannot carry it. The degree
// is lowered to what the number of points carries.
func fitPoly(x, y, u []float64, degree int) (polyFit, bool) {
	n := len(x)
	if n == 0 {
		return polyFit{}, false
	}
	degree = min(degree, n-1)
	lo, hi := slices.Min(x), slices.Max(x)
	p := polyFit{c: (lo + hi) / 2, s: max((hi-lo)/2, 1e-12)}
	if hi == lo {
		degree = 0
	}
	w := make([]float64, n)
	for i := range w {
		w[i] = 1
	}
	k := degree + 1
	for range 8 {
		a, b := mat.NewDense(n, k, nil), mat.NewVecDense(n, nil)
		for i := range x {
			f := math.Sqrt(w[i]) / u[i]
			t := (x[i] - p.c) / p.s
			v := f
			for j := range k {
				a.Set(i, j, v)
				v *= t
			}
			b.SetVec(i, y[i]*f)
		}
		var qr mat.QR
		qr.Factorize(a)
		var sol mat.VecDense
		if err := qr.SolveVecTo(&sol, false, b); err != nil {
			if k == 1 {
				return polyFit{}, false
			}
			k--
			continue
		}
		p.coef = sol.RawVector().Data
		p.cov = covariance(a)
		if n <= k+1 {
			break
		}
		r := make([]float64, n)
		for i := range x {
			r[i] = (y[i] - p.at(x[i])) / u[i]
		}
		abs := make([]float64, n)
		for i := range r {
			abs[i] = math.Abs(r[i])
		}
		p.sigma = lsq.MADScale * lsq.Median(abs) * math.Sqrt(float64(n)/float64(n-k))
		cut := lsq.HuberK * max(p.sigma, 1)
		change := 0.0
		for i := range r {
			next := 1.0
			if abs[i] > cut {
				next = cut / abs[i]
			}
			change = max(change, math.Abs(next-w[i]))
			w[i] = next
		}
		if change < 1e-3 {
			break
		}
	}
	return p, true
}

// covariance returns (A'A)^-1.
func covariance(a *mat.Dense) *mat.Dense {
	var ata, inv mat.Dense
	ata.Mul(a.T(), a)
	if err := inv.Inverse(&ata); err != nil {
		_, k := a.Dims()
		return mat.NewDense(k, k, nil)
	}
	return &inv
}

func (p polyFit) at(x float64) float64 {
	t := (x - p.c) / p.s
	v := 0.0
	for j := len(p.coef) - 1; j >= 0; j-- {
		v = v*t + p.coef[j]
	}
	return v
}

// u returns the standard uncertainty of the fit at x, widened by the scatter
// where that is larger than stated.
func (p polyFit) u(x float64) float64 {
	t := (x - p.c) / p.s
	k := len(p.coef)
	g := make([]float64, k)
	v := 1.0
	for j := range g {
		g[j] = v
		v *= t
	}
	sum := 0.0
	for i := range g {
		for j := range g {
			sum += g[i] * g[j] * p.cov.At(i, j)
		}
	}
	return math.Sqrt(max(sum, 0)) * max(1, p.sigma)
}

func hypot(x ...float64) float64 {
	s := 0.0
	for _, v := range x {
		s += v * v
	}
	return math.Sqrt(s)
}
