package creep

import (
	"encoding/json"
	"math"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"testing"
)

// foreignHistory is a history as testdata/scipy_fit.py reads it.
type foreignHistory struct {
	Model   Model           `json:"model"`
	Time    []float64       `json:"time"`
	Sag     []float64       `json:"sag"`
	U       []float64       `json:"u"`
	Changes []foreignChange `json:"changes"`
	Knock   float64         `json:"knock"`
	Scale   float64         `json:"scale"`
	Slow    float64         `json:"slow"`
	Fade    float64         `json:"fade"`
	Start   []float64       `json:"start"`
	Taus    []float64       `json:"taus"`
	Lambda  float64         `json:"lambda"`
}

type foreignChange struct {
	At     float64 `json:"at"`
	Ramp   float64 `json:"ramp"`
	Newton float64 `json:"newton"`
}

type foreignAnswer struct {
	P, U, Fitted []float64
	Objective    float64
}

// own is what the package says of the same history.
type own struct {
	p, u      []float64
	objective float64
	fitted    []float64
	spread    float64
}

// pythonWithSciPy returns the interpreter, or skips; where GAUGELOG_CI=1
// nothing is skipped.
func pythonWithSciPy(t *testing.T) string {
	t.Helper()
	why := ""
	for _, name := range []string{"/usr/bin/python3", "python3"} {
		path, err := exec.LookPath(name)
		if err != nil {
			why = "no python3 on this machine"
			continue
		}
		if err := exec.Command(path, "-c", "import scipy.optimize").Run(); err == nil {
			return path
		}
		why = "python3 here has no SciPy"
	}
	if os.Getenv("GAUGELOG_CI") == "1" {
		t.Fatal(why + ", and GAUGELOG_CI=1 lets no test skip")
	}
	t.Skip(why)
	return ""
}

// history simulates number k of the comparison and fits it, with the noise
// held as drawn so that both sides minimise the same sum.
func history(t *testing.T, k int) (foreignHistory, own) {
	t.Helper()
	rng := rand.New(rand.NewPCG(uint64(k), 77))
	m := Models()[k%5]
	p := ladder()
	p.coarse, p.seed = true, uint64(k)+300
	p.d1 = p.d0 * (0.05 + 0.1*rng.Float64())
	p.n = 0.15 + 0.2*rng.Float64()
	p.noise = 0.0005 * (1 + rng.Float64())
	in := p.input()
	s := &in.Series[0]
	law := fixed(m, s.Changes, 0, p.d0, p.d1)
	switch m {
	case Log:
		law.shape = math.Log(0.05 + 0.3*rng.Float64())
	case StandardSolid:
		law.shape = math.Log(10 + 40*rng.Float64())
	case Burgers:
		law.shape, law.linear = math.Log(5+20*rng.Float64()), append(law.linear, p.d1/300)
	}
	h := foreignHistory{Model: m, Time: s.TimeH, U: s.U, Knock: 40 + 80*rng.Float64(), Scale: 1, Fade: 0.5 + 3*rng.Float64()}
	if k >= 5 {
		h.Slow = 0.001 * rng.Float64()
	}
	var x float64
	for i, at := range s.TimeH {
		if m != Power && m != KelvinChain {
			s.SagMM[i] = law.At(at) + p.noise*rng.NormFloat64()
		}
		d := 0.0
		if i > 0 {
			d = math.Exp(-(at - s.TimeH[i-1]) / h.Fade)
		}
		x = d*x + h.Slow*math.Sqrt(1-d*d)*rng.NormFloat64()
		s.SagMM[i] += x
	}
	if m != KelvinChain {
		in.Offsets = []Offset{{Name: "knock", AtH: h.Knock}}
	}
	tMin, tMax, _ := in.span()
	sys := newSystem(&in, familyOf(m, tMin, tMax), nil)
	sys.parts[0].noise = newNoise(s.TimeH, s.U, 1, h.Slow, h.Fade)
	sol, err := sys.solve(nil, exactly)
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range s.Changes {
		h.Changes = append(h.Changes, foreignChange{c.AtH, c.RampH, c.Newton})
	}
	h.Sag, h.Taus, h.Lambda = s.SagMM, sys.fam.taus, sys.fam.lambda
	return h, ownOf(sys, sol, &h)
}

// ownOf gathers the package's answer, and a start for the other side: the
// truth's neighbourhood, not the answer.
func ownOf(sys *system, sol *solution, h *foreignHistory) own {
	o := own{objective: sol.chi2, p: append([]float64(nil), sol.law...)}
	lo, hi := math.Inf(1), math.Inf(-1)
	for i, r := range sys.residuals(sol)[0] {
		y := h.Sag[i] - r
		o.fitted = append(o.fitted, y)
		lo, hi = min(lo, y), max(hi, y)
	}
	o.spread = hi - lo
	if h.Model == KelvinChain {
		for i := range len(h.Taus) - 2 {
			d := h.Lambda * (sol.law[i+1] - 2*sol.law[i+2] + sol.law[i+3])
			o.objective += d * d
		}
		return o
	}
	shape := sol.q[0]
	n := len(sol.law)
	for j := range n {
		o.u = append(o.u, math.Sqrt(sol.cov.At(j, j)))
	}
	u := math.Sqrt(sol.cov.At(n, n))
	if sys.fam.logShape {
		shape = math.Exp(shape)
		u *= shape
	}
	o.p, o.u = append(o.p, sol.own[0][0], shape), append(o.u, sol.ownU[0][0], u)
	for _, v := range sol.law {
		h.Start = append(h.Start, v*1.1)
	}
	h.Start = append(h.Start, 0, shape*1.1)
	return o
}

// SciPy (scipy.optimize.curve_fit, MINPACK's Levenberg-Marquardt, and
// scipy.optimize.nnls) fits 30 simulated histories with ramps, an unloading, a
// knock and correlated noise: the same least sum, the same fit, the same
// parameters and uncertainties.
func TestSciPyAgrees(t *testing.T) {
	python := pythonWithSciPy(t)
	var histories []foreignHistory
	var mine []own
	for k := range 30 {
		h, o := history(t, k)
		histories, mine = append(histories, h), append(mine, o)
	}
	b, err := json.Marshal(histories)
	if err != nil {
		t.Fatal(err)
	}
	file := filepath.Join(t.TempDir(), "histories.json")
	if err := os.WriteFile(file, b, 0o600); err != nil {
		t.Fatal(err)
	}
	cmd := exec.Command(python, "testdata/scipy_fit.py", file)
	cmd.Stderr = os.Stderr
	printed, err := cmd.Output()
	if err != nil {
		t.Fatal(err)
	}
	var theirs []foreignAnswer
	if err := json.Unmarshal(printed, &theirs); err != nil || len(theirs) != len(mine) {
		t.Fatalf("%d answers, %v", len(theirs), err)
	}
	var worst [4]float64
	for k, o := range mine {
		a := theirs[k]
		d := math.Abs(o.objective/a.Objective - 1)
		worst[0] = max(worst[0], d)
		if d > 1e-8 {
			t.Errorf("history %d, %s: least sum %.12g, SciPy's %.12g", k, histories[k].Model, o.objective, a.Objective)
		}
		for i := range o.fitted {
			worst[1] = max(worst[1], math.Abs(o.fitted[i]-a.Fitted[i])/o.spread)
		}
		for j := range o.u {
			worst[2] = max(worst[2], math.Abs(o.p[j]-a.P[j])/o.u[j])
			worst[3] = max(worst[3], math.Abs(o.u[j]/a.U[j]-1))
			if math.Abs(o.p[j]-a.P[j]) > 0.01*o.u[j] {
				t.Errorf("history %d, %s: unknown %d is %.9g u %.3g, SciPy's %.9g", k, histories[k].Model, j, o.p[j], o.u[j], a.P[j])
			}
		}
	}
	t.Logf("worst of 30: least sum %.2g relative, fitted %.2g of the range, parameters %.2g u, uncertainties %.2g relative", worst[0], worst[1], worst[2], worst[3])
	if worst[1] > 1e-6 {
		t.Errorf("fitted values differ by %g of the range", worst[1])
	}
	if worst[3] > 5e-3 {
		t.Errorf("uncertainties differ by %g", worst[3])
	}
}
