package beam

import (
	"errors"
	"math"
	"strings"
	"testing"
)

func TestLayoutErrors(t *testing.T) {
	good := Beam{Length: 1000, EI: 1e9, S: math.Inf(1), Supports: []Support{{Name: "left", At: 0}, {Name: "right", At: 1000}}}
	load := []Load{Point(500, 100)}
	for _, c := range []struct {
		name  string
		spoil func(*Beam, *[]Load)
		want  string
	}{
		{"no length", func(b *Beam, _ *[]Load) { b.Length = 0 }, "0\u202fmm long"},
		{"length NaN", func(b *Beam, _ *[]Load) { b.Length = math.NaN() }, "long"},
		{"no stiffness", func(b *Beam, _ *[]Load) { b.EI = 0 }, "bending stiffness"},
		{"shear NaN", func(b *Beam, _ *[]Load) { b.S = math.NaN() }, "shear stiffness"},
		{"one pin", func(b *Beam, _ *[]Load) { b.Supports = b.Supports[:1] }, "can turn or fall"},
		{"no support", func(b *Beam, _ *[]Load) { b.Supports = nil }, "can turn or fall"},
		{"twice the same place", func(b *Beam, _ *[]Load) { b.Supports[1].At = 0 }, "left and right are both"},
		{"support off", func(b *Beam, _ *[]Load) { b.Supports[1].At = 1001 }, "right at 1001\u202fmm is off the beam"},
		{"compliance negative", func(b *Beam, _ *[]Load) { b.Supports[1].Compliance = -1 }, "compliance of -1"},
		{"spring off", func(b *Beam, _ *[]Load) { b.Springs = []Spring{{Name: "mid", At: -1}} }, "spring mid"},
		{"spring only", func(b *Beam, _ *[]Load) {
			b.Supports = b.Supports[:1]
			b.Springs = []Spring{{At: 900, Stiffness: 1}}
		}, "can turn or fall"},
		{"load off", func(_ *Beam, l *[]Load) { (*l)[0] = Load{Name: "pan", From: 1200, To: 1200, Force: 1} }, "load pan at 1200\u202fmm is off the beam"},
		{"load half off", func(_ *Beam, l *[]Load) { (*l)[0] = Spread(900, 1200, 1) }, "from 900\u202fmm to 1200\u202fmm"},
		{"load backwards", func(_ *Beam, l *[]Load) { (*l)[0] = Spread(900, 100, 1) }, "runs backwards"},
		{"load NaN", func(_ *Beam, l *[]Load) { (*l)[0].Force = math.NaN() }, "is NaN\u202fN"},
		{"rigid and statically indeterminate", func(b *Beam, _ *[]Load) {
			b.EI = math.Inf(1)
			b.Supports = append(b.Supports, Support{At: 500})
		}, "condition number"},
	} {
		b, loads := good, append([]Load(nil), load...)
		b.Supports = append([]Support(nil), good.Supports...)
		c.spoil(&b, &loads)
		_, err := b.Solve(loads)
		var layout *LayoutError
		if !errors.As(err, &layout) {
			t.Errorf("%s: error %v is no LayoutError", c.name, err)
			continue
		}
		if !strings.Contains(layout.What, c.want) || layout.Mend == "" {
			t.Errorf("%s: %q (mend %q), want %q in it", c.name, layout.What, layout.Mend, c.want)
		}
	}
	if _, err := good.Influence([]float64{2000}, load); err == nil {
		t.Error("an influence place off the beam was accepted")
	}
	if _, err := good.Influence(nil, load); err == nil {
		t.Error("an empty influence matrix was accepted")
	}
}

// A load a micrometre beside a support or a gauge costs no digits.
func TestShortDistances(t *testing.T) {
	const l, p = 2400.0, 1000.0
	for _, eps := range []float64{1, 1e-3, 1e-6} {
		b := Beam{From: -eps, Length: l + 2*eps, EI: refEI, S: math.Inf(1), Supports: []Support{{At: 0}, {At: l}},
			Springs: []Spring{{At: eps, Stiffness: 0.02}}}
		s, err := b.Solve([]Load{Point(l/2, p), Point(l/2+eps, p), Point(2*eps, 0)})
		if err != nil {
			t.Fatal(err)
		}
		a := l/2 + eps
		bb := l - a
		mid := l / 2
		want := p*l*l*l/(48*refEI) + p*bb*mid*(l*l-bb*bb-mid*mid)/(6*l*refEI)
		if got := s.Deflection(mid); math.Abs(got-want) > 1e-9*want {
			t.Errorf("%g mm apart: %.13g, want %.13g", eps, got, want)
		}
	}
}

// Spring at mid-span: k c / (1 + k c) of the sag is taken (practice: two
// springs in parallel).
func TestSpringAndYieldingSupport(t *testing.T) {
	const l, p, k, cs = 1000.0, 50.0, 3.0, 0.002
	b := Beam{Length: l, EI: 1e9, S: math.Inf(1), Supports: []Support{{At: 0, Compliance: cs}, {At: l, Compliance: 3 * cs}}, Springs: []Spring{{At: l / 2, Stiffness: k}}}
	s, err := b.Solve([]Load{Point(l/2, p)})
	if err != nil {
		t.Fatal(err)
	}
	c := l*l*l/(48*1e9) + (cs+3*cs)/4
	if want := p * c / (1 + k*c); math.Abs(s.Deflection(l/2)-want) > 1e-12*want {
		t.Errorf("sag %.13g, want %.13g", s.Deflection(l/2), want)
	}
	if want := p * k * c / (1 + k*c); math.Abs(s.SpringForces()[0].Force-want) > 1e-12*want {
		t.Errorf("spring %.13g N, want %.13g", s.SpringForces()[0].Force, want)
	}
}

// A settled support turns a beam on two pins and bends one on three.
func TestSettlement(t *testing.T) {
	b := Beam{Length: 1000, EI: 1e9, S: math.Inf(1), Supports: []Support{{At: 0}, {At: 1000, Settlement: 2}}}
	s, err := b.Solve(nil)
	if err != nil {
		t.Fatal(err)
	}
	if got := s.Deflection(250); math.Abs(got-0.5) > 1e-12 {
		t.Errorf("rigid turn: %g, want 0.5", got)
	}
	b.Supports = []Support{{At: 0}, {At: 500, Settlement: 2}, {At: 1000}}
	if s, err = b.Solve(nil); err != nil {
		t.Fatal(err)
	}
	// A centre force that bends the beam by 2 mm: 48 EI d / L^3.
	if got, want := s.Reactions()[1].Force, -48*1e9*2/1e9; math.Abs(got-want) > 1e-9*96 {
		t.Errorf("force at the settled support %g N, want %g", got, want)
	}
}

func TestLiftOff(t *testing.T) {
	b := Beam{From: -500, Length: 2000, EI: 1e9, S: math.Inf(1), LiftOff: true,
		Supports: []Support{{Name: "a", At: 0}, {Name: "b", At: 500}, {Name: "c", At: 1000}}}
	s, err := b.Solve([]Load{Point(1500, 10), Point(600, 100)})
	if err != nil {
		t.Fatal(err)
	}
	for _, r := range s.Reactions() {
		if r.Force < 0 {
			t.Errorf("support %s pulls with %g N", r.Name, r.Force)
		}
		if r.Lifted && s.Deflection(r.At) > 1e-12 {
			t.Errorf("the beam sinks %g mm through support %s", s.Deflection(r.At), r.Name)
		}
	}
	up := s.Uplift()
	if len(up) != 1 || up[0].Name != "a" || !up[0].Lifted {
		t.Errorf("uplift %+v, want support a lifted", up)
	}
	// Two pins remain: statics gives the rest.
	if got, want := s.Reactions()[1].Force, 100*0.8-10*1.0; math.Abs(got-want) > 1e-9*100 {
		t.Errorf("reaction b %g N, want %g", got, want)
	}
	b.LiftOff = false
	if s, err = b.Solve([]Load{Point(1500, 10), Point(600, 100)}); err != nil {
		t.Fatal(err)
	}
	if up = s.Uplift(); len(up) != 1 || up[0].Force >= 0 {
		t.Errorf("a held beam reports uplift %+v, want one support that pulls", up)
	}
	b.LiftOff = true
	b.Supports = b.Supports[:2]
	if _, err = b.Solve([]Load{Point(1500, 10)}); err == nil || !strings.Contains(err.Error(), "tips off") {
		t.Errorf("a tipping beam: %v", err)
	}
}

func BenchmarkSolve(b *testing.B) {
	rig := Beam{From: -150, Length: 2400, EI: 7e9, S: 3e6, Supports: []Support{{At: 0, Compliance: 5e-5}, {At: 2100, Compliance: 7e-5}}}
	loads := []Load{Point(700, 50), Point(1400, 50)}
	for range b.N {
		s, err := rig.Solve(loads)
		if err != nil {
			b.Fatal(err)
		}
		_ = s.Deflection(1050)
	}
}
