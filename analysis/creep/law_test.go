package creep

import (
	"encoding/json"
	"math"
	"os"
	"strconv"
	"testing"

	"gonum.org/v1/gonum/diff/fd"
	"gonum.org/v1/gonum/integrate/quad"
)

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

func numbers(t *testing.T, s []string) []float64 {
	t.Helper()
	out := make([]float64, len(s))
	for i := range s {
		v, err := strconv.ParseFloat(s[i], 64)
		if err != nil {
			t.Fatal(err)
		}
		out[i] = v
	}
	return out
}

// fixed makes a Fit of known coefficients, as a fit would return it.
func fixed(m Model, changes []Change, shape float64, linear ...float64) *Fit {
	f := &Fit{Model: m, fam: familyOf(m, 0.01, 1000), changes: changes, linear: linear, shape: shape}
	return f
}

// The vectors were evaluated to 30 digits from the textbook definitions
// (Findley, Lai and Onaran, Creep and Relaxation of Nonlinear Viscoelastic
// Materials, chapters 4 and 5), as the file says.
func TestAnalyticVectors(t *testing.T) {
	var v struct {
		T       []string `json:"t_h"`
		Findley struct {
			D []string
		}
		Log    struct{ D []string } `json:"log_time"`
		Kelvin struct{ D []string } `json:"kelvin_std_solid"`
		Chain  struct {
			D   []string
			Di  []float64 `json:"d_i"`
			Tau []float64 `json:"tau_i"`
		} `json:"kelvin_chain3"`
		Burgers  struct{ D []string }
		Recovery struct {
			T []string `json:"t_after_unload_h"`
			D []string `json:"residual_d"`
		} `json:"burgers_recovery"`
	}
	load(t, "creep_analytic_vectors.json", &v)
	once := []Change{{Newton: 1}}
	chain := fixed(KelvinChain, once, 0, append([]float64{6.912}, v.Chain.Di...)...)
	chain.fam.taus = v.Chain.Tau
	chain.fam.names = chain.fam.names[:4]
	burgers := fixed(Burgers, once, math.Log(48), 6.912, 1.2, 0.0004)
	for _, c := range []struct {
		fit  *Fit
		want []string
	}{
		{fixed(Power, once, 0.2, 6.912, 0.35), v.Findley.D},
		{fixed(Log, once, math.Log(0.5), 6.912, 0.6/math.Ln10), v.Log.D},
		{fixed(StandardSolid, once, math.Log(200), 6.912, 2.5), v.Kelvin.D},
		{chain, v.Chain.D},
		{burgers, v.Burgers.D},
	} {
		for i, want := range numbers(t, c.want) {
			at := numbers(t, v.T)[i]
			if got := c.fit.At(at); math.Abs(got-want) > 1e-10 {
				t.Errorf("%s at %g h: %.13f, want %.13f", c.fit.Model, at, got, want)
			}
		}
	}
	burgers.changes = []Change{{Newton: 1}, {AtH: 2160, Newton: -1}}
	for i, want := range numbers(t, v.Recovery.D) {
		at := 2160 + numbers(t, v.Recovery.T)[i]
		if got := burgers.At(at); math.Abs(got-want) > 1e-10 {
			t.Errorf("recovery at %g h: %.13f, want %.13f", at, got, want)
		}
	}
}

// A ramp is the mean over its parts: quadrature of the term at once over the
// ages present must give the same, and finite differences the derivative.
func TestRamps(t *testing.T) {
	for name, c := range map[string]struct {
		r     term
		shape float64
	}{"instant": {instant, 0}, "power": {power, 0.23}, "log": {logarithm, math.Log(0.3)}, "exponential": {exponential, math.Log(4)}, "flow": {flow, 0}} {
		for _, ramp := range []float64{0, 1e-5, 1.0 / 60, 2} {
			for _, age := range []float64{1e-6, 0.01, 0.5, 1.9, 2, 3, 50, 990, 1010, 9000} {
				got, slope := c.r(ramp, c.shape)(age)
				want, _ := c.r(0, c.shape)(age)
				if ramp > 0 {
					lo, width := max(age-ramp, 0), min(age, ramp)
					// Substituting s = lo + width x^8 tames the root at 0.
					want = quad.Fixed(func(x float64) float64 {
						v, _ := c.r(0, c.shape)(lo + width*math.Pow(x, 8))
						return v * 8 * math.Pow(x, 7)
					}, 0, 1, 200, nil, 0) * width / ramp
				}
				if math.Abs(got-want) > 2e-10*(1+math.Abs(want)) {
					t.Errorf("%s, ramp %g, age %g: %.12g, quadrature %.12g", name, ramp, age, got, want)
				}
				d := fd.Derivative(func(s float64) float64 { v, _ := c.r(ramp, s)(age); return v }, c.shape, &fd.Settings{Formula: fd.Central})
				if math.Abs(slope-d) > 1e-6*(1+math.Abs(d)) {
					t.Errorf("%s, ramp %g, age %g: slope %.9g, differences %.9g", name, ramp, age, slope, d)
				}
			}
		}
		if v, s := c.r(0.1, c.shape)(-1); v != 0 || s != 0 {
			t.Errorf("%s answers before its load", name)
		}
	}
}

// The lag's derivative, and its step response 1 - exp(-t/lag).
func TestLagged(t *testing.T) {
	times, v := []float64{0}, []float64{20}
	for x := 0.01; x < 30; x += 0.07 {
		times, v = append(times, x), append(v, 21)
	}
	out, slope := Lagged(times, v, 2)
	up, _ := Lagged(times, v, 2*math.Exp(1e-5))
	down, _ := Lagged(times, v, 2*math.Exp(-1e-5))
	for i, x := range times[1:] {
		// The input rises over the first 0.01 h: as good as at 0.005 h.
		if want := 21 - math.Exp(-(x-0.005)/2); math.Abs(out[i+1]-want) > 1e-4 {
			t.Fatalf("at %g h: %g, want %g", x, out[i+1], want)
		}
		if d := (up[i+1] - down[i+1]) / 2e-5; math.Abs(d-slope[i+1]) > 1e-8 {
			t.Fatalf("at %g h: slope %g, differences %g", x, slope[i+1], d)
		}
	}
}
