package stiffness

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"gaugelog/config"
)

func codes(e *Estimate) map[string]bool {
	out := map[string]bool{}
	for _, w := range e.Warnings {
		out[w.Code] = true
	}
	return out
}

func mustCompute(t *testing.T, in Input) *Estimate {
	t.Helper()
	e, err := Compute(in)
	if err != nil {
		t.Fatal(err)
	}
	return e
}

func TestCautions(t *testing.T) {
	for _, c := range []struct {
		name  string
		spoil func(*plank, *Input)
		want  []string
		not   []string
	}{
		{"as it is", func(*plank, *Input) {}, []string{"section-without-uncertainty", "loads-without-uncertainty", "plunger-unknown", "friction-bound"},
			[]string{"poor-fit", "taper", "half-corrected", "supports-unmeasured", "large-deflection", "twist", "seating", "not-linear", "gravity-unplaced", "wiring"}},
		{"taper", func(p *plank, _ *Input) { p.rig.Specimen.Section.Depth = lengths(37.7, 38, 38.3) }, []string{"taper"}, nil},
		{"gravity", func(p *plank, _ *Input) { p.rig.Gravity = config.Gravity{} }, []string{"gravity-unplaced"}, nil},
		{"one seat blind", func(_ *plank, in *Input) { without(in, "s2") }, []string{"half-corrected"}, []string{"supports-unmeasured"}},
		{"both seats blind", func(_ *plank, in *Input) { without(in, "s1"); without(in, "s2") }, []string{"supports-unmeasured"}, []string{"half-corrected"}},
		{"seating", func(_ *plank, in *Input) { scale(in, 0, 1.08) }, []string{"seating"}, nil},
		{"stiffening", func(_ *plank, in *Input) {
			scale(in, 1, 0.98)
			scale(in, 2, 0.95)
			scale(in, 3, 0.92)
		}, []string{"not-linear"}, []string{"seating"}},
		{"large", func(_ *plank, in *Input) {
			for k := range in.Steps {
				scale(in, k, 8)
				for i := range in.Steps[k].Loads {
					in.Steps[k].Loads[i].N *= 8
				}
			}
		}, []string{"large-deflection"}, nil},
		{"twist", func(p *plank, in *Input) {
			p.rig.Gauges[4].At = p.rig.Gauges[3].At
			for k := range in.Steps {
				in.Steps[k].Gauges[4].MM = in.Steps[k].Gauges[3].MM * 1.03
			}
		}, []string{"twist"}, nil},
	} {
		p := newPlank()
		in := noisy(p.ladder(), 0.002, rand.New(rand.NewPCG(8, 9)))
		c.spoil(p, &in)
		got := codes(mustCompute(t, in))
		for _, w := range c.want {
			if !got[w] {
				t.Errorf("%s: no %s in %v", c.name, w, got)
			}
		}
		for _, w := range c.not {
			if got[w] {
				t.Errorf("%s: %s in %v", c.name, w, got)
			}
		}
	}
}

// A load taken off again leaves the apparent modulus what it was: without
// shear and yielding supports, the modulus itself.
func TestApparentModulusOfLoopOfLoads(t *testing.T) {
	p := newPlank()
	p.s = math.Inf(1)
	in := p.ladder()
	off := StepObs{Name: "bare"}
	for g := range p.rig.Gauges {
		sum := 0.0
		for _, s := range in.Steps {
			sum += s.Gauges[g].MM
		}
		off.Gauges = append(off.Gauges, Obs{Gauge: g, MM: -sum, U: 0.001})
	}
	in.Steps = append(in.Steps, off)
	e := mustCompute(t, in)
	if e.ApparentModulus == nil {
		t.Fatal("no apparent modulus")
	}
	// The shear assumed in the fit pushes a little at the fitted supports.
	relative(t, "apparent modulus", e.ApparentModulus.Value, 11800, 1e-4)
}

// The factor for large sags against the exact shape of a beam on two fixed
// knives with vertical reactions under a centre load: the curvature is M/EI, so
// the sine of its angle is the straight-beam slope, integrated here by
// trapezoids.
func TestLargeDeflectionFactor(t *testing.T) {
	for _, steep := range []float64{0.02, 0.06, 0.12} { // slope at the knives
		const n = 200_000
		bent, straight := 0.0, 0.0
		slope := func(i int) float64 { // P (L^2 - 4 x^2)/(16 EI), x to the middle
			x := float64(i) / n
			return steep * (1 - x*x)
		}
		for i := range n {
			a, b := slope(i), slope(i+1)
			straight += (a + b) / 2 / (2 * n)
			bent += (math.Tan(math.Asin(a)) + math.Tan(math.Asin(b))) / 2 / (2 * n)
		}
		got, want := LargeDeflection(straight), bent/straight-1
		relative(t, "factor", got, want, 2*steep*steep)
	}
}

func scale(in *Input, step int, by float64) {
	for i := range in.Steps[step].Gauges {
		in.Steps[step].Gauges[i].MM *= by
	}
}

func without(in *Input, gauge string) {
	for k := range in.Steps {
		var left []Obs
		for _, o := range in.Steps[k].Gauges {
			if in.Rig.Gauges[o.Gauge].Name != gauge {
				left = append(left, o)
			}
		}
		in.Steps[k].Gauges = left
	}
}

// Two equal loads at thirds of the span, a bar between them and a gauge at
// mid-span: the moduli of EN 408 and ASTM D198 by their own definitions.
func TestModuliByStandards(t *testing.T) {
	p := newPlank()
	p.rig.Gauges = []config.Gauge{
		{Name: "mid", At: length(1050, 0), Sees: "beam", Resolution: length(0.001, 0)},
		{Name: "bar", At: length(1050, 0), Sees: "beam", Bar: lengths(800, 1300), Resolution: length(0.001, 0)},
	}
	mid := p.sag(1050, 700, 200) + p.sag(1050, 1400, 200)
	end := p.sag(800, 700, 200) + p.sag(800, 1400, 200)
	e := mustCompute(t, Input{Rig: p.rig, Steps: []StepObs{{Name: "1", Loads: []StepLoad{{Load: "a", N: 200}, {Load: "b", N: 200}},
		Gauges: []Obs{{Gauge: 0, MM: mid, U: 0.001}, {Gauge: 1, MM: mid - end, U: 0.001}}}}})
	relative(t, "ratio", e.StiffnessAt[0].Ratio.Value, 400/mid, 1e-12)
	if e.StiffnessAt[0].Global == nil || e.StiffnessAt[1].Local == nil {
		t.Fatalf("global %v, local %v", e.StiffnessAt[0].Global, e.StiffnessAt[1].Local)
	}
	// Between the loads the moment is constant: the local modulus is E.
	relative(t, "local", e.StiffnessAt[1].Local.Value, 11800, 1e-9)
	bent := 200 * 700 * (3*2100.0*2100 - 4*700*700) / (24 * p.ei)
	relative(t, "global", e.StiffnessAt[0].Global.Value, 11800*bent/mid, 1e-9)
	if e.StiffnessAt[0].Local != nil || e.StiffnessAt[1].Global != nil {
		t.Error("a modulus was given for the wrong gauge")
	}
	names := map[string]bool{}
	for _, s := range e.Standards {
		names[s.Standard] = s.Includes != "" && s.Modulus.U > 0
	}
	if len(names) != 4 {
		t.Errorf("standards %v, want EN 408 and ASTM D198, two each", names)
	}
	// Not rectangular, or not symmetric: no such modulus.
	off := length(500, 0)
	p.rig.Loads[0].At = &off
	e = mustCompute(t, Input{Rig: p.rig, Steps: []StepObs{{Name: "1", Loads: []StepLoad{{Load: "a", N: 200}, {Load: "b", N: 200}}, Gauges: []Obs{{Gauge: 0, MM: mid, U: 0.001}}}}})
	if len(e.Standards) != 0 {
		t.Errorf("standards for loads off their places: %v", e.Standards)
	}
}

// No figure of an estimate is ever NaN or infinite.
func TestNoNaN(t *testing.T) {
	for seed := range uint64(5) {
		in, _ := simulate(rand.New(rand.NewPCG(99, seed)))
		e := mustCompute(t, in)
		for name, q := range map[string]*Quantity{"modulus": e.Modulus, "apparent": e.ApparentModulus, "shear": e.Shear, "shear modulus": e.ShearModulus, "bending": &e.Bending} {
			for _, v := range []float64{q.Value, q.U, q.DOF, q.K, q.U95} {
				if math.IsNaN(v) || math.IsInf(v, 0) {
					t.Errorf("%s: %+v", name, *q)
				}
			}
			if q.U <= 0 {
				t.Errorf("%s has no uncertainty", name)
			}
		}
		for _, l := range append(e.Budget, e.BendingBudget...) {
			if math.IsNaN(l.Share + l.Sensitivity + l.U) {
				t.Errorf("budget line %+v", l)
			}
		}
	}
}

// Of two gauges on opposite edges the mean counts: turned one up and one down
// alike, they give the modulus of the beam that does not turn, and what the
// turn leaves open stands in the budget.
func TestTwistLeavesTheMean(t *testing.T) {
	for _, turn := range []float64{0, 0.03} {
		p := newPlank()
		p.c = [2]float64{2e-4, 3e-4}
		p.rig.Gauges[4].At = p.rig.Gauges[3].At
		in := p.ladder()
		for k := range in.Steps {
			mid := in.Steps[k].Gauges[3].MM
			in.Steps[k].Gauges[3].MM, in.Steps[k].Gauges[4].MM = mid*(1-turn), mid*(1+turn)
		}
		e := mustCompute(t, in)
		relative(t, "E", e.Modulus.Value, 11800, 2e-3)
		if turned := codes(e)["twist"]; turned != (turn > 0) || e.Fit.P < 0.5 {
			t.Errorf("turned by %g: twist told %v, p %.2g", turn, turned, e.Fit.P)
		}
		share := 0.0
		for _, l := range e.Budget {
			if strings.Contains(l.Input, "off the middle") {
				share = l.U
			}
		}
		// A difference of twice the turn over the width, read 1/50 of it off.
		if want := 2 * turn / 50 / math.Sqrt(3); turn > 0 && math.Abs(share-want) > 0.01*want || share == 0 {
			t.Errorf("turned by %g: the budget bounds it at %.3g, want %.3g", turn, share, want)
		}
	}
}

// What a load off the middle does, against its own closed form for a square
// bar, whose torsion constant is 0.1406 a^4 (the series' tabled value, Roark;
// from memory), and 2 I of a round one.
func TestTwistBound(t *testing.T) {
	square, err := SectionOf(config.Section{Shape: "rectangle", Width: lengths(20), Depth: lengths(20)})
	if err != nil {
		t.Fatal(err)
	}
	relative(t, "torsion of a square", square.Torsion, 0.1406*20*20*20*20, 5e-3)
	round, err := SectionOf(config.Section{Shape: "round", Diameter: lengths(20)})
	if err != nil {
		t.Fatal(err)
	}
	relative(t, "torsion of a round bar", round.Torsion, math.Pi*math.Pow(20, 4)/32, 1e-12)
	p := newPlank()
	in := p.ladder()
	m, err := prepare(&in)
	if err != nil {
		t.Fatal(err)
	}
	got, _ := m.turn(nil)
	i, j, l, e := 140*38*38*38/12.0, m.sec.Torsion, 2100.0, 140.0/50/math.Sqrt(3)
	// E/G = 16: (P e L / 4 G J) y over P L^3 / 48 E I.
	relative(t, "share", got, (e*e*l/(4*j/16))/(l*l*l/(48*i)), 1e-12)
	p.rig.Specimen.Section = config.Section{Shape: "general", SecondMoment: &config.SecondMoment{Quantity: config.Quantity{Value: i}}}
	if !codes(mustCompute(t, in))["twist-not-bounded"] {
		t.Error("a section without torsion is not told of")
	}
}

// What nobody knows of a support makes the modulus less sure, by what up to a
// thousandth of a millimetre per newton there would do to it.
func TestUnseenSupportsWidenTheModulus(t *testing.T) {
	p := newPlank()
	seen := mustCompute(t, p.ladder())
	in := p.ladder()
	without(&in, "s1")
	without(&in, "s2")
	blind := mustCompute(t, in)
	var lines int
	var theirs float64
	for _, l := range blind.Budget {
		if strings.HasPrefix(l.Input, "yielding of support") {
			lines, theirs = lines+1, theirs+l.Sensitivity*l.U*l.Sensitivity*l.U
		}
	}
	if lines != 2 || blind.Modulus.U <= seen.Modulus.U || blind.Modulus.U*blind.Modulus.U < theirs {
		t.Errorf("u of E with supports seen %g, unseen %g, of which %d lines bring %g", seen.Modulus.U, blind.Modulus.U, lines, math.Sqrt(theirs))
	}
	// The true supports yield by 2.5e-4 mm/N, which is left in.
	if d := math.Abs(blind.Modulus.Value - seen.Modulus.Value); d > blind.Modulus.U95 {
		t.Errorf("E without eyes on the supports is off by %g, U95 %g", d, blind.Modulus.U95)
	}
}
