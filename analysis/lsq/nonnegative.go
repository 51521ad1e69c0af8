package lsq

import (
	"errors"
	"math"

	"gonum.org/v1/gonum/mat"
)

// NonNegative is a linear problem some of whose unknowns must not be
// negative, with an optional smoothing (Tikhonov) term.
type NonNegative struct {
	Problem
	// Free marks the unknowns that may have either sign; nil: none.
	Free []bool
	// Smooth holds rows that, times the unknowns, ought to be small; they are
	// appended to the whitened design times Lambda. Nil: no smoothing.
	Smooth *mat.Dense
	Lambda float64
	// Observations is their number where Design and Y were reduced from more
	// (see Compact), for the cross-validation; 0: the rows of Design.
	Observations int
}

// NonNegativeSolution is the answer to a NonNegative.
type NonNegativeSolution struct {
	Solution
	// Zero marks the unknowns held at 0 by their sign. They have a row of
	// zeros in Covariance, which holds with them fixed there.
	Zero []bool
	// Effective is the number of parameters the fit really used: the trace of
	// the matrix that turns observations into fit.
	Effective float64
	// GCV is the generalised cross-validation score, smaller is better.
	GCV float64
	// Lambda is the smoothing used.
	Lambda float64
}

// Solve follows the active-set method of Lawson and Hanson, Solving Least
// Squares Problems (1974), chapter 23, on QR factors. With smoothing, the
// Covariance is that of the smoothed problem, the smoothing taken as prior
// knowledge. Errors are those of the function Solve; columns that cannot be
// told apart are an error only where both are free, else one is held at 0.
func (p NonNegative) Solve() (*NonNegativeSolution, error) {
	if err := p.validate(); err != nil {
		return nil, err
	}
	a, b, err := p.whiten()
	if err != nil {
		return nil, err
	}
	return p.solveWhite(a, b)
}

// SolveGCV solves for each lambda and returns the solution of least
// generalised cross-validation score (Golub, Heath and Wahba 1979).
func (p NonNegative) SolveGCV(lambdas []float64) (*NonNegativeSolution, error) {
	if p.Smooth == nil || len(lambdas) == 0 {
		return nil, errors.New("cross-validation needs a smoothing matrix and lambdas to try")
	}
	if err := p.validate(); err != nil {
		return nil, err
	}
	a, b, err := p.whiten()
	if err != nil {
		return nil, err
	}
	var best *NonNegativeSolution
	for _, l := range lambdas {
		p.Lambda = l
		s, err := p.solveWhite(a, b)
		if err != nil {
			return nil, err
		}
		if best == nil || s.GCV < best.GCV {
			best = s
		}
	}
	return best, nil
}

func (p NonNegative) solveWhite(a *mat.Dense, b []float64) (*NonNegativeSolution, error) {
	m, n := a.Dims()
	full, rhs := a, b
	if p.Smooth != nil && p.Lambda > 0 {
		k, _ := p.Smooth.Dims()
		full = mat.NewDense(m+k, n, nil)
		full.Slice(0, m, 0, n).(*mat.Dense).Copy(a)
		lower := full.Slice(m, m+k, 0, n).(*mat.Dense)
		lower.Scale(p.Lambda, p.Smooth)
		rhs = append(append([]float64(nil), b...), make([]float64, k)...)
	}
	set := newActiveSet(full, rhs, p.Free)
	if err := set.run(p.Names); err != nil {
		return nil, err
	}
	s := &NonNegativeSolution{Zero: make([]bool, n), Lambda: p.Lambda}
	s.X = set.x
	for j := range n {
		s.Zero[j] = !set.passive[j]
	}
	s.Chi2 = distance2(a, b, s.X)
	s.Fitted, s.Residuals = p.residuals(s.X)
	s.Covariance = mat.NewSymDense(n, nil)
	cols := set.columns()
	if len(cols) > 0 {
		f := newFactor(columns(full, cols))
		cond, err := f.check(pick(p.Names, cols))
		if err != nil {
			return nil, err
		}
		s.Condition = cond
		c := f.covariance()
		for i, ci := range cols {
			for j, cj := range cols {
				if j >= i {
					s.Covariance.SetSym(ci, cj, c.At(i, j))
				}
			}
		}
		s.Effective = trace(a, s.Covariance)
	}
	s.DOF = m - len(cols)
	count := float64(m)
	if p.Observations > 0 {
		count = float64(p.Observations)
	}
	left := count - s.Effective
	s.GCV = math.MaxFloat64
	if left > 1e-9 {
		s.GCV = count * s.Chi2 / (left * left)
	}
	return s, nil
}

// trace returns the trace of a c a^T.
func trace(a *mat.Dense, c *mat.SymDense) float64 {
	var ac mat.Dense
	ac.Mul(a, c)
	m, n := a.Dims()
	var t float64
	for i := range m {
		for j := range n {
			t += ac.At(i, j) * a.At(i, j)
		}
	}
	return t
}

func distance2(a *mat.Dense, b, x []float64) float64 {
	var total float64
	for i := range b {
		s := sum2{high: b[i]}
		for j, v := range x {
			s.addProduct(-a.At(i, j), v)
		}
		r := s.value()
		total += r * r
	}
	return total
}

// activeSet is the state of the Lawson–Hanson method.
type activeSet struct {
	a       *mat.Dense
	b, x    []float64
	free    []bool
	passive []bool
	barred  []bool // tried and found to depend on the passive ones
}

func newActiveSet(a *mat.Dense, b []float64, free []bool) *activeSet {
	_, n := a.Dims()
	s := &activeSet{a: a, b: b, x: make([]float64, n), free: make([]bool, n), passive: make([]bool, n), barred: make([]bool, n)}
	copy(s.free, free)
	copy(s.passive, s.free)
	return s
}

func (s *activeSet) columns() []int {
	var c []int
	for j, p := range s.passive {
		if p {
			c = append(c, j)
		}
	}
	return c
}

func columns(a *mat.Dense, cols []int) *mat.Dense {
	m, _ := a.Dims()
	out := mat.NewDense(m, len(cols), nil)
	for k, c := range cols {
		for i := range m {
			out.Set(i, k, a.At(i, c))
		}
	}
	return out
}

// run enters unknowns one by one, always the one that lowers the misfit most,
// and drops those that would turn negative.
func (s *activeSet) run(names []string) error {
	if cols := s.columns(); len(cols) > 0 {
		z, err := s.passiveSolution(names)
		if err != nil {
			return err
		}
		copy(s.x, z)
	}
	for range 30 * len(s.x) {
		enter := s.best()
		if enter < 0 {
			return nil
		}
		s.passive[enter] = true
		z, err := s.passiveSolution(names)
		if errors.Is(err, ErrRank) || err == nil && z[enter] <= 0 {
			s.passive[enter], s.barred[enter] = false, true
			continue
		}
		if err != nil {
			return err
		}
		if err := s.retreat(z, names); err != nil {
			return err
		}
		clear(s.barred)
	}
	return errors.New("the non-negative fit did not settle; its columns are nearly dependent")
}

// retreat walks from x towards z as far as signs allow, dropping unknowns
// that reach 0, until the passive solution itself is allowed.
func (s *activeSet) retreat(z []float64, names []string) error {
	for {
		step, any := 1.0, false
		for j := range s.x {
			if s.passive[j] && !s.free[j] && z[j] <= 0 {
				any = true
				if d := s.x[j] - z[j]; d > 0 {
					step = min(step, s.x[j]/d)
				} else {
					step = 0
				}
			}
		}
		if !any {
			copy(s.x, z)
			return nil
		}
		for j := range s.x {
			if !s.passive[j] {
				continue
			}
			s.x[j] += step * (z[j] - s.x[j])
			if !s.free[j] && z[j] <= 0 && s.x[j] <= 1e-14*math.Abs(z[j])+1e-300 {
				s.x[j], s.passive[j] = 0, false
			}
		}
		var err error
		if z, err = s.passiveSolution(names); err != nil {
			return err
		}
	}
}

// best returns the unknown at 0 whose growth lowers the misfit most per
// length of its column, or -1.
func (s *activeSet) best() int {
	m, n := s.a.Dims()
	r := make([]float64, m)
	var size float64
	for i := range m {
		t := sum2{high: s.b[i]}
		for j, v := range s.x {
			t.addProduct(-s.a.At(i, j), v)
		}
		r[i] = t.value()
		size += s.b[i] * s.b[i]
	}
	enter, most := -1, 1e-13*math.Sqrt(size)
	for j := range n {
		if s.passive[j] || s.barred[j] {
			continue
		}
		length := mat.Norm(s.a.ColView(j), 2)
		if length == 0 {
			continue
		}
		if w := mat.Dot(s.a.ColView(j), mat.NewVecDense(m, r)) / length; w > most {
			enter, most = j, w
		}
	}
	return enter
}

// passiveSolution solves for the passive unknowns alone.
func (s *activeSet) passiveSolution(names []string) ([]float64, error) {
	z := make([]float64, len(s.x))
	cols := s.columns()
	if len(cols) == 0 {
		return z, nil
	}
	if m, _ := s.a.Dims(); m < len(cols) {
		return nil, &RankError{Columns: cols, Names: pick(names, cols), Rank: m, Of: len(cols)}
	}
	f := newFactor(columns(s.a, cols))
	if !f.plainlyRegular() {
		if _, err := f.check(pick(names, cols)); err != nil {
			return nil, err
		}
	}
	y := f.solve(s.b, false)
	for k, c := range cols {
		z[c] = y[k] / f.scale[k]
	}
	return z, nil
}

// SecondDifference returns the rows that a smoothing of unknowns first to
// first+count-1, out of n, by second differences needs (count-2 rows).
func SecondDifference(n, first, count int) *mat.Dense {
	if count < 3 || first < 0 || first+count > n {
		panic("lsq: second differences need at least three unknowns within the problem")
	}
	d := mat.NewDense(count-2, n, nil)
	for i := range count - 2 {
		d.Set(i, first+i, 1)
		d.Set(i, first+i+1, -2)
		d.Set(i, first+i+2, 1)
	}
	return d
}
