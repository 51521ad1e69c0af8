package creep

import (
	"math"

	"gaugelog/analysis/lsq"

	"gonum.org/v1/gonum/mat"
)

// Value is a figure with its standard uncertainty in the same unit.
type Value struct{ Value, U float64 }

// gradient returns the law's sag for the changes at tH and its derivatives by
// the law's coefficients and, where there is one, the search coordinate.
func (f *Fit) gradient(tH float64, changes []Change) (sag float64, g []float64) {
	value, slope := f.fam.columns([]float64{tH}, changes, f.shape)
	var byShape float64
	for j, c := range f.linear {
		sag += c * value[j][0]
		byShape += c * slope[j][0]
		g = append(g, value[j][0])
	}
	if f.fam.shape != "" {
		g = append(g, byShape)
	}
	return sag, g
}

// At returns the law's sag of the creep gauge at tH under the whole load
// history, mm: load and creep alone.
func (f *Fit) At(tH float64) float64 {
	sag, _ := f.gradient(tH, f.changes)
	return sag
}

// U returns the standard uncertainty of At(tH), mm.
func (f *Fit) U(tH float64) float64 {
	_, g := f.gradient(tH, f.changes)
	return lsq.PropagateU(f.inner, g)
}

// Coverage returns the factor from u to half the 95 % interval.
func (f *Fit) Coverage() float64 { return lsq.Coverage95(f.DOF) }

// Band returns the 95 % limits of At(tH), mm.
func (f *Fit) Band(tH float64) (lo, hi float64) {
	sag, g := f.gradient(tH, f.changes)
	d := f.Coverage() * lsq.PropagateU(f.inner, g)
	return sag - d, sag + d
}

// J returns the law itself: sag per newton, mm/N, a time tH after a load is
// hung at once.
func (f *Fit) J(tH float64) Value {
	v, g := f.gradient(tH, []Change{{Newton: 1}})
	return Value{v, lsq.PropagateU(f.inner, g)}
}

// Equivalent returns the single-load equivalent J(tH)/J(initialH), the
// relative creep of a load hung at once.
func (f *Fit) Equivalent(tH, initialH float64) Value {
	a, ga := f.gradient(tH, []Change{{Newton: 1}})
	b, gb := f.gradient(initialH, []Change{{Newton: 1}})
	return f.ratio(a, ga, b, gb)
}

// ratio returns a/b with the uncertainty both have in common counted.
func (f *Fit) ratio(a float64, ga []float64, b float64, gb []float64) Value {
	g := make([]float64, len(ga))
	for i := range g {
		g[i] = (ga[i] - a/b*gb[i]) / b
	}
	return Value{a / b, lsq.PropagateU(f.inner, g)}
}

// Rate returns the law's rate of sag at tH, mm/d, by a central difference
// over a thousandth of the time since the last change. Changes that are not
// complete before tH do not count: at the instant of an unloading it is the
// rate just before.
func (f *Fit) Rate(tH float64) Value {
	last := math.Inf(-1)
	var before []Change
	for _, c := range f.changes {
		if e := c.AtH + c.RampH; e < tH {
			last = max(last, e)
			before = append(before, c)
		}
	}
	h := 1e-3 * (tH - last)
	if !(h > 0) || math.IsInf(h, 0) {
		h = 1e-3
	}
	a, ga := f.gradient(tH+h, before)
	b, gb := f.gradient(tH-h, before)
	for i := range ga {
		ga[i] = (ga[i] - gb[i]) / (2 * h) * 24
	}
	return Value{(a - b) / (2 * h) * 24, lsq.PropagateU(f.inner, ga)}
}

// parameters fills Parameters, Cov, Nuisance, Lags and the inner covariance.
func (f *Fit) parameters(known *Fit) {
	s, n := f.sys, len(f.fam.names)
	size := n + s.shapes()
	f.widening = f.shared
	cov, ownU := f.averagedCovariance(known)
	f.inner = mat.NewSymDense(size, nil)
	for a := range size {
		for b := a; b < size; b++ {
			f.inner.SetSym(a, b, f.shared*cov.At(a, b))
		}
	}
	f.lawParameters()
	for i := range s.parts {
		for j, x := range s.parts[i].extra {
			u := 0.0
			if ownU != nil {
				u = math.Sqrt(f.shared) * ownU[i][j]
			}
			if x.prior != nil {
				u = min(u, x.prior.U) // what was known stays known
			}
			f.Nuisance = append(f.Nuisance, Nuisance{Parameter: Parameter{Name: x.name, Value: f.sol.own[i][j], U: u, Unit: x.unit},
				Kind: x.kind.String(), Series: i, Ambient: x.ambient})
		}
	}
	_, lag := s.at(f.sol.q)
	for a := range s.in.Ambient {
		p := Parameter{Name: "lag of " + s.in.Ambient[a].Name, Value: math.Exp(lag[a]), Unit: "h"}
		for k, b := range s.searched {
			if c := s.shapes() + k; a == b && c < len(f.sol.q) {
				p.U, p.AtBound = p.Value*math.Sqrt(f.shared*cov.At(n+c, n+c)), f.sol.atBound[c]
			}
		}
		f.Lags = append(f.Lags, p)
	}
}

// averagedCovariance is the covariance of the law's coefficients and the
// search coordinates, averaged over the noises the readings allow, and the
// uncertainties of the series' own unknowns. Zeros where unidentifiable.
func (f *Fit) averagedCovariance(known *Fit) (*mat.SymDense, [][]float64) {
	s, n := f.sys, len(f.fam.names)
	out := mat.NewSymDense(n+max(len(f.sol.q), s.shapes()), nil)
	if f.sol.cov == nil { // Status and a Note say so
		return out, nil
	}
	if f.Model == KelvinChain {
		// Its smoothing is no likelihood: it takes the widening that another
		// family found.
		factor := (f.DOF + f.K) / f.DOF
		if known != nil {
			factor = max(known.widening/known.shared, 1)
			f.DOF = known.DOF
		}
		f.widening *= factor
		for a := range n {
			for b := a; b < n; b++ {
				out.SetSym(a, b, factor*f.sol.cov.At(a, b))
			}
		}
		u := copied(f.sol.ownU)
		for i := range u {
			for j := range u[i] {
				u[i][j] *= math.Sqrt(factor)
			}
		}
		return out, u
	}
	l, kept := s.linearise(f.sol)
	mean := s.average(l)
	if mean == nil {
		f.widening *= (f.DOF + f.K) / f.DOF
		scaled := mat.NewSymDense(out.SymmetricDim(), nil)
		scaled.ScaleSym((f.DOF+f.K)/f.DOF, f.sol.cov)
		return scaled, f.sol.ownU
	}
	f.widening *= mean.factor
	place := make([]int, 0, l.n)
	for j := range n {
		place = append(place, j)
	}
	for _, k := range kept {
		place = append(place, n+k)
	}
	for a, i := range place {
		for b := a; b < len(place); b++ {
			out.SetSym(i, place[b], mean.shared.At(a, b))
		}
	}
	return out, mean.own
}

// lawParameters turns coefficients and search coordinate into Parameters.
func (f *Fit) lawParameters() {
	n := len(f.fam.names)
	size := f.inner.SymmetricDim()
	factor := make([]float64, size)
	for j := range factor {
		factor[j] = 1
	}
	for j, name := range f.fam.names {
		f.Parameters = append(f.Parameters, Parameter{Name: name, Value: f.linear[j], Unit: f.fam.units[j], AtBound: f.sol.zero != nil && f.sol.zero[j]})
	}
	if f.fam.shape != "" {
		v := f.shape
		if f.fam.logShape {
			v = math.Exp(v)
			factor[n] = v
		}
		f.Parameters = append(f.Parameters, Parameter{Name: f.fam.shape, Value: v, Unit: f.fam.shapeUnit, AtBound: f.sol.atBound[0]})
	}
	f.Cov = mat.NewSymDense(size, nil)
	for a := range size {
		for b := a; b < size; b++ {
			f.Cov.SetSym(a, b, f.inner.At(a, b)*factor[a]*factor[b])
		}
		f.Parameters[a].U = math.Sqrt(f.Cov.At(a, a))
	}
	for i, tau := range f.fam.taus {
		f.Parameters = append(f.Parameters, Parameter{Name: "tau" + f.fam.names[i+1][1:], Value: tau, Unit: "h"})
	}
}

// compensate fills CompensatedMM: the reading less all that is neither load
// nor creep.
func (f *Fit) compensate() {
	s := f.sys
	for i := range s.parts {
		own, _ := s.columns(i, f.sol.q)
		out := append([]float64(nil), s.parts[i].SagMM...)
		for j, x := range s.parts[i].extra {
			if x.load == nil {
				subtract(out, own[j:j+1], f.sol.own[i][j:j+1])
			}
		}
		f.CompensatedMM = append(f.CompensatedMM, out)
	}
}

// between is the factor by which residuals that gauges have in common weaken
// a joint fit: 1 + (gauges - 1) times their mean correlation, at least 1.
func (s *system) between(residual [][]float64) float64 {
	g := len(residual)
	if g < 2 {
		return 1
	}
	var sum float64
	var pairs int
	for i := range g {
		for j := i + 1; j < g; j++ {
			c, ok := commonCorrelation(s.parts[i].TimeH, residual[i], s.parts[j].TimeH, residual[j])
			if ok {
				sum += c
				pairs++
			}
		}
	}
	if pairs == 0 {
		return 1
	}
	return 1 + float64(g-1)*max(sum/float64(pairs), 0)
}

// commonCorrelation correlates a with b read at a's times where both run.
func commonCorrelation(ta, a, tb, b []float64) (float64, bool) {
	if len(ta) < 8 || len(tb) < 8 {
		return 0, false
	}
	var aa, bb, ab float64
	for i, t := range ta {
		if t < tb[0] || t > tb[len(tb)-1] {
			continue
		}
		v := interpolate(tb, b, t)
		aa, bb, ab = aa+a[i]*a[i], bb+v*v, ab+a[i]*v
	}
	if aa == 0 || bb == 0 {
		return 0, false
	}
	return ab / math.Sqrt(aa*bb), true
}
