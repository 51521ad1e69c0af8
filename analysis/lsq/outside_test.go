package lsq

import (
	"bytes"
	"encoding/json"
	"math"
	"math/rand/v2"
	"os"
	"os/exec"
	"testing"

	"gonum.org/v1/gonum/mat"
)

// These problems are what testdata/least_squares.py reads, and its answers.
type (
	outsideLinear struct {
		Design     [][]float64 `json:"design"`
		Y          []float64   `json:"y"`
		Covariance [][]float64 `json:"covariance"`
	}
	outsideNonlinear struct {
		T     []float64 `json:"t"`
		Y     []float64 `json:"y"`
		U     []float64 `json:"u"`
		Start []float64 `json:"start"`
	}
	outsideAnswer struct {
		X    []float64 `json:"x"`
		U    []float64 `json:"u"`
		Chi2 float64   `json:"chi2"`
	}
)

// drawLinear makes a problem with columns of very different size and errors
// that several readings share.
func drawLinear(rng *rand.Rand) outsideLinear {
	n, k := 8+rng.IntN(40), 1+rng.IntN(6)
	p := outsideLinear{Design: make([][]float64, n), Y: make([]float64, n), Covariance: make([][]float64, n)}
	size := make([]float64, k)
	for j := range size {
		size[j] = math.Pow(10, 8*rng.Float64()-4)
	}
	shared := make([]float64, n)
	for i := range n {
		p.Design[i], p.Covariance[i] = make([]float64, k), make([]float64, n)
		for j := range k {
			p.Design[i][j] = size[j] * (1 + rng.NormFloat64())
			p.Y[i] += p.Design[i][j] / size[j] * float64(j+1)
		}
		p.Y[i] += 0.1 * rng.NormFloat64()
		shared[i] = 0.3 * rng.NormFloat64()
		p.Covariance[i][i] = 0.01 + 0.02*rng.Float64()
	}
	for i := range n {
		for j := range n {
			p.Covariance[i][j] += shared[i] * shared[j]
		}
	}
	return p
}

func drawNonlinear(rng *rand.Rand) outsideNonlinear {
	a, b, c := 1+rng.Float64(), 0.5+2*rng.Float64(), 5+20*rng.Float64()
	p := outsideNonlinear{Start: []float64{0.8 * a, 1.3 * b, 1.5 * c}}
	for i := range 60 {
		t, u := float64(i+1), 0.01*(1+rng.Float64())
		p.T, p.U = append(p.T, t), append(p.U, u)
		p.Y = append(p.Y, a-b*math.Expm1(-t/c)+u*rng.NormFloat64())
	}
	return p
}

// 50 linear and 20 nonlinear problems against NumPy and SciPy. A linear
// answer may differ by 1e-8 of its size, a nonlinear one by 1e-8 of its size
// and uncertainty together.
func TestAgainstSciPy(t *testing.T) {
	rng := rand.New(rand.NewPCG(50, 2))
	var in struct {
		Linear    []outsideLinear    `json:"linear"`
		Nonlinear []outsideNonlinear `json:"nonlinear"`
	}
	for range 50 {
		in.Linear = append(in.Linear, drawLinear(rng))
	}
	for range 20 {
		in.Nonlinear = append(in.Nonlinear, drawNonlinear(rng))
	}
	var out struct{ Linear, Nonlinear []outsideAnswer }
	python(t, "testdata/least_squares.py", in, &out)
	if len(out.Linear) != len(in.Linear) || len(out.Nonlinear) != len(in.Nonlinear) {
		t.Fatalf("%d and %d answers", len(out.Linear), len(out.Nonlinear))
	}
	worst := 0.0
	same := func(what string, problem int, got, want, beside float64) {
		d := math.Abs(got-want) / (math.Abs(want) + beside)
		worst = max(worst, d)
		if !(d <= 1e-8) {
			t.Errorf("problem %d: %s is %.15g, SciPy has %.15g", problem, what, got, want)
		}
	}
	for i, p := range in.Linear {
		s, err := Solve(p.problem())
		if err != nil {
			t.Fatalf("problem %d: %v", i, err)
		}
		for j, x := range out.Linear[i].X {
			same("an unknown", i, s.X[j], x, 0)
			same("its uncertainty", i, s.U(j), out.Linear[i].U[j], 0)
		}
		same("chi-square", i, s.Chi2, out.Linear[i].Chi2, 0)
	}
	t.Logf("linear: greatest difference %.2g", worst)
	worst = 0
	for i, p := range in.Nonlinear {
		s, err := p.problem().Fit()
		if err != nil {
			t.Fatalf("nonlinear problem %d: %v", i, err)
		}
		for j, x := range out.Nonlinear[i].X {
			same("a parameter", i, s.P[j], x, out.Nonlinear[i].U[j])
			same("chi-square", i, s.Chi2, out.Nonlinear[i].Chi2, 0)
		}
	}
	t.Logf("nonlinear: greatest difference %.2g", worst)
}

func (p outsideLinear) problem() Problem {
	n, k := len(p.Design), len(p.Design[0])
	x, v := mat.NewDense(n, k, nil), mat.NewSymDense(n, nil)
	for i := range n {
		x.SetRow(i, p.Design[i])
		for j := range i + 1 {
			v.SetSym(i, j, p.Covariance[i][j])
		}
	}
	return Problem{Design: x, Y: p.Y, Covariance: v}
}

func (p outsideNonlinear) problem() Nonlinear {
	return Nonlinear{Y: p.Y, U: p.U, Start: p.Start, Model: func(q, f []float64) {
		for i, t := range p.T {
			f[i] = q[0] - q[1]*math.Expm1(-t/q[2])
		}
	}, Jacobian: func(q []float64, j *mat.Dense) {
		for i, t := range p.T {
			e := math.Exp(-t / q[2])
			j.SetRow(i, []float64{1, 1 - e, -q[1] * e * t / (q[2] * q[2])})
		}
	}}
}

// python runs a script that takes JSON and gives JSON. It skips the test where
// there is no Python with SciPy, unless GAUGELOG_CI=1 makes it mandatory.
func python(t *testing.T, script string, in, out any) {
	t.Helper()
	name := ""
	for _, n := range []string{"/usr/bin/python3", "python3"} {
		if name == "" && exec.Command(n, "-c", "import numpy, scipy").Run() == nil {
			name = n
		}
	}
	if name == "" {
		const why = "there is no Python with NumPy and SciPy (Debian: python3-scipy)"
		if os.Getenv("GAUGELOG_CI") == "1" {
			t.Fatal(why + ", and GAUGELOG_CI=1 lets no test skip")
		}
		t.Skip(why)
	}
	text, err := json.Marshal(in)
	if err != nil {
		t.Fatal(err)
	}
	c := exec.Command(name, script)
	var stderr bytes.Buffer
	c.Stdin, c.Stderr = bytes.NewReader(text), &stderr
	answer, err := c.Output()
	if err != nil {
		t.Fatalf("%s: %v\n%s", script, err, &stderr)
	}
	if err := json.Unmarshal(answer, out); err != nil {
		t.Fatal(err)
	}
}
