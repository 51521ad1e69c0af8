package lsq

import (
	"errors"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"github.com/google/go-cmp/cmp"
	"gonum.org/v1/gonum/diff/fd"
	"gonum.org/v1/gonum/mat"
	"pgregory.net/rapid"
)

// Generalised least squares with a full covariance must equal ordinary least
// squares where the covariance is diagonal, and the textbook formula
// (A^T V^-1 A)^-1 A^T V^-1 y where it is not.
func TestFullCovariance(t *testing.T) {
	x := []float64{0, 1, 2, 3, 4, 5}
	y := []float64{1.1, 2.9, 5.2, 7.1, 8.8, 11.3}
	v := mat.NewSymDense(6, nil)
	for i := range 6 {
		for j := i; j < 6; j++ {
			v.SetSym(i, j, 0.04*math.Pow(0.6, float64(j-i)))
		}
	}
	a := Polynomial(x, 1)
	s, err := Solve(Problem{Design: a, Y: y, Covariance: v})
	if err != nil {
		t.Fatal(err)
	}
	var vi, av, n, c, rhs, want mat.Dense
	if err := vi.Inverse(v); err != nil {
		t.Fatal(err)
	}
	av.Mul(a.T(), &vi)
	n.Mul(&av, a)
	if err := c.Inverse(&n); err != nil {
		t.Fatal(err)
	}
	rhs.Mul(&av, mat.NewDense(6, 1, slices.Clone(y)))
	want.Mul(&c, &rhs)
	for i := range 2 {
		if d := digits(s.X[i], want.At(i, 0)); d < 11 {
			t.Errorf("unknown %d: %g, want %g", i, s.X[i], want.At(i, 0))
		}
		for j := range 2 {
			if d := digits(s.Covariance.At(i, j), c.At(i, j)); d < 11 {
				t.Errorf("covariance %d %d: %g, want %g", i, j, s.Covariance.At(i, j), c.At(i, j))
			}
		}
	}
}

func TestPriorCountsAsObservation(t *testing.T) {
	// One reading 3 with u 1 and a prior 1 with u 1: mean 2, u 1/sqrt 2.
	s, err := Solve(Problem{Design: mat.NewDense(1, 1, []float64{1}), Y: []float64{3}, U: []float64{1}, Priors: []Prior{{Value: 1, U: 1}}})
	if err != nil {
		t.Fatal(err)
	}
	if math.Abs(s.X[0]-2) > 1e-15 || math.Abs(s.U(0)-math.Sqrt2/2) > 1e-15 || s.DOF != 1 || math.Abs(s.Chi2-2) > 1e-14 {
		t.Errorf("got %v u %v dof %d chi2 %v", s.X, s.U(0), s.DOF, s.Chi2)
	}
}

func TestRankDeficiencyNamesColumns(t *testing.T) {
	a := mat.NewDense(5, 4, nil)
	for i := range 5 {
		x := float64(i)
		a.SetRow(i, []float64{1, x, 3*x - 2, x * x})
	}
	_, err := Solve(Problem{Design: a, Y: make([]float64, 5), Names: []string{"offset", "drift", "temperature", "bow"}})
	var rank *RankError
	if !errors.As(err, &rank) || !errors.Is(err, ErrRank) {
		t.Fatalf("got %v, want a rank error", err)
	}
	if d := cmp.Diff([]string{"offset", "drift", "temperature"}, rank.Names); d != "" {
		t.Error(d)
	}
	if rank.Rank != 3 || rank.Of != 4 {
		t.Errorf("rank %d of %d", rank.Rank, rank.Of)
	}
}

func TestBadInputIsAnError(t *testing.T) {
	one := mat.NewDense(2, 1, []float64{1, 1})
	bad := mat.NewSymDense(2, []float64{1, 1, 1, 1})
	for name, p := range map[string]Problem{
		"no design":        {Y: []float64{1}},
		"lengths":          {Design: one, Y: []float64{1}},
		"NaN":              {Design: one, Y: []float64{1, math.NaN()}},
		"infinite design":  {Design: mat.NewDense(2, 1, []float64{1, math.Inf(1)}), Y: []float64{1, 1}},
		"zero uncertainty": {Design: one, Y: []float64{1, 1}, U: []float64{1, 0}},
		"singular":         {Design: one, Y: []float64{1, 1}, Covariance: bad},
		"too few":          {Design: mat.NewDense(1, 2, []float64{1, 2}), Y: []float64{1}},
		"prior":            {Design: one, Y: []float64{1, 1}, Priors: []Prior{{Column: 1, U: 1}}},
		"prior's u":        {Design: one, Y: []float64{1, 1}, Priors: []Prior{{Column: 0}}},
	} {
		if s, err := Solve(p); err == nil {
			t.Errorf("%s: no error, got %v", name, s.X)
		}
	}
}

// At the constrained minimum the gradient is 0 where x > 0 and does not pull
// below 0 elsewhere (Karush, Kuhn and Tucker).
func TestNonNegativeIsOptimal(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		m, n := rapid.IntRange(4, 12).Draw(t, "m"), rapid.IntRange(1, 6).Draw(t, "n")
		m = max(m, n)
		value := rapid.Float64Range(-3, 3)
		a, b := mat.NewDense(m, n, nil), make([]float64, m)
		for i := range m {
			b[i] = value.Draw(t, "b")
			for j := range n {
				a.Set(i, j, value.Draw(t, "a"))
			}
		}
		free := make([]bool, n)
		free[0] = rapid.Bool().Draw(t, "free")
		s, err := NonNegative{Problem: Problem{Design: a, Y: b}, Free: free}.Solve()
		if err != nil {
			if errors.Is(err, ErrRank) {
				return
			}
			t.Fatal(err)
		}
		for j := range n {
			g := mat.Dot(a.ColView(j), mat.NewVecDense(m, s.Residuals))
			length := mat.Norm(a.ColView(j), 2)
			switch {
			case !free[j] && s.X[j] < 0:
				t.Fatalf("unknown %d is %g", j, s.X[j])
			case (free[j] || s.X[j] > 0) && math.Abs(g) > 1e-6*length*(1+math.Sqrt(s.Chi2))*(1+s.Condition*1e-6):
				t.Fatalf("gradient of unknown %d is %g", j, g)
			case s.Zero[j] && g > 1e-6*length*(1+math.Sqrt(s.Chi2)) && s.Condition < 1e10:
				t.Fatalf("unknown %d is held at 0 though it pulls by %g", j, g)
			}
		}
	})
}

func TestSmoothing(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 2))
	n := 15
	a := mat.NewDense(60, n, nil)
	y := make([]float64, 60)
	for i := range 60 {
		for j := range n {
			v := 1 - math.Exp(-float64(i)/math.Pow(1.5, float64(j)))
			a.Set(i, j, v)
			y[i] += v * math.Exp(-math.Pow(float64(j-7)/4, 2))
		}
		y[i] += 0.01 * rng.NormFloat64()
	}
	p := NonNegative{Problem: Problem{Design: a, Y: y}, Smooth: SecondDifference(n, 0, n)}
	rough, err := p.Solve()
	if err != nil {
		t.Fatal(err)
	}
	smooth, err := p.SolveGCV([]float64{1e-4, 1e-3, 1e-2, 1e-1, 1, 10})
	if err != nil {
		t.Fatal(err)
	}
	if !(smooth.GCV < rough.GCV) || !(smooth.Effective < float64(n)) {
		t.Errorf("GCV %g (rough %g), effective %g", smooth.GCV, rough.GCV, smooth.Effective)
	}
	wrong := func(x []float64) (d float64) {
		for j := range x {
			w := x[j] - math.Exp(-math.Pow(float64(j-7)/4, 2))
			d += w * w
		}
		return math.Sqrt(d)
	}
	if wrong(smooth.X) >= wrong(rough.X)/2 {
		t.Errorf("smoothing left an error of %g, unsmoothed %g", wrong(smooth.X), wrong(rough.X))
	}
	for _, x := range smooth.X {
		if x < 0 {
			t.Errorf("negative: %v", smooth.X)
		}
	}
}

// Kaufman's Jacobian drops a term that vanishes with the residual: on exact
// data it must agree with finite differences of the projected residual, and
// its gradient on any data.
func TestSeparableJacobian(t *testing.T) {
	x := []float64{0, 1, 2, 3, 5, 8, 13, 21}
	y := make([]float64, len(x))
	for i, v := range x {
		y[i] = 1 + 2*math.Exp(-0.1*v) - 0.5*math.Exp(-0.7*v)
	}
	for _, exact := range []bool{true, false} {
		if !exact {
			y[2] += 0.3
		}
		p := nistSeparable("MGH17", x, y)
		tp := newProjection(&p)
		m := len(x)
		q := []float64{0.1, 0.7}
		r := make([]float64, m)
		j := mat.NewDense(m, 2, nil)
		if !tp.solve(q, r, true) {
			t.Fatal("cannot project")
		}
		tp.jacobian(q, j)
		other := newProjection(&p)
		want := mat.NewDense(m, 2, nil)
		fd.Jacobian(want, func(dst, q []float64) { other.solve(q, dst, true) }, q, &fd.JacobianSettings{Formula: fd.Central})
		for k := range 2 {
			gradient := mat.Dot(j.ColView(k), mat.NewVecDense(m, r))
			wanted := mat.Dot(want.ColView(k), mat.NewVecDense(m, r))
			if math.Abs(gradient-wanted) > 1e-7 {
				t.Errorf("gradient %d: %g, differences %g", k, gradient, wanted)
			}
			for i := range m {
				if exact && math.Abs(j.At(i, k)-want.At(i, k)) > 1e-7 {
					t.Errorf("row %d column %d: %g, differences %g", i, k, j.At(i, k), want.At(i, k))
				}
			}
		}
	}
}

func TestBoundAndUnidentifiable(t *testing.T) {
	x := []float64{1, 2, 3, 4, 5, 6}
	y := make([]float64, len(x))
	for i, v := range x {
		y[i] = 2 * math.Pow(v, 1.4)
	}
	p := nistSeparable("DanWood", x, y)
	p.Lower, p.Upper = []float64{0.1}, []float64{1}
	s, err := p.Fit()
	if err != nil {
		t.Fatal(err)
	}
	if s.Status != AtBound || s.P[1] != 1 || !s.AtBound[1] || s.U(1) != 0 || s.U(0) <= 0 {
		t.Errorf("status %v, P %v, u %g %g", s.Status, s.P, s.U(0), s.U(1))
	}
	flat, err := Nonlinear{Y: y, Start: []float64{1, 2}, Names: []string{"gain", "factor"}, Model: func(b, f []float64) {
		for i, v := range x {
			f[i] = b[0] * b[1] * v
		}
	}}.Fit()
	if err != nil {
		t.Fatal(err)
	}
	if flat.Status != Unidentifiable || flat.Covariance != nil || len(flat.Unclear) != 2 {
		t.Errorf("status %v, unclear %v", flat.Status, flat.Unclear)
	}
}

func TestRerunsAreBitEqual(t *testing.T) {
	var s set
	load(t, "nist_MGH17.json", &s)
	x, y := s.xy()
	run := func() *NonlinearSolution {
		p := nistSeparable("MGH17", x, y)
		p.Lower, p.Upper = []float64{0.001, 0.001}, []float64{0.1, 0.1}
		sol, err := p.Fit()
		if err != nil {
			t.Fatal(err)
		}
		return sol
	}
	a := run()
	for range 3 {
		b := run()
		for i := range a.P {
			if math.Float64bits(a.P[i]) != math.Float64bits(b.P[i]) || math.Float64bits(a.U(i)) != math.Float64bits(b.U(i)) {
				t.Fatalf("parameter %d: %v and %v", i, a.P[i], b.P[i])
			}
		}
	}
	want := floats(s.Params)
	got := append([]float64(nil), a.P...)
	if got[3] > got[4] { // the two exponentials may come in either order
		got[1], got[2], got[3], got[4] = got[2], got[1], got[4], got[3]
	}
	agree(t, "MGH17 from a grid within bounds", got, want, 9)
}

func TestRobust(t *testing.T) {
	var c struct {
		Sen struct {
			X, Y []float64
		} `json:"sen_1968_example"`
		Exact struct {
			X     []float64
			Y     []number
			Slope float64 `json:"median_slope_float"`
		} `json:"theil_sen_exact_example"`
		Constant struct {
			Value float64 `json:"1/Phi^-1(3/4)"`
		} `json:"mad_constant"`
		Tuning struct {
			K float64 `json:"k_95pct_efficiency"`
		} `json:"huber_tuning"`
		MAD struct {
			Data   []float64
			Median float64
			Raw    float64 `json:"MAD_raw"`
		} `json:"mad_example"`
		Chem struct {
			Data       []float64
			Recomputed struct {
				Median float64
				Huber  float64 `json:"huber_mu_converged"`
				S      float64
			}
		} `json:"huber_location_chem"`
	}
	load(t, "robust_checks.json", &c)
	if math.Abs(MADScale-c.Constant.Value) > 1e-15 || HuberK != c.Tuning.K {
		t.Errorf("constants %g and %g, published %g and %g", MADScale, HuberK, c.Constant.Value, c.Tuning.K)
	}
	if m, d := Median(c.MAD.Data), MAD(c.MAD.Data); m != c.MAD.Median || d != c.MAD.Raw {
		t.Errorf("median %g and MAD %g, published %g and %g", m, d, c.MAD.Median, c.MAD.Raw)
	}
	if m := Median(c.Chem.Data); math.Abs(m-c.Chem.Recomputed.Median) > 1e-12 {
		t.Errorf("median of the copper data %g, published %g", m, c.Chem.Recomputed.Median)
	}
	// Sen, J. Am. Stat. Assoc. 63 (1968) 1379, section 6: slope 4, 93 %
	// interval 3.71 to 4.38.
	l, err := TheilSen(c.Sen.X, c.Sen.Y, 1.8119106729525978)
	if err != nil {
		t.Fatal(err)
	}
	if l.Slope != 4 || math.Abs(l.Low-3.714285714) > 1e-8 || l.High != 4.375 {
		t.Errorf("Sen's example: %+v", l)
	}
	l, err = TheilSen(c.Exact.X, floats(c.Exact.Y), 1.96)
	if err != nil || math.Abs(l.Slope-c.Exact.Slope) > 1e-14 || math.Abs(l.Intercept-1.475) > 1e-14 {
		t.Errorf("exact example: %+v, %v", l, err)
	}
	// 24 copper determinations (Analytical Methods Committee 1989); the
	// result recomputed with k = 1.5 and the MAD times the rounded 1.4826.
	scale := 1.4826 * MAD(c.Chem.Data)
	if math.Abs(scale-c.Chem.Recomputed.S) > 1e-6 {
		t.Errorf("scaled MAD %g", scale)
	}
	if mu := HuberLocation(c.Chem.Data, 1.5, scale); math.Abs(mu-c.Chem.Recomputed.Huber) > 1e-9 {
		t.Errorf("Huber's location %.10f, want %.10f", mu, c.Chem.Recomputed.Huber)
	}
	line := make([]float64, 40)
	x := make([]float64, 40)
	rng := rand.New(rand.NewPCG(3, 4))
	for i := range line {
		x[i] = float64(i)
		line[i] = 1 + 0.5*x[i] + 0.01*rng.NormFloat64()
	}
	line[7] += 50
	s, w, err := Huber(Problem{Design: Polynomial(x, 1), Y: line})
	if err != nil {
		t.Fatal(err)
	}
	if math.Abs(s.X[1]-0.5) > 0.001 || w[7] > 0.01 {
		t.Errorf("slope %g, weight of the outlier %g", s.X[1], w[7])
	}
}

func TestMinimize(t *testing.T) {
	x := Minimize(func(x float64) float64 {
		if x < 0.2 {
			return math.Inf(1)
		}
		return math.Pow(x-1.3, 2)
	}, 0, 3, 10, 1e-8)
	if math.Abs(x-1.3) > 1e-6 {
		t.Errorf("minimum at %g", x)
	}
	if x := Minimize(func(x float64) float64 { return x }, 2, 3, 5, 1e-8); x != 2 {
		t.Errorf("minimum of a rising line at %g, want its lower end", x)
	}
}

// JCGM 100:2008, table G.2 (two decimals): 12.71 at 1, 2.26 at 9, 2.09 at 20.
func TestDistributions(t *testing.T) {
	for dof, want := range map[float64]float64{1: 12.71, 2: 4.30, 9: 2.26, 20: 2.09, 100: 1.984, 1e9: 1.960} {
		if k := Coverage95(dof); math.Abs(k-want) > 0.0051 {
			t.Errorf("dof %g: %g, want %g", dof, k, want)
		}
	}
	// Median of chi-squared with 2 degrees of freedom is 2 ln 2, exactly.
	if p := Chi2P(2*math.Ln2, 2); math.Abs(p-0.5) > 1e-12 {
		t.Errorf("p %g", p)
	}
}

// Where the cheap bound says full rank, the singular values say it too.
func TestPlainlyRegularIsRegular(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.IntRange(1, 6).Draw(t, "n")
		m := n + rapid.IntRange(0, 6).Draw(t, "more")
		a := mat.NewDense(m, n, nil)
		for i := range m {
			for j := range n {
				a.Set(i, j, rapid.Float64Range(-1, 1).Draw(t, "a"))
			}
		}
		if n > 1 { // nearly the sum of the others, or exactly
			small := math.Pow(10, rapid.Float64Range(-17, 0).Draw(t, "apart"))
			for i := range m {
				a.Set(i, n-1, a.At(i, 0)+small*a.At(i, n-1))
			}
		}
		f := newFactor(a)
		cond, err := f.check(nil)
		if f.plainlyRegular() && err != nil {
			t.Fatalf("said to be regular: %v", err)
		}
		if err == nil && cond < 1e6 && !f.plainlyRegular() {
			t.Fatalf("condition %g was not seen to be regular", cond)
		}
	})
}
