package lsq

import (
	"errors"
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"
)

// MADScale turns a median absolute deviation into the standard deviation of a
// normal distribution: 1/Phi^-1(3/4).
const MADScale = 1.482602218505602

// HuberK is Huber's limit, in standard deviations, beyond which a residual
// counts by its size only: 95 % efficient where errors are normal.
const HuberK = 1.345

// Median returns the median of v (not changed); 0 for none.
func Median(v []float64) float64 {
	if len(v) == 0 {
		return 0
	}
	s := slices.Clone(v)
	slices.Sort(s)
	h := len(s) / 2
	if len(s)%2 == 1 {
		return s[h]
	}
	return s[h-1] + (s[h]-s[h-1])/2
}

// MAD returns the median absolute deviation of v about its median, unscaled.
func MAD(v []float64) float64 {
	c := Median(v)
	d := make([]float64, len(v))
	for i, x := range v {
		d[i] = math.Abs(x - c)
	}
	return Median(d)
}

// Line is a robust straight line with an interval for its slope.
type Line struct {
	Slope, Intercept float64 // intercept: median(y) - slope*median(x)
	// Low and High are the limits of the slope at the confidence asked for.
	Low, High float64
}

// TheilSen returns the line whose slope is the median of all pairs' slopes
// (Theil 1950) with Sen's interval from the variance of Kendall's S (Sen,
// J. Am. Stat. Assoc. 63, 1968), no ties assumed in y. z is the two-sided
// normal quantile, 1.96 for 95 %. Work grows with the square of len(x).
func TheilSen(x, y []float64, z float64) (Line, error) {
	if len(x) != len(y) || len(x) < 2 {
		return Line{}, errors.New("a line needs two or more points, as many x as y")
	}
	var slopes []float64
	for i := range x {
		for j := i + 1; j < len(x); j++ {
			if x[i] != x[j] {
				slopes = append(slopes, (y[j]-y[i])/(x[j]-x[i]))
			}
		}
	}
	if len(slopes) == 0 {
		return Line{}, errors.New("a line needs two points at different x")
	}
	slices.Sort(slopes)
	n := float64(len(x))
	sigma := z * math.Sqrt(n*(n-1)*(2*n+5)/18)
	count := float64(len(slopes))
	low := int(math.RoundToEven((count-sigma)/2)) - 1
	high := int(math.RoundToEven((count + sigma) / 2))
	l := Line{Slope: Median(slopes), Low: slopes[max(low, 0)], High: slopes[min(high, len(slopes)-1)]}
	l.Intercept = Median(y) - l.Slope*Median(x)
	return l, nil
}

// HuberLocation returns Huber's M-estimate of location with limit k in units
// of scale (Huber, Robust Statistics, 1981), started at the median. With
// scale 0 it is the median.
func HuberLocation(v []float64, k, scale float64) float64 {
	mu := Median(v)
	if !(scale > 0) || len(v) == 0 {
		return mu
	}
	for range 500 {
		var s float64
		for _, x := range v {
			s += min(max(x, mu-k*scale), mu+k*scale)
		}
		next := s / float64(len(v))
		if math.Abs(next-mu) <= 1e-14*(math.Abs(mu)+scale) {
			return next
		}
		mu = next
	}
	return mu
}

// Huber solves p by iteratively reweighted least squares with Huber's weights
// (k = HuberK) and the scale from the MAD of the residuals, and returns the
// last solution and each observation's weight, 1 where it counts in full.
// Only independent observations: p.Covariance must be nil. The covariance is
// the weighted fit's, which is slightly too small; use it with Scaled.
func Huber(p Problem) (*Solution, []float64, error) {
	if p.Covariance != nil {
		return nil, nil, errors.New("a robust fit takes independent observations; give their uncertainties, not a covariance")
	}
	s, err := Solve(p)
	if err != nil {
		return nil, nil, err
	}
	w := make([]float64, len(p.Y))
	for i := range w {
		w[i] = 1
	}
	white := make([]float64, len(p.Y))
	for range 100 {
		for i, r := range s.Residuals {
			white[i] = r / at(p.U, i)
		}
		scale := MADScale * MAD(white)
		if scale == 0 {
			return s, w, nil
		}
		q := p
		q.U = make([]float64, len(p.Y))
		for i := range white {
			w[i] = 1
			if t := math.Abs(white[i]) / scale; t > HuberK {
				w[i] = HuberK / t
			}
			q.U[i] = at(p.U, i) / math.Sqrt(w[i])
		}
		next, err := Solve(q)
		if err != nil {
			return nil, nil, err
		}
		change := 0.0
		for j := range next.X {
			change = max(change, math.Abs(next.X[j]-s.X[j])/(math.Sqrt(next.Covariance.At(j, j))+1e-300))
		}
		s = next
		if change < 1e-9*scale {
			break
		}
	}
	return s, w, nil
}

// Polynomial returns a design of columns 1, x, ... x^degree.
func Polynomial(x []float64, degree int) *mat.Dense {
	a := mat.NewDense(len(x), degree+1, nil)
	for i, v := range x {
		t := 1.0
		for j := range degree + 1 {
			a.Set(i, j, t)
			t *= v
		}
	}
	return a
}
