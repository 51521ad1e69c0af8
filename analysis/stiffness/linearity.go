package stiffness

import (
	"math"

	"gaugelog/analysis/lsq"

	"gonum.org/v1/gonum/mat"
)

// unlikely is how many of its own standard uncertainties a departure must
// measure before it is spoken of.
const unlikely = 3

// departures looks for two ways in which a beam is not straight and linear
// from the first newton on, each as one more column beside the fitted ones:
// a first increment out of proportion (the beam seating itself), and sag that
// grows faster or slower than the load.
func (e *Estimate) departures() {
	f := e.fit
	y, _, err := f.m.evaluate(f.st, f.theta)
	if err != nil || f.m.rigid {
		return
	}
	first, level := -1, make([]float64, len(f.m.changes))
	sum, top := 0.0, 0.0
	for k := range level {
		d := f.m.totalOf(k)
		level[k] = sum + d/2 // half-way up this change
		sum += d
		top = math.Max(top, math.Abs(sum))
		if first < 0 && d != 0 {
			first = k
		}
	}
	if top == 0 {
		return
	}
	seat, su := f.extra(y, func(r int) float64 {
		if f.m.rows[r].step == first {
			return y[r]
		}
		return 0
	})
	bow, bu := f.extra(y, func(r int) float64 { return y[r] * 2 * level[f.m.rows[r].step] / top })
	seated := math.Abs(seat) > unlikely*su && math.Abs(seat) > 0.01
	bowed := math.Abs(bow) > unlikely*bu && math.Abs(bow) > 0.01
	switch {
	case seated && (!bowed || math.Abs(seat)/su > math.Abs(bow)/bu):
		e.warn("seating", "", "the first load moved the beam %.1f %% more than its share (u %.1f %%): it may have been seating itself; preload once and read again", 100*seat, 100*su)
	case bowed:
		e.warn("not-linear", "", "the sag per newton changes by %.1f %% (u %.1f %%) from no load to the greatest: look for rocking, lifting off, crushing or a load beyond the linear range", 200*bow, 200*bu)
	}
}

// extra fits one more column to what is left of the readings; both are 0
// where there is not the freedom for it.
func (f *fitted) extra(y []float64, column func(r int) float64) (v, u float64) {
	n, k := f.x.Dims()
	if f.sol.DOF < 2 {
		return 0, 0
	}
	x := mat.NewDense(n, k+1, nil)
	x.Slice(0, n, 0, k).(*mat.Dense).Copy(f.x)
	res := make([]float64, n)
	for r := range res {
		x.Set(r, k, column(r))
		res[r] = f.m.rows[r].mm - y[r]
		for j, t := range f.theta {
			res[r] += f.x.At(r, j) * t
		}
	}
	s, err := lsq.Solve(lsq.Problem{Design: x, Y: res, Covariance: f.cov, Priors: f.priors()})
	if err != nil {
		return 0, 0
	}
	return s.X[k], s.U(k)
}
