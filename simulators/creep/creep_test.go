package creep

import (
	"encoding/json"
	"math"
	"os"
	"slices"
	"strconv"
	"testing"

	"pgregory.net/rapid"
)

// vectors are testdata/creep_analytic_vectors.json: evaluated with 30 digits
// from the definitions in Findley, Lai and Onaran, chapters 4 and 5; not
// published data.
type vectors struct {
	T       []string `json:"t_h"`
	Findley struct {
		D0, M, N float64
		D        []string
	}
	Log struct {
		D0, A float64
		T0    float64 `json:"t0_h"`
		D     []string
	} `json:"log_time"`
	Kelvin struct {
		D0, D1 float64
		Tau    float64 `json:"tau_h"`
		D      []string
	} `json:"kelvin_std_solid"`
	Chain struct {
		D0  float64
		Di  []float64 `json:"d_i"`
		Tau []float64 `json:"tau_i"`
		D   []string
	} `json:"kelvin_chain3"`
	Burgers struct {
		D0, D1 float64
		Tau    float64 `json:"tau_h"`
		V      float64 `json:"v_mm_per_h"`
		D      []string
	}
	Recovery struct {
		T []string `json:"t_after_unload_h"`
		D []string `json:"residual_d"`
	} `json:"burgers_recovery"`
}

func load(t *testing.T) vectors {
	t.Helper()
	text, err := os.ReadFile("testdata/creep_analytic_vectors.json")
	if err != nil {
		t.Fatal(err)
	}
	var v vectors
	if err := json.Unmarshal(text, &v); err != nil {
		t.Fatal(err)
	}
	return v
}

func TestVectors(t *testing.T) {
	v := load(t)
	chain := Law{}
	for i, d := range v.Chain.Di {
		chain.Kelvin = append(chain.Kelvin, Delayed{d / v.Chain.D0, v.Chain.Tau[i] * hour})
	}
	burgers := Law{Kelvin: []Delayed{{v.Burgers.D1 / v.Burgers.D0, v.Burgers.Tau * hour}}, Flow: v.Burgers.V / v.Burgers.D0 / hour}
	for _, c := range []struct {
		name string
		law  Law
		d0   float64
		d    []string
	}{
		{"findley", Law{Power: []Power{{v.Findley.M / v.Findley.D0, v.Findley.N}}}, v.Findley.D0, v.Findley.D},
		{"log", Law{Log: []Delayed{{v.Log.A / math.Ln10 / v.Log.D0, v.Log.T0 * hour}}}, v.Log.D0, v.Log.D},
		{"kelvin", Law{Kelvin: []Delayed{{v.Kelvin.D1 / v.Kelvin.D0, v.Kelvin.Tau * hour}}}, v.Kelvin.D0, v.Kelvin.D},
		{"chain", chain, v.Chain.D0, v.Chain.D},
		{"burgers", burgers, v.Burgers.D0, v.Burgers.D},
	} {
		if len(c.d) != len(v.T) || len(c.d) < 10 {
			t.Fatalf("%s: %d values", c.name, len(c.d))
		}
		for i := range c.d {
			if got, want := c.d0*c.law.At(number(t, v.T[i])*hour), number(t, c.d[i]); math.Abs(got-want) > 1e-12*want {
				t.Errorf("%s at %s h: %.16g, want %s", c.name, v.T[i], got, c.d[i])
			}
		}
	}
	// Loaded for 2160 h, then unloaded: superposition.
	for i, after := range v.Recovery.T {
		at := (2160 + number(t, after)) * hour
		got := v.Burgers.D0 * (burgers.At(at) - burgers.At(at-2160*hour))
		if want := number(t, v.Recovery.D[i]); math.Abs(got-want) > 1e-11 {
			t.Errorf("recovery after %s h: %.16g, want %g", after, got, want)
		}
	}
}

func number(t *testing.T, s string) float64 {
	t.Helper()
	f, err := strconv.ParseFloat(s, 64)
	if err != nil {
		t.Fatal(err)
	}
	return f
}

// TestIntegral compares the closed integrals with Gauss-Legendre quadrature of
// At over the pieces of a grid that crowds at zero.
func TestIntegral(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		amplitude := rapid.Float64Range(0, 2)
		tau := rapid.Float64Range(10, 1e6)
		law := Law{
			Power:    []Power{{amplitude.Draw(rt, "power"), rapid.Float64Range(0.05, 0.95).Draw(rt, "n")}},
			Log:      []Delayed{{amplitude.Draw(rt, "log"), tau.Draw(rt, "log tau")}},
			Kelvin:   []Delayed{{amplitude.Draw(rt, "kelvin"), tau.Draw(rt, "tau")}},
			Flow:     rapid.Float64Range(0, 1e-6).Draw(rt, "flow"),
			Tertiary: Tertiary{Amplitude: 0.1, From: 3e4, Growth: 5e4},
		}
		if err := law.Check(); err != nil {
			rt.Fatal(err)
		}
		end := rapid.Float64Range(1, 1e5).Draw(rt, "end")
		cuts := []float64{0}
		for x := end * 1e-12; x < end; x *= 1.3 {
			cuts = append(cuts, x)
		}
		if end > 3e4 {
			cuts = append(cuts, 3e4) // the kink
		}
		cuts = append(cuts, end)
		slices.Sort(cuts)
		sum := 0.0
		for i := 1; i < len(cuts); i++ {
			sum += gauss(law, cuts[i-1], cuts[i])
		}
		if got := law.Integral(end); math.Abs(got-sum) > 1e-6*sum {
			rt.Fatalf("integral to %g: %.12g, quadrature %.12g", end, got, sum)
		}
		// A ramp is the mean, and a short one is nearly a jump.
		if got, want := law.Ramp(end, 0, 0), law.At(end); got != want {
			rt.Fatalf("no ramp: %g, want %g", got, want)
		}
		if got := law.Ramp(2*end, 0, end); got > law.At(2*end) || got < law.At(end) {
			rt.Fatalf("ramp %g outside %g..%g", got, law.At(end), law.At(2*end))
		}
	})
}

func gauss(l Law, a, b float64) float64 {
	m, h := (a+b)/2, (b-a)/2
	d := h * math.Sqrt(3.0/5)
	return h * (5*l.At(m-d) + 8*l.At(m) + 5*l.At(m+d)) / 9
}

func TestCheck(t *testing.T) {
	for name, law := range map[string]Law{
		"n 0": {Power: []Power{{0.1, 0}}}, "n 1": {Power: []Power{{0.1, 1}}}, "negative": {Power: []Power{{-0.1, 0.2}}},
		"tau 0": {Kelvin: []Delayed{{0.1, 0}}}, "NaN": {Log: []Delayed{{math.NaN(), 1}}}, "flow": {Flow: -1},
		"tertiary": {Tertiary: Tertiary{Amplitude: 0.1}},
	} {
		if law.Check() == nil {
			t.Errorf("%s: taken", name)
		}
	}
	if err := (Law{}).Check(); err != nil {
		t.Error(err)
	}
}
