package stiffness

import (
	"bytes"
	"encoding/json"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"os/exec"
	"testing"

	"gaugelog/analysis/beam"
	"gaugelog/config"
)

// outsideFit is a least-squares problem as ../lsq/testdata/least_squares.py
// reads it, and outsideAnswer what it gives.
type (
	outsideFit struct {
		Design     [][]float64 `json:"design"`
		Y          []float64   `json:"y"`
		Covariance [][]float64 `json:"covariance"`
	}
	outsideAnswer struct {
		X    []float64 `json:"x"`
		U    []float64 `json:"u"`
		Chi2 float64   `json:"chi2"`
	}
)

// drawnRig is a rig on two to three yielding supports with overhangs, a point
// load and a spread one, gauges on the beam and on every seat, and errors
// stated of all of it.
func drawnRig(rng *rand.Rand) *config.Rig {
	span := 500 + 2500*rng.Float64()
	h := span / (6 + 20*rng.Float64())
	place := func(share float64) config.Length { return length(span*share, 0.3+rng.Float64()) }
	mid := place(0.3 + 0.1*rng.Float64())
	from, to := place(0.55+0.1*rng.Float64()), place(0.75+0.1*rng.Float64())
	u := length(0.02, 0)
	r := &config.Rig{
		Specimen: config.Specimen{Material: []string{"timber", "plastic"}[rng.IntN(2)], From: length(-0.3*span, 0), Length: length(1.6*span, 0),
			Section: config.Section{Shape: "rectangle", Width: lengths(2 * h), Depth: lengths(h, h*1.001), U: &u}},
		Supports: []config.Support{{Name: "a", At: place(0)}, {Name: "b", At: place(1)}},
		Loads:    []config.Load{{Name: "p", At: &mid}, {Name: "q", From: &from, To: &to}},
		Gravity:  config.Gravity{Value: number(9.81, 5e-4)},
	}
	if rng.IntN(3) == 0 {
		r.Supports = append(r.Supports, config.Support{Name: "c", At: place(0.5)})
	}
	for i, at := range []float64{-0.25, 0.2, 0.4, 0.7, 0.8, 1.25} {
		r.Gauges = append(r.Gauges, config.Gauge{Name: fmt.Sprint("g", i), At: place(at), Resolution: length(0.001, 0),
			Calibration: &config.Calibration{Gain: *number(1, 0), UGain: number(3e-4, 0)}})
	}
	for _, s := range r.Supports {
		r.Gauges = append(r.Gauges, config.Gauge{Name: "seat " + s.Name, At: s.At, Sees: "seat", Resolution: length(0.001, 0)})
	}
	return r
}

// drawnReadings hangs four steps on the rig's beam and reads it with noise.
func drawnReadings(t *testing.T, rng *rand.Rand, r *config.Rig) Input {
	t.Helper()
	h := r.Specimen.Section.Depth[0].Value
	i, a := 2*h*h*h*h/12, 2*h*h
	span := r.Supports[1].At.Value
	flexible := span * span * span / (48 * 9000 * i)
	b := beam.Beam{From: r.Specimen.From.Value, Length: r.Specimen.Length.Value, EI: 9000 * i, S: 600 * 5.0 / 6 * a}
	for _, s := range r.Supports {
		b.Supports = append(b.Supports, beam.Support{At: s.At.Value, Compliance: 0.02 * flexible * (0.2 + rng.Float64())})
	}
	in, each := Input{Rig: r, InitialAfterS: 60}, 1.5/flexible
	for k, set := range [][2]float64{{1, 0}, {1, 1}, {2, 1}, {2, 2}} {
		s := StepObs{Name: fmt.Sprint(k)}
		before := [2]float64{}
		if k > 0 {
			before = [][2]float64{{1, 0}, {1, 1}, {2, 1}}[k-1]
		}
		var loads []beam.Load
		for j, l := range r.Loads {
			from, to := loadPlaces(l)
			s.Loads = append(s.Loads, StepLoad{Load: l.Name, N: each * set[j], U: 2e-4 * each * set[j], Weighed: true})
			loads = append(loads, beam.Spread(from, to, each*(set[j]-before[j])))
		}
		line, err := b.Solve(loads)
		if err != nil {
			t.Fatal(err)
		}
		for g, gauge := range r.Gauges {
			mm := line.Deflection(gauge.At.Value)
			s.Gauges = append(s.Gauges, Obs{Gauge: g, MM: mm + 0.001*rng.NormFloat64(), U: 0.001})
		}
		in.Steps = append(in.Steps, s)
	}
	return in
}

// The fits of 50 random rigs, weighted with the covariance of all their
// causes, against NumPy and SciPy: unknowns and uncertainties within 1e-8.
func TestFitsAgainstSciPy(t *testing.T) {
	rng := rand.New(rand.NewPCG(50, 3))
	var in struct {
		Linear    []outsideFit `json:"linear"`
		Nonlinear []outsideFit `json:"nonlinear"`
	}
	in.Nonlinear = []outsideFit{}
	var fits []*fitted
	for n := range 50 {
		readings := drawnReadings(t, rng, drawnRig(rng))
		e, err := Compute(readings)
		if err != nil {
			t.Fatalf("rig %d: %v", n, err)
		}
		fits = append(fits, e.fit)
		in.Linear = append(in.Linear, problemOf(t, e.fit))
	}
	var out struct{ Linear []outsideAnswer }
	scipy(t, "../lsq/testdata/least_squares.py", in, &out)
	worst := 0.0
	for n, f := range fits {
		for j, x := range out.Linear[n].X {
			d := max(math.Abs(f.theta[j]-x)/(math.Abs(x)+f.sol.U(j)), math.Abs(f.sol.U(j)/out.Linear[n].U[j]-1))
			worst = max(worst, d)
			if !(d <= 1e-8) {
				t.Errorf("rig %d, %s: %.15g, u %.15g; SciPy has %.15g, u %.15g", n, f.m.names()[j], f.theta[j], f.sol.U(j), x, out.Linear[n].U[j])
			}
		}
		if d := math.Abs(f.sol.Chi2 - out.Linear[n].Chi2); d > 1e-8*(1+f.sol.Chi2) {
			t.Errorf("rig %d: chi2 %.15g, SciPy has %.15g", n, f.sol.Chi2, out.Linear[n].Chi2)
		}
	}
	t.Logf("greatest difference %.2g", worst)
}

// problemOf is the fit's last linear problem, worked out anew at its answer.
func problemOf(t *testing.T, f *fitted) outsideFit {
	t.Helper()
	y, x, err := f.m.evaluate(f.st, f.theta)
	if err != nil {
		t.Fatal(err)
	}
	var p outsideFit
	for r, o := range f.m.rows {
		rest := o.mm - y[r]
		var row, cov []float64
		for j, v := range f.theta {
			row = append(row, x.At(r, j))
			rest += x.At(r, j) * v
		}
		for q := range f.m.rows {
			cov = append(cov, f.cov.At(r, q))
		}
		p.Design, p.Y, p.Covariance = append(p.Design, row), append(p.Y, rest), append(p.Covariance, cov)
	}
	return p
}

// scipy runs a script that takes JSON and gives JSON. It skips the test where
// there is no Python with SciPy, unless GAUGELOG_CI=1 makes it mandatory.
func scipy(t *testing.T, script string, in, out any) {
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
