package lsq

import (
	"encoding/json"
	"fmt"
	"math"
	"os"
	"strconv"
	"testing"

	"gonum.org/v1/gonum/mat"
)

// set is one of NIST's Statistical Reference Datasets (StRD), public domain;
// each file in testdata names where it was read.
type set struct {
	Name       string     `json:"name"`
	Source     string     `json:"source"`
	Data       [][]number `json:"data"`
	Params     []number   `json:"certified_params"`
	SD         []number   `json:"certified_sd"`
	ResidualSD number     `json:"certified_residual_sd"`
	RSS        number     `json:"certified_rss"`
	Start1     []number   `json:"start1"`
	Start2     []number   `json:"start2"`
}

type number float64

func (n *number) UnmarshalJSON(b []byte) error {
	s := string(b)
	if q, err := strconv.Unquote(s); err == nil {
		s = q
	}
	v, err := strconv.ParseFloat(s, 64)
	*n = number(v)
	return err
}

func floats(n []number) []float64 {
	out := make([]float64, len(n))
	for i, v := range n {
		out[i] = float64(v)
	}
	return out
}

func load(t *testing.T, name string, into any) {
	t.Helper()
	b, err := os.ReadFile("testdata/" + name)
	if err != nil {
		t.Fatal(err)
	}
	if err := json.Unmarshal(b, into); err != nil {
		t.Fatal(err)
	}
}

func (s set) xy() (x, y []float64) {
	for _, row := range s.Data {
		y, x = append(y, float64(row[0])), append(x, float64(row[1]))
	}
	return x, y
}

// digits is the number of figures in which got and want agree: the negative
// decimal logarithm of the relative error, at most 15.
func digits(got, want float64) float64 {
	if got == want {
		return 15
	}
	d := math.Abs(got - want)
	if want != 0 {
		d /= math.Abs(want)
	}
	return min(15, -math.Log10(d))
}

func agree(t *testing.T, what string, got, want []float64, least float64) {
	t.Helper()
	worst := 15.0
	for i := range want {
		worst = min(worst, digits(got[i], want[i]))
	}
	t.Logf("%s: %.1f digits", what, worst)
	if !(worst >= least) {
		t.Errorf("%s: %.1f digits, want %g; got %v, certified %v", what, worst, least, got, want)
	}
}

func sds(c *mat.SymDense) []float64 {
	out := make([]float64, c.SymmetricDim())
	for i := range out {
		out[i] = math.Sqrt(c.At(i, i))
	}
	return out
}

func TestNISTLinear(t *testing.T) {
	for _, c := range []struct {
		name   string
		design func(x []float64) *mat.Dense
		least  float64
	}{
		{"Norris", func(x []float64) *mat.Dense { return Polynomial(x, 1) }, 9},
		{"NoInt1", func(x []float64) *mat.Dense { return mat.NewDense(len(x), 1, append([]float64(nil), x...)) }, 9},
		{"Wampler1", func(x []float64) *mat.Dense { return Polynomial(x, 5) }, 8},
	} {
		var s set
		load(t, "nist_"+c.name+".json", &s)
		x, y := s.xy()
		sol, err := Solve(Problem{Design: c.design(x), Y: y})
		if err != nil {
			t.Fatal(err)
		}
		agree(t, c.name+" parameters", sol.X, floats(s.Params), c.least)
		if s.ResidualSD > 0 {
			agree(t, c.name+" deviations", sds(sol.Scaled().Covariance), floats(s.SD), c.least)
			agree(t, c.name+" residual", []float64{sol.ResidualSD()}, []float64{float64(s.ResidualSD)}, c.least)
		} else if sol.ResidualSD() > 1e-6 {
			t.Errorf("%s: residual deviation %g, certified 0", c.name, sol.ResidualSD())
		}
	}
}

var nistModels = map[string]func(b []float64, x float64) float64{
	"Misra1a": func(b []float64, x float64) float64 { return b[0] * (1 - math.Exp(-b[1]*x)) },
	"DanWood": func(b []float64, x float64) float64 { return b[0] * math.Pow(x, b[1]) },
	"MGH17": func(b []float64, x float64) float64 {
		return b[0] + b[1]*math.Exp(-x*b[3]) + b[2]*math.Exp(-x*b[4])
	},
}

func TestNISTNonlinear(t *testing.T) {
	for _, c := range []struct {
		name  string
		least float64
	}{{"Misra1a", 7}, {"DanWood", 7}, {"MGH17", 5}} {
		var s set
		load(t, "nist_"+c.name+".json", &s)
		x, y := s.xy()
		for i, start := range [][]number{s.Start1, s.Start2} {
			p := Nonlinear{Y: y, Start: floats(start), Model: func(b, f []float64) {
				for i := range x {
					f[i] = nistModels[c.name](b, x[i])
				}
			}}
			sol, err := p.Fit()
			if err != nil {
				t.Fatal(err)
			}
			what := fmt.Sprintf("%s from start %d (%d iterations, %v)", c.name, i+1, sol.Iterations, sol.Status)
			if sol.Status != Converged {
				t.Errorf("%s: not converged", what)
			}
			agree(t, what, sol.P, floats(s.Params), c.least)
			if sol.Covariance == nil {
				t.Fatalf("%s: no covariance", what)
			}
			agree(t, what+" deviations", sds(sol.Scaled().Covariance), floats(s.SD), c.least-1)
			agree(t, what+" sum of squares", []float64{sol.Chi2}, []float64{float64(s.RSS)}, c.least)
		}
	}
}

// exponentials is b0 + sum c_k exp(-q_k x), or without constant 1 - exp.
func nistSeparable(name string, x, y []float64) Separable {
	switch name {
	case "DanWood":
		return Separable{Columns: 1, Y: y,
			Design: func(q []float64, a *mat.Dense) {
				for i, v := range x {
					a.Set(i, 0, math.Pow(v, q[0]))
				}
			},
			Derivative: func(q []float64, k int, d *mat.Dense) {
				for i, v := range x {
					d.Set(i, 0, math.Pow(v, q[0])*math.Log(v))
				}
			}}
	case "Misra1a":
		return Separable{Columns: 1, Y: y,
			Design: func(q []float64, a *mat.Dense) {
				for i, v := range x {
					a.Set(i, 0, -math.Expm1(-q[0]*v))
				}
			},
			Derivative: func(q []float64, k int, d *mat.Dense) {
				for i, v := range x {
					d.Set(i, 0, v*math.Exp(-q[0]*v))
				}
			}}
	}
	return Separable{Columns: 3, Y: y,
		Design: func(q []float64, a *mat.Dense) {
			for i, v := range x {
				a.SetRow(i, []float64{1, math.Exp(-q[0] * v), math.Exp(-q[1] * v)})
			}
		},
		Derivative: func(q []float64, k int, d *mat.Dense) {
			d.Zero()
			for i, v := range x {
				d.Set(i, k+1, -v*math.Exp(-q[k]*v))
			}
		}}
}

func TestNISTSeparable(t *testing.T) {
	for _, c := range []struct {
		name  string
		least float64
	}{{"Misra1a", 7}, {"DanWood", 7}, {"MGH17", 5}} {
		var s set
		load(t, "nist_"+c.name+".json", &s)
		x, y := s.xy()
		for i, start := range [][]number{s.Start1, s.Start2} {
			p := nistSeparable(c.name, x, y)
			p.Starts = [][]float64{floats(start)[p.Columns:]}
			sol, err := p.Fit()
			if err != nil {
				t.Fatal(err)
			}
			what := fmt.Sprintf("%s separable from start %d (%d iterations, %v)", c.name, i+1, sol.Iterations, sol.Status)
			agree(t, what, sol.P, floats(s.Params), c.least)
			if sol.Covariance == nil {
				t.Fatalf("%s: no covariance", what)
			}
			agree(t, what+" deviations", sds(sol.Scaled().Covariance), floats(s.SD), c.least-1)
		}
	}
}

// The thermometer of JCGM 100:2008 annex H.3; the exact figures in the file
// were recomputed with rational arithmetic and reproduce every printed digit.
func TestGUMH3(t *testing.T) {
	var s struct {
		T0 float64  `json:"t0"`
		T  []number `json:"t_k_degC"`
		B  []number `json:"b_k_degC"`
		R  map[string]json.RawMessage
		// Recomputed mixes numbers and lists.
		Recomputed map[string]json.RawMessage `json:"recomputed"`
	}
	load(t, "gum_H3_thermometer.json", &s)
	want := func(key string) float64 {
		var n number
		if err := json.Unmarshal(s.Recomputed[key], &n); err != nil {
			t.Fatal(key, err)
		}
		return float64(n)
	}
	x := floats(s.T)
	for i := range x {
		x[i] -= s.T0
	}
	sol, err := Solve(Problem{Design: Polynomial(x, 1), Y: floats(s.B)})
	if err != nil {
		t.Fatal(err)
	}
	sc := sol.Scaled()
	got := []float64{sc.X[0], sc.U(0), sc.X[1], sc.U(1), sc.Correlation(0, 1), sc.ResidualSD(), sc.Chi2,
		sc.X[0] + 10*sc.X[1], sc.PredictU([]float64{1, 10}), Coverage95(float64(sc.DOF))}
	var wants []float64
	for _, k := range []string{"y1", "u(y1)", "y2", "u(y2)", "r", "s", "SSR", "b(30)", "u[b(30)]", "t0.975(9)"} {
		wants = append(wants, want(k))
	}
	agree(t, "GUM H.3", got, wants, 9)
	if sc.DOF != 9 {
		t.Errorf("degrees of freedom %d, want 9", sc.DOF)
	}
}
