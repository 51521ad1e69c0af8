package lsq

import (
	"errors"
	"math"

	"gonum.org/v1/gonum/blas"
	"gonum.org/v1/gonum/mat"
)

// Separable is a problem that is linear but for a few parameters q: the
// observations are Design(q) times unknowns. Variable projection (Golub and
// Pereyra 1973; Kaufman's Jacobian, 1975) solves for the linear unknowns at
// every q, so that only q needs a search and a start.
type Separable struct {
	// Design writes the columns for q into a (rows observations).
	Design func(q []float64, a *mat.Dense)
	// Derivative writes the derivative of the columns by q[k] into d.
	Derivative func(q []float64, k int, d *mat.Dense)
	Columns    int
	Y          []float64
	U          []float64 // standard uncertainties of Y; nil: all 1
	// Lower and Upper bound q and must be finite where Starts is nil.
	Lower, Upper []float64
	// Starts are tried in turn and the best end kept. Nil: a grid within the
	// bounds, and for one parameter a safeguarded search over it.
	Starts [][]float64
	// Names of the linear unknowns, then of q.
	Names []string
	// Priors count columns likewise: linear unknowns, then q.
	Priors        []Prior
	MaxIterations int // 0 means 500
}

// projection is what one evaluation at q leaves behind.
type projection struct {
	p      *Separable
	a, d   *mat.Dense // whitened design with prior rows; derivative
	b      []float64
	linear []float64
	f      *factor
}

func newProjection(p *Separable) *projection {
	var own int
	for _, q := range p.Priors {
		if q.Column < p.Columns {
			own++
		}
	}
	m := len(p.Y) + own
	t := &projection{p: p, a: mat.NewDense(m, p.Columns, nil), d: mat.NewDense(len(p.Y), p.Columns, nil), b: make([]float64, m)}
	for i, y := range p.Y {
		t.b[i] = y / at(p.U, i)
	}
	row := len(p.Y)
	for _, q := range p.Priors {
		if q.Column < p.Columns {
			t.b[row] = q.Value / q.U
			row++
		}
	}
	return t
}

// solve projects at q: r gets fit less observation in units of u, priors of
// the linear unknowns below, then those of q.
func (t *projection) solve(q, r []float64, refine bool) bool {
	p, m := t.p, len(t.p.Y)
	t.a.Zero()
	p.Design(q, t.a.Slice(0, m, 0, p.Columns).(*mat.Dense))
	for i := range m {
		for j := range p.Columns {
			v := t.a.At(i, j) / at(p.U, i)
			if !finite(v) {
				return false
			}
			t.a.Set(i, j, v)
		}
	}
	row := m
	for _, prior := range p.Priors {
		if prior.Column < p.Columns {
			t.a.Set(row, prior.Column, 1/prior.U)
			row++
		}
	}
	t.f = newFactor(t.a)
	if _, err := t.f.check(nil); err != nil {
		return false
	}
	z := t.f.solve(t.b, refine)
	for i := range t.b {
		s := sum2{high: -t.b[i]}
		for j := range z {
			s.addProduct(t.f.a.At(i, j), z[j])
		}
		r[i] = s.value()
	}
	for j := range z {
		z[j] /= t.f.scale[j]
	}
	t.linear = z
	for _, prior := range p.Priors {
		if prior.Column >= p.Columns {
			r[row] = (q[prior.Column-p.Columns] - prior.Value) / prior.U
			row++
		}
	}
	return allFinite(r)
}

// tangent writes the derivative of the fit by q[k] at fixed linear unknowns,
// in units of u, into col.
func (t *projection) tangent(q []float64, k int, col []float64) {
	t.p.Derivative(q, k, t.d)
	clear(col)
	for i := range t.p.Y {
		var s float64
		for j, c := range t.linear {
			s += t.d.At(i, j) * c
		}
		col[i] = s / at(t.p.U, i)
	}
}

// jacobian writes Kaufman's Jacobian: tangents less their part within the
// span of the design.
func (t *projection) jacobian(q []float64, j *mat.Dense) {
	j.Zero()
	col := make([]float64, len(t.b))
	for k := range q {
		t.tangent(q, k, col)
		t.f.apply(blas.Trans, col)
		clear(col[:t.p.Columns])
		t.f.apply(blas.NoTrans, col)
		for i, v := range col {
			j.Set(i, k, v)
		}
	}
	t.priorRows(j, 0)
}

// priorRows sets the rows of the priors of q, whose columns begin at first.
func (t *projection) priorRows(j *mat.Dense, first int) {
	row := len(t.b)
	for _, prior := range t.p.Priors {
		if prior.Column >= t.p.Columns {
			j.Set(row, first+prior.Column-t.p.Columns, 1/prior.U)
			row++
		}
	}
}

// Fit solves the problem. The covariance is that of all unknowns jointly.
// Errors are those of shapes and numbers, and a design that no q within the
// bounds makes of full rank; else the Status tells.
func (p Separable) Fit() (*NonlinearSolution, error) {
	nq := max(len(p.Lower), len(p.Upper))
	if nq == 0 && len(p.Starts) > 0 {
		nq = len(p.Starts[0])
	}
	if p.Design == nil || p.Derivative == nil || nq == 0 || p.Columns == 0 {
		return nil, errors.New("a separable fit needs Design, Derivative, Columns, and bounds or starts")
	}
	if err := validateSearch(p.Y, p.U, p.Lower, p.Upper, p.Priors, nq, p.Columns+nq); err != nil {
		return nil, err
	}
	t := newProjection(&p)
	m := len(p.Y) + len(p.Priors)
	starts := p.Starts
	if starts == nil {
		starts = p.grid(t, nq, m)
	}
	var best *search
	var status Status
	for _, q := range starts {
		s := &search{m: m, lower: p.Lower, upper: p.Upper, limit: p.MaxIterations}
		if s.limit == 0 {
			s.limit = 500
		}
		s.residual = func(q, r []float64) bool { return t.solve(q, r, false) }
		s.jacobian = func(q []float64, j *mat.Dense) {
			t.solve(q, make([]float64, m), true)
			t.jacobian(q, j)
		}
		end := s.run(q)
		if best == nil || s.chi2 < best.chi2*(1-1e-12) {
			best, status = s, end
		}
	}
	if best == nil || !finite(best.chi2) {
		return nil, &RankError{Names: pick(p.Names, counting(p.Columns)), Columns: counting(p.Columns), Rank: p.Columns - 1, Of: p.Columns}
	}
	return p.finish(t, best, status), nil
}

// finish works out the full covariance at the best point.
func (p Separable) finish(t *projection, s *search, status Status) *NonlinearSolution {
	nq := len(s.p)
	t.solve(s.p, s.r, true)
	out := &NonlinearSolution{P: append(append([]float64(nil), t.linear...), s.p...), Chi2: dot(s.r, s.r),
		DOF: s.m - p.Columns - nq, Iterations: s.taken, Status: status, AtBound: make([]bool, p.Columns+nq)}
	out.Fitted, out.Residuals = make([]float64, len(p.Y)), make([]float64, len(p.Y))
	for i, y := range p.Y {
		out.Residuals[i] = -s.r[i] * at(p.U, i)
		out.Fitted[i] = y - out.Residuals[i]
	}
	j := mat.NewDense(s.m, p.Columns+nq, nil)
	j.Slice(0, len(t.b), 0, p.Columns).(*mat.Dense).Copy(t.a)
	col := make([]float64, len(t.b))
	for k := range nq {
		t.tangent(s.p, k, col)
		for i, v := range col {
			j.Set(i, p.Columns+k, v)
		}
		out.AtBound[p.Columns+k] = s.bound(k)
	}
	t.priorRows(j, p.Columns)
	out.uncertainty(j, p.Names)
	return out
}

// grid returns starts within the bounds: for one parameter the end of a
// safeguarded search, else the best three of a regular grid.
func (p Separable) grid(t *projection, nq, m int) [][]float64 {
	r := make([]float64, m)
	cost := func(q []float64) float64 {
		if !t.solve(q, r, false) {
			return math.Inf(1)
		}
		return dot(r, r)
	}
	if nq == 1 {
		x := Minimize(func(x float64) float64 { return cost([]float64{x}) }, p.Lower[0], p.Upper[0], 24, 1e-4)
		return [][]float64{{x}}
	}
	const side = 5
	var best [3][]float64
	var value [3]float64
	total := int(math.Pow(side, float64(nq)))
	for g := range total {
		q, rest := make([]float64, nq), g
		for k := range q {
			q[k] = p.Lower[k] + (p.Upper[k]-p.Lower[k])*(float64(rest%side)+0.5)/side
			rest /= side
		}
		c := cost(q)
		for i := range best {
			if best[i] == nil || c < value[i] {
				copy(best[i+1:], best[i:])
				copy(value[i+1:], value[i:])
				best[i], value[i] = q, c
				break
			}
		}
	}
	var out [][]float64
	for _, q := range best {
		if q != nil {
			out = append(out, q)
		}
	}
	return out
}

func counting(n int) []int {
	c := make([]int, n)
	for i := range c {
		c[i] = i
	}
	return c
}
