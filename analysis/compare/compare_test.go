package compare

import (
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"gaugelog/analysis"
	"gaugelog/config"
)

func q(v, u float64) *analysis.Q {
	out := &analysis.Q{Value: v, Unit: "MPa"}
	if u > 0 {
		out.U = &u
	}
	return out
}

// subject is a run of a 40 mm deep, 100 mm wide board over a span, with a
// budget of the modulus: relative errors by input.
func subject(t *testing.T, run, specimen string, span float64, e float64, budget map[string]float64) Subject {
	t.Helper()
	text := fmt.Sprintf(`specimen: {name: %s, section: {shape: rectangle, width: 100 mm, depth: 40 mm, u: 0.02 mm}, length: 2000 mm}
gravity: {latitude: 55.9, height: 60 m}
supports: [{name: l, at: 0 mm}, {name: r, at: %g mm}]
gauges: [{name: mid, at: %g mm, sense: down, resolution: 0.001 mm, serial_number: "1187", calibration: {gain: 1.0004, u_gain: 0.002, date: 2026-09-14}}]
loads: [{name: pan, at: %g mm}]
read: {creep_gauge: mid}
`, specimen, span, span/2, span/2)
	rig, err := config.Parse("rig.yaml", []byte(text))
	if err != nil {
		t.Fatal(err)
	}
	r := &analysis.Result{}
	u2 := 0.0
	var names []string
	for n := range budget {
		names = append(names, n)
	}
	slices.Sort(names)
	for _, n := range names {
		u2 += budget[n] * budget[n]
		// One unit of the input moves the modulus by its own size.
		r.Stiffness.Budget = append(r.Stiffness.Budget, analysis.BudgetLine{Input: n, Type: "B", UInput: analysis.Q{Value: math.Abs(budget[n])}, Sensitivity: math.Copysign(e, budget[n])})
	}
	r.Stiffness.Modulus, r.Stiffness.ApparentModulus = q(e, e*math.Sqrt(u2)), q(e, e*math.Sqrt(u2))
	r.Steps = []analysis.Step{{Step: "l1", Kilogram: map[string]float64{"pan": 12.4}}}
	return Subject{Run: run, Rig: rig, Result: r}
}

var budget = map[string]float64{"gain of gauge mid": 0.002, "gravity": 0.0003, "weight of load pan": 0.001, "readings": 0.001, "depth": 0.0015}

// Shared causes drop out: against 20,000 drawn pairs of tests whose gain,
// gravity and masses are the same and whose readings and sections are not.
func TestSharedCausesCancel(t *testing.T) {
	a, b := subject(t, "r1", "a", 600, 1200, budget), subject(t, "r2", "b", 600, 1150, budget)
	c, err := Compare([]Subject{a, b})
	if err != nil {
		t.Fatal(err)
	}
	d := c.Figures[0].Differences[0]
	rng := rand.New(rand.NewPCG(1, 2))
	var sum, sum2 float64
	const n = 20000
	for range n {
		common := 0.002*rng.NormFloat64() + 0.0003*rng.NormFloat64() + 0.001*rng.NormFloat64()
		own := func() float64 { return 0.001*rng.NormFloat64() + 0.0015*rng.NormFloat64() }
		x := 1150*(1+common+own()) - 1200*(1+common+own())
		sum, sum2 = sum+x, sum2+x*x
	}
	sd := math.Sqrt(sum2/n - sum*sum/n/n)
	if math.Abs(*d.Value.U/sd-1) > 0.03 {
		t.Errorf("u %g, drawn %g", *d.Value.U, sd)
	}
	if *d.UIndependent <= *d.Value.U || d.Value.Value != -50 || !d.Beyond {
		t.Errorf("%+v", d)
	}
	if want := []string{"gain of gauge mid", "gravity", "weight of load pan"}; !slices.Equal(d.Shared, want) {
		t.Errorf("shared %q, want %q", d.Shared, want)
	}
}

// What is not the same is not shared: another gauge, another place, other
// masses.
func TestWhatIsNotShared(t *testing.T) {
	for name, change := range map[string]func(*Subject){
		"gain of gauge mid":  func(s *Subject) { s.Rig.Gauges[0].SerialNumber = "1188" },
		"gravity":            func(s *Subject) { s.Rig.Gravity.Latitude.Value = 10 },
		"weight of load pan": func(s *Subject) { s.Result.Steps[0].Kilogram["pan"] = 12.5 },
	} {
		a, b := subject(t, "r1", "a", 600, 1200, budget), subject(t, "r2", "b", 600, 1150, budget)
		change(&b)
		c, err := Compare([]Subject{a, b})
		if err != nil {
			t.Fatal(err)
		}
		if d := c.Figures[0].Differences[0]; slices.Contains(d.Shared, name) || len(d.Shared) != 2 {
			t.Errorf("%s: shared %q", name, d.Shared)
		}
	}
}

// By hand: 10, 12, 11, 15 have mean 12, s^2 = (4+0+1+9)/3, and t(3) = 3.182
// (JCGM 100:2008, table G.2).
func TestSample(t *testing.T) {
	s := sampleOf([]float64{10, 12, 11, 15})
	sd := math.Sqrt(14.0 / 3)
	if s.N != 4 || s.Mean != 12 || math.Abs(s.SD-sd) > 1e-12 || s.Median != 11.5 || s.Least != 10 || s.Most != 15 || math.Abs(s.Half-3.182*sd/2) > 1e-3 {
		t.Errorf("%+v", s)
	}
}

// A beam of E = 11500 MPa and G = 700 MPa, by Timoshenko's closed form for a
// load at mid-span: 1/E_app = 1/E + 1.2 (h/L)^2 / G for a rectangle.
func spansOf(t *testing.T, spans ...float64) []Subject {
	var list []Subject
	for i, l := range spans {
		app := 1 / (1/11500.0 + 1.2*40*40/(l*l)/700)
		list = append(list, subject(t, fmt.Sprint("r", i), "one", l, app, budget))
	}
	return list
}

func TestVariableSpan(t *testing.T) {
	c, err := Compare(spansOf(t, 1600, 800, 400, 240))
	if err != nil {
		t.Fatal(err)
	}
	s := c.Spans
	if s == nil {
		t.Fatalf("no spans: %+v", c.Warnings)
	}
	for _, v := range []struct{ got, want, tol float64 }{
		{s.Modulus.Value, 11500, 1e-9}, {s.ShearModulus.Value, 700, 1e-9}, {s.Points[3].X, 40 * 40 / 240.0 / 240, 1e-12},
		// Gain, gravity and masses stay whole: they scale every span alike.
		{s.Common, math.Sqrt(0.002*0.002 + 0.0003*0.0003 + 0.001*0.001), 1e-9},
	} {
		if math.Abs(v.got/v.want-1) > v.tol {
			t.Errorf("%g, want %g", v.got, v.want)
		}
	}
	if !(*s.Modulus.U > 11500*s.Common) || !(*s.ShearModulus.U > 700*s.Common) || math.Abs(s.Correlation) > 1 || s.DOF != 2 || s.Chi2 > 1e-12 {
		t.Errorf("%+v", s)
	}
	for _, f := range c.Figures {
		if f.Sample != nil {
			t.Errorf("%s of one specimen has sample statistics", f.Name)
		}
	}
}

// The uncertainties against draws: the line is fitted to moduli drawn with
// their own and common errors.
func TestVariableSpanCoverage(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 4))
	clean := spansOf(t, 1600, 800, 400, 240)
	first, err := VariableSpan(clean)
	if err != nil {
		t.Fatal(err)
	}
	var e, g []float64
	for range 1000 {
		rest := first.Common * rng.NormFloat64()
		list := slices.Clone(clean)
		for i := range list {
			r := *list[i].Result
			y := first.Points[i].Y * (1 + rest)
			r.Stiffness.ApparentModulus = q(1/(y+first.Points[i].U*rng.NormFloat64()), *clean[i].Result.Stiffness.ApparentModulus.U)
			list[i].Result = &r
		}
		s, err := VariableSpan(list)
		if err != nil {
			t.Fatal(err)
		}
		e, g = append(e, s.Modulus.Value), append(g, s.ShearModulus.Value)
	}
	relI := math.Hypot(0.02/100, 3*0.02/40)
	relA := math.Hypot(0.02/100, 0.02/40)
	for _, v := range []struct{ drawn, stated float64 }{
		{sampleOf(e).SD, math.Sqrt(math.Pow(*first.Modulus.U, 2) - math.Pow(11500*relI, 2))},
		{sampleOf(g).SD, math.Sqrt(math.Pow(*first.ShearModulus.U, 2) - math.Pow(700*relA, 2))},
	} {
		if math.Abs(v.drawn/v.stated-1) > 0.08 { // 1000 draws know it to 2.2 %
			t.Errorf("drawn %g, stated %g", v.drawn, v.stated)
		}
	}
}

func TestWhatSpansNeed(t *testing.T) {
	for name, c := range map[string]struct {
		change func([]Subject)
		want   string
	}{
		"one span":    {func(l []Subject) { copy(l, spansOf(t, 800, 800)) }, "span of 800\u202fmm"},
		"sections":    {func(l []Subject) { l[1].Rig.Specimen.Section.Depth[0].Value = 39 }, "different sections"},
		"clamp":       {func(l []Subject) { l[1].Rig.Supports[0].Kind = "clamp" }, "two plain supports"},
		"load aside":  {func(l []Subject) { l[1].Rig.Loads[0].At.Value += 50 }, "load pan does not hang in the middle"},
		"gauge aside": {func(l []Subject) { l[1].Rig.Gauges[0].At.Value += 50 }, "gauge mid does not stand"},
		"no modulus":  {func(l []Subject) { l[0].Result.Stiffness.ApparentModulus = nil }, "no apparent modulus"},
		"no u":        {func(l []Subject) { l[0].Result.Stiffness.ApparentModulus.U = nil }, "no uncertainty"},
		"stiffer when shorter": {func(l []Subject) {
			l[1].Result.Stiffness.ApparentModulus.Value = 20000
		}, "must be more than 0"},
		"specimens": {func(l []Subject) { l[1].Rig.Specimen.Name = "other" }, "different specimens"},
	} {
		list := spansOf(t, 1600, 400)
		c.change(list)
		_, err := VariableSpan(list)
		var mend *Error
		if err == nil || !strings.Contains(err.Error(), c.want) || !errors.As(err, &mend) || mend.Fix == "" {
			t.Errorf("%s: %v, want %q with a mend", name, err, c.want)
		}
	}
}

func TestNothingToCompare(t *testing.T) {
	a := subject(t, "r1", "a", 600, 1200, budget)
	for _, list := range [][]Subject{nil, {a}, {a, a}} {
		if _, err := Compare(list); err == nil {
			t.Errorf("%d runs were compared", len(list))
		}
	}
}

// A run without a figure is left out of it, and that is said; a prior's shear
// modulus is no finding.
func TestMissing(t *testing.T) {
	a, b, d := subject(t, "r1", "a", 600, 1200, budget), subject(t, "r2", "b", 600, 1150, budget), subject(t, "r3", "d", 600, 1100, budget)
	b.Result.Stiffness.Modulus = nil
	for _, s := range []Subject{a, b, d} {
		s.Result.Stiffness.ShearModulus, s.Result.Stiffness.ShearFrom = q(400, 40), "prior"
	}
	c, err := Compare([]Subject{a, b, d})
	if err != nil {
		t.Fatal(err)
	}
	if len(c.Figures) != 2 || c.Figures[0].Sample.N != 2 || c.Figures[1].Sample.N != 3 || len(c.Figures[1].Differences) != 3 {
		t.Errorf("%+v", c.Figures)
	}
	if len(c.Warnings) != 1 || !strings.Contains(c.Warnings[0].Text, "run r2 has no modulus") {
		t.Errorf("%+v", c.Warnings)
	}
}
