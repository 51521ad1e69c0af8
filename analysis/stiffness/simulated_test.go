package stiffness

import (
	"math"
	"math/rand/v2"
	"testing"

	"gaugelog/config"
)

// stated are the standard uncertainties every simulated test draws from and
// states in its rig file.
var stated = struct {
	depth, width, support, gauge, load, weight, gravity, gain, indication, noise float64
}{0.03, 0.05, 0.3, 0.5, 0.5, 2e-4, 5e-4, 3e-4, 0.002, 0.0005}

// simulate draws a rig whose true dimensions, places, weights and gauges
// differ from what its file states, hangs the ladder and reads it: closed
// forms on two yielding supports (beam_formulas.json), no solver. It returns
// what the analysis may see, and the true modulus.
func simulate(rng *rand.Rand) (Input, float64) {
	n := rng.NormFloat64
	modulus := 9000 + 5000*rng.Float64()
	p := newPlank()
	p.rig.Specimen.Section.Width = []config.Length{length(140, stated.width)}
	p.rig.Specimen.Section.Depth = []config.Length{length(38, stated.depth)}
	h, b := 38+stated.depth*n(), 140+stated.width*n()
	p.ei = modulus * b * h * h * h / 12
	p.s = p.ei * 12 / (h * h) * 5 / 6 / (timberRatio * math.Max(0.05, 1+timberSpread*n()))
	p.c = [2]float64{3e-4 * rng.Float64(), 3e-4 * rng.Float64()}
	left, right := stated.support*n(), 2100+stated.support*n()
	for i := range p.rig.Supports {
		p.rig.Supports[i].At.U = stated.support
	}
	load := [2]float64{700 + stated.load*n(), 1400 + stated.load*n()}
	weight := [2]float64{1 + stated.weight*n(), 1 + stated.weight*n()}
	for i := range p.rig.Loads {
		p.rig.Loads[i].At.U = stated.load
	}
	p.rig.Gravity.Value.U = stated.gravity
	g := 1 + stated.gravity/p.rig.Gravity.Value.Value*n()
	in := Input{Rig: p.rig, InitialAfterS: 60}
	at, gain, plateau := make([]float64, 8), make([]float64, 8), make([]float64, 8)
	u := length(stated.indication, 0)
	u.U = 0
	for i := range p.rig.Gauges {
		gauge := &p.rig.Gauges[i]
		gauge.At.U, gauge.U = stated.gauge, &u
		gauge.Calibration = &config.Calibration{Gain: *number(1, 0), UGain: number(stated.gain, 0)}
		at[i], gain[i] = gauge.At.Value+stated.gauge*n(), 1+stated.gain*n()
		plateau[i] = math.Hypot(stated.indication, stated.noise) * n()
	}
	before := [2]float64{}
	for k, set := range [][2]float64{{25, 25}, {172, 25}, {172, 172}, {319, 172}} {
		s := StepObs{Name: string(rune('1' + k))}
		for j, name := range []string{"a", "b"} {
			s.Loads = append(s.Loads, StepLoad{Load: name, N: set[j], U: stated.weight * set[j], Weighed: true})
		}
		for i, gauge := range p.rig.Gauges {
			mm := 0.0
			for j := range 2 {
				f := (set[j] - before[j]) * weight[j] * g
				mm += p.general(gauge.Name, at[i], load[j], f, left, right)
			}
			now := math.Hypot(stated.indication, stated.noise) * n()
			s.Gauges = append(s.Gauges, Obs{Gauge: i, MM: gain[i]*mm + now - plateau[i], U: stated.noise * math.Sqrt2, UBefore: stated.noise})
			plateau[i] = now
		}
		before = set
		in.Steps = append(in.Steps, s)
	}
	return in, modulus
}

// general is plank.sag for any span.
func (p *plank) general(gauge string, x, at, load, left, right float64) float64 {
	l, a := right-left, at-left
	b := l - a
	x -= left
	down := [2]float64{b / l * p.c[0] * load, a / l * p.c[1] * load}
	switch gauge {
	case "s1":
		return down[0]
	case "s2":
		return down[1]
	}
	w := down[0] + (down[1]-down[0])*x/l
	switch {
	case x < 0:
		return w + load*b*(l*l-b*b)/(6*l*p.ei)*x
	case x > l:
		return w - load*a*(l*l-a*a)/(6*l*p.ei)*(x-l)
	case x <= a:
		return w + load*b*x*(l*l-b*b-x*x)/(6*l*p.ei) + load*b*x/(l*p.s)
	}
	return w + load*a*(l-x)*(2*l*x-x*x-a*a)/(6*l*p.ei) + load*a*(l-x)/(l*p.s)
}

// coverage is the share of simulated tests whose 95 % interval holds the
// true modulus.
func coverage(t *testing.T, tests int, seed uint64) float64 {
	t.Helper()
	held := 0
	var z2 float64
	for i := range tests {
		in, truth := simulate(rand.New(rand.NewPCG(seed, uint64(i))))
		e, err := Compute(in)
		if err != nil {
			t.Fatalf("test %d: %v", i, err)
		}
		d := e.Modulus.Value - truth
		if math.Abs(d) <= e.Modulus.U95 {
			held++
		}
		z2 += d * d / (e.Modulus.U * e.Modulus.U)
	}
	share := float64(held) / float64(tests)
	t.Logf("%d of %d intervals hold the truth (%.1f %%); rms error over u %.3f", held, tests, 100*share, math.Sqrt(z2/float64(tests)))
	return share
}

// With 60 tests a true 95 % lies outside 88 to 100 % about once in 80.
func TestCoverageOfSmallSample(t *testing.T) {
	if share := coverage(t, 60, 7); share < 0.88 {
		t.Errorf("%.1f %% of the 95 %% intervals hold the truth", 100*share)
	}
}

func TestMonteCarloAgrees(t *testing.T) {
	in, _ := simulate(rand.New(rand.NewPCG(1, 1)))
	e, err := Compute(in)
	if err != nil {
		t.Fatal(err)
	}
	mc, err := thorough(t.Context(), in, 4000, 1, nil)
	if err != nil {
		t.Fatal(err)
	}
	// 4000 draws know a standard deviation within 1.1 %; four of those.
	relative(t, "SD of the modulus", mc.Modulus.SD, e.Modulus.U, 0.045)
	relative(t, "SD of EI", mc.Bending.SD, e.Bending.U, 0.045)
	again, err := thorough(t.Context(), in, 4000, 1, nil)
	if err != nil {
		t.Fatal(err)
	}
	if *again != *mc {
		t.Error("the same seed gave other draws")
	}
}

// The budget's own sum is the covariance of the fit: nothing is left out or
// counted twice.
func TestBudgetSumsToCovariance(t *testing.T) {
	in, _ := simulate(rand.New(rand.NewPCG(2, 2)))
	e, err := Compute(in)
	if err != nil {
		t.Fatal(err)
	}
	if e.Fit.Birge != 1 {
		t.Fatalf("Birge %g in a test that fits", e.Fit.Birge)
	}
	f := e.fit
	want := f.sol.U(0) / (f.theta[0] * f.theta[0])
	relative(t, "u(EI) by budget and by covariance", e.Bending.U, want, 1e-6)
	sum := 0.0
	for _, l := range e.Budget {
		sum += l.Share
		if l.Input == "depth" {
			relative(t, "E falls with the third power of the depth", l.Sensitivity, -3*e.Modulus.Value/38, 0.01)
		}
	}
	relative(t, "shares", sum, 1, 1e-9)
}
