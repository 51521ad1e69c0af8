package beam

import (
	"bytes"
	"encoding/json"
	"math"
	"math/rand/v2"
	"os"
	"os/exec"
	"slices"
	"testing"
)

// outsideRig is what testdata/elements.py reads. S is nil for a beam that
// does not shear.
type outsideRig struct {
	From     float64          `json:"from"`
	Length   float64          `json:"length"`
	EI       float64          `json:"ei"`
	S        *float64         `json:"s"`
	Supports []outsideSupport `json:"supports"`
	Springs  []outsideSpring  `json:"springs"`
	Loads    []outsideLoad    `json:"loads"`
	Places   []float64        `json:"places"`
}

type outsideSupport struct {
	At         float64 `json:"at"`
	Clamp      bool    `json:"clamp"`
	Compliance float64 `json:"compliance"`
	Settlement float64 `json:"settlement"`
}

type outsideSpring struct {
	At        float64 `json:"at"`
	Stiffness float64 `json:"stiffness"`
}

type outsideLoad struct {
	From  float64 `json:"from"`
	To    float64 `json:"to"`
	Force float64 `json:"force"`
}

// outside draws a rig with overhangs at both ends, point and spread loads
// (some upward), yielding and settling supports, plungers and mostly shear.
func outside(rng *rand.Rand) outsideRig {
	within := func(lo, hi float64) float64 { return lo + (hi-lo)*rng.Float64() }
	r := outsideRig{From: within(-400, 400), Length: within(300, 5000), EI: math.Pow(10, within(7, 12)),
		Supports: []outsideSupport{}, Springs: []outsideSpring{}, Loads: []outsideLoad{}}
	flexible := r.Length * r.Length * r.Length / r.EI
	if rng.IntN(5) > 0 {
		s := r.EI / (r.Length * r.Length) * math.Pow(10, within(1, 3.5))
		r.S = &s
	}
	n := 2 + rng.IntN(3)
	for i := range n {
		s := outsideSupport{At: r.From + r.Length*(float64(i)+within(0.15, 0.85))/float64(n), Clamp: rng.IntN(6) == 0}
		if rng.IntN(2) == 0 {
			s.Compliance = flexible * math.Pow(10, within(-5, -2))
		}
		if rng.IntN(3) == 0 {
			s.Settlement = flexible * within(-2, 2)
		}
		r.Supports = append(r.Supports, s)
	}
	for range rng.IntN(3) {
		r.Springs = append(r.Springs, outsideSpring{At: r.From + r.Length*rng.Float64(), Stiffness: math.Pow(10, within(-3, 0)) / flexible})
	}
	for i := range 2 + rng.IntN(4) {
		a, b := r.From+r.Length*rng.Float64(), r.From+r.Length*rng.Float64()
		if i%2 == 0 {
			b = a
		}
		r.Loads = append(r.Loads, outsideLoad{From: min(a, b), To: max(a, b), Force: within(-100, 500)})
	}
	for range 9 {
		r.Places = append(r.Places, r.From+r.Length*rng.Float64())
	}
	r.Places = append(r.Places, r.From, r.From+r.Length)
	return r
}

func (r outsideRig) beam() (Beam, []Load) {
	b := Beam{From: r.From, Length: r.Length, EI: r.EI, S: math.Inf(1)}
	if r.S != nil {
		b.S = *r.S
	}
	for _, s := range r.Supports {
		b.Supports = append(b.Supports, Support{At: s.At, Clamp: s.Clamp, Compliance: s.Compliance, Settlement: s.Settlement})
	}
	for _, s := range r.Springs {
		b.Springs = append(b.Springs, Spring{At: s.At, Stiffness: s.Stiffness})
	}
	var loads []Load
	for _, l := range r.Loads {
		loads = append(loads, Spread(l.From, l.To, l.Force))
	}
	return b, loads
}

// The solver against an assembled finite-element model of 50 random rigs:
// displacements and reactions within 1e-6 of the greatest in the rig.
func TestAgainstFiniteElements(t *testing.T) {
	rng := rand.New(rand.NewPCG(50, 1))
	rigs := make([]outsideRig, 50)
	for i := range rigs {
		rigs[i] = outside(rng)
	}
	var answers []struct {
		Deflections []float64 `json:"deflections"`
		Reactions   []float64 `json:"reactions"`
	}
	python(t, "testdata/elements.py", rigs, &answers)
	if len(answers) != len(rigs) {
		t.Fatalf("%d answers for %d rigs", len(answers), len(rigs))
	}
	worst, worstForce := 0.0, 0.0
	for i, r := range rigs {
		b, loads := r.beam()
		s, err := b.Solve(loads)
		if err != nil {
			t.Fatalf("rig %d: %v", i, err)
		}
		sag, force := 0.0, 0.0
		for _, w := range answers[i].Deflections {
			sag = max(sag, math.Abs(w))
		}
		for _, f := range answers[i].Reactions {
			force = max(force, math.Abs(f))
		}
		for j, x := range r.Places {
			d := math.Abs(s.Deflection(x)-answers[i].Deflections[j]) / sag
			worst = max(worst, d)
			if !(d <= 1e-6) {
				t.Errorf("rig %d at %g mm: %.12g mm, the finite elements have %.12g", i, x, s.Deflection(x), answers[i].Deflections[j])
			}
		}
		for j, f := range answers[i].Reactions {
			d := math.Abs(s.Reaction(j).Force-f) / force
			worstForce = max(worstForce, d)
			if !(d <= 1e-6) {
				t.Errorf("rig %d, support %d: %.12g N, the finite elements have %.12g", i, j, s.Reaction(j).Force, f)
			}
		}
	}
	t.Logf("greatest difference of displacements %.2g, of reactions %.2g of the rig's greatest", worst, worstForce)
}

// python runs a script that takes JSON and gives JSON. It skips the test where
// there is no Python with SciPy, unless GAUGELOG_CI=1 makes it mandatory.
func python(t *testing.T, script string, in, out any) {
	t.Helper()
	found := slices.IndexFunc([]string{"/usr/bin/python3", "python3"}, func(name string) bool {
		return exec.Command(name, "-c", "import numpy, scipy").Run() == nil
	})
	if found < 0 {
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
	c := exec.Command([]string{"/usr/bin/python3", "python3"}[found], script)
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
