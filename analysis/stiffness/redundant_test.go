package stiffness

import (
	"math"
	"strings"
	"testing"

	"gaugelog/config"
)

// A propped cantilever under a centre load, with shear (beam_formulas.json,
// "propped_with_shear": phi = EI/(kappa G A L^2) = 1/100: y(L/2) =
// 5911/494400 P L^3/EI): redundant, so the fit must iterate.
func TestRecoversRedundantBeam(t *testing.T) {
	const l, load, e = 1000.0, 500.0, 8000.0
	const b, h = 40.0, 60.0
	i := b * h * h * h / 12
	// phi = E I/(kappa G A L^2) gives G.
	g := e * i / (5.0 / 6 * b * h * l * l / 100)
	mid := length(l/2, 0)
	rig := &config.Rig{
		Specimen: config.Specimen{Name: "p", Material: "other", Length: length(l, 0),
			Section: config.Section{Shape: "rectangle", Width: lengths(b), Depth: lengths(h)},
			Expect:  config.Expect{ShearModulus: stress(g)}},
		Supports: []config.Support{{Name: "simple", At: length(0, 0)}, {Name: "wall", At: length(l, 0), Kind: "clamp"}},
		Loads:    []config.Load{{Name: "pan", At: &mid}},
		Gauges:   []config.Gauge{{Name: "mid", At: mid, Sees: "beam", Resolution: length(0.001, 0)}},
	}
	mm := 5911.0 / 494400 * load * l * l * l / (e * i)
	in := Input{Rig: rig, Steps: []StepObs{{Name: "1", Loads: []StepLoad{{Load: "pan", N: load}}, Gauges: []Obs{{MM: mm, U: 0.001}}}}}
	est, err := Compute(in)
	if err != nil {
		t.Fatal(err)
	}
	relative(t, "E", est.Modulus.Value, e, 1e-9)
	if est.ShearFrom != "prior" || !strings.Contains(est.ShearWords, "expect.shear_modulus") {
		t.Errorf("shear from %q: %s", est.ShearFrom, est.ShearWords)
	}
}

// Three supports, the middle one yielding: the force method by hand. Centre
// support force R of a beam on span 2s, loads at both middles of the spans.
func TestRecoversYieldingMiddleSupport(t *testing.T) {
	const s, load, ei, c = 800.0, 300.0, 2e9, 0.004
	at := func(x, a, span float64) float64 { // SS load at a, times EI/P
		b := span - a
		if x > a {
			x, b = span-x, a
		}
		return b * x * (span*span - b*b - x*x) / (6 * span)
	}
	w0 := load * (at(s, s/2, 2*s) + at(s, 3*s/2, 2*s)) / ei
	r := w0 / (at(s, s, 2*s)/ei + c)
	sag := func(x float64) float64 {
		return load*(at(x, s/2, 2*s)+at(x, 3*s/2, 2*s))/ei - r*at(x, s, 2*s)/ei
	}
	one, two := length(s/2, 0), length(3*s/2, 0)
	rig := &config.Rig{
		Specimen: config.Specimen{Name: "p", Length: length(2*s, 0), Section: config.Section{Shape: "general", SecondMoment: &config.SecondMoment{Quantity: config.Quantity{Value: 2e5}}}},
		Supports: []config.Support{{Name: "l", At: length(0, 0)}, {Name: "m", At: length(s, 0)}, {Name: "r", At: length(2*s, 0)}},
		Loads:    []config.Load{{Name: "a", At: &one}, {Name: "b", At: &two}},
	}
	var obs []Obs
	for i, x := range []float64{s / 3, s / 2, s, 1.4 * s, 1.5 * s} {
		rig.Gauges = append(rig.Gauges, config.Gauge{Name: string(rune('a' + i)), At: length(x, 0), Sees: "beam", Resolution: length(0.001, 0)})
		obs = append(obs, Obs{Gauge: i, MM: sag(x), U: 0.001})
	}
	est, err := Compute(Input{Rig: rig, Steps: []StepObs{{Name: "1", Loads: []StepLoad{{Load: "a", N: load}, {Load: "b", N: load}}, Gauges: obs}}})
	if err != nil {
		t.Fatal(err)
	}
	relative(t, "EI", est.Bending.Value, ei, 1e-9)
	if q := est.Supports[1].Compliance; q == nil {
		t.Error("the middle support's compliance is missing")
	} else {
		relative(t, "compliance", q.Value, c, 1e-8)
	}
}

func TestBadInput(t *testing.T) {
	good := func() Input { return newPlank().ladder() }
	for _, c := range []struct {
		name  string
		spoil func(*Input)
		want  string
	}{
		{"no rig", func(in *Input) { in.Rig = nil }, "no rig"},
		{"no steps", func(in *Input) { in.Steps = nil }, "no gauge answered"},
		{"NaN", func(in *Input) { in.Steps[0].Gauges[0].MM = math.NaN() }, "not a number"},
		{"unknown load", func(in *Input) { in.Steps[0].Loads[0].Load = "x" }, "hangs load x"},
		{"zero depth", func(in *Input) { in.Rig.Specimen.Section.Depth = lengths(0) }, "depth of 0\u202fmm"},
		{"no span", func(in *Input) { in.Rig.Supports[1].At = length(0, 0) }, "are both at 0\u202fmm"},
		{"load off the beam", func(in *Input) { a := length(9000, 0); in.Rig.Loads[0].At = &a }, "off the beam"},
		{"gauge number", func(in *Input) { in.Steps[0].Gauges[0].Gauge = 99 }, "gauge number 99"},
		{"too few", func(in *Input) {
			in.Steps = in.Steps[:1]
			in.Steps[0].Gauges = in.Steps[0].Gauges[1:2]
		}, "cannot give"},
	} {
		in := good()
		c.spoil(&in)
		e, err := Compute(in)
		if err == nil || !strings.Contains(err.Error(), c.want) || !strings.Contains(err.Error(), "mend:") {
			t.Errorf("%s: %v (%v), want %q and a mend", c.name, err, e != nil, c.want)
		}
	}
}

// The greatest sag and its place for one load off the middle: the closed
// form of the practice (3d).
func TestLargestForUnsymmetricLoad(t *testing.T) {
	p := newPlank()
	p.rig.Loads = p.rig.Loads[:1]
	p.rig.Specimen.Section = config.Section{Shape: "general", SecondMoment: &config.SecondMoment{Quantity: config.Quantity{Value: p.ei / 11800}}}
	p.s = math.Inf(1)
	var obs []Obs
	for g, gauge := range p.rig.Gauges {
		if gauge.Sees == "beam" {
			obs = append(obs, Obs{Gauge: g, MM: p.sag(gauge.At.Value, 700, 300), U: 0.002})
		}
	}
	e, err := Compute(Input{Rig: p.rig, Steps: []StepObs{{Name: "1", Loads: []StepLoad{{Load: "a", N: 300}}, Gauges: obs}}})
	if err != nil {
		t.Fatal(err)
	}
	peak, err := e.Largest(0)
	if err != nil {
		t.Fatal(err)
	}
	const l, a = 2100.0, 700.0
	relative(t, "place", peak.At.Value, l-math.Sqrt((l*l-a*a)/3), 1e-7)
	relative(t, "sag", peak.Sag.Value, 300*a*math.Pow(l*l-a*a, 1.5)/(9*math.Sqrt(3)*l*p.ei), 1e-9)
	if !(peak.Sag.U > 0) || peak.Sag.U > 0.01 {
		t.Errorf("u of the greatest sag %g mm", peak.Sag.U)
	}
	if _, err := e.Largest(5); err == nil {
		t.Error("a step that is not there was accepted")
	}
}
