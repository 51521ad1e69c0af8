package stiffness

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"gaugelog/config"
)

func length(v, u float64) config.Length {
	return config.Length{Quantity: config.Quantity{Value: v, U: u}}
}
func number(v, u float64) *config.Number {
	return &config.Number{Quantity: config.Quantity{Value: v, U: u}}
}

// plank is a timber plank on two rollers with overhangs, two pans and gauges
// along it, of known stiffness: the tests' truth comes from the closed forms
// below, never from the solver under test.
type plank struct {
	rig      *config.Rig
	ei, s    float64
	c        [2]float64 // support compliances, mm/N
	width, h float64
}

func newPlank() *plank {
	p := &plank{width: 140, h: 38}
	a, b := length(700, 0), length(1400, 0)
	p.rig = &config.Rig{
		Specimen: config.Specimen{Name: "p", Material: "timber", From: length(-300, 0), Length: length(2600, 0),
			Section: config.Section{Shape: "rectangle", Width: []config.Length{length(140, 0)}, Depth: []config.Length{length(38, 0)}}},
		Supports: []config.Support{{Name: "left", At: length(0, 0), Kind: "pin"}, {Name: "right", At: length(2100, 0), Kind: "pin"}},
		Loads:    []config.Load{{Name: "a", At: &a}, {Name: "b", At: &b}},
		Gravity:  config.Gravity{Value: number(9.81663, 0)},
	}
	for _, g := range []struct {
		name, sees string
		at         float64
	}{{"g1", "beam", -250}, {"s1", "seat", 0}, {"g3", "beam", 550}, {"g4", "beam", 1000}, {"g5", "beam", 1050}, {"g6", "beam", 1550}, {"s2", "seat", 2100}, {"g8", "beam", 2250}} {
		p.rig.Gauges = append(p.rig.Gauges, config.Gauge{Name: g.name, At: length(g.at, 0), Sees: g.sees, Sense: "down", Resolution: length(0.001, 0)})
	}
	p.ei = 11800 * 140 * 38 * 38 * 38 / 12.0
	p.s = 740 * 5.0 / 6 * 140 * 38
	return p
}

// sag is the closed form for a load P at a on a span L: beam_formulas.json
// "SS load P at a" with its shear addition, straight overhangs, and the chord
// of yielding supports (practice: overhang gauges see no shear).
func (p *plank) sag(x, a, load float64) float64 {
	const l = 2100.0
	b := l - a
	w := load * ((1-a/l)*p.c[0]*(1-x/l) + a/l*p.c[1]*x/l)
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

func (p *plank) seat(i int, a, load float64) float64 {
	share := a / 2100
	if i == 0 {
		share = 1 - share
	}
	return p.c[i] * share * load
}

// ladder hangs four steps on the pans and reads every gauge, without noise.
func (p *plank) ladder() Input {
	in := Input{Rig: p.rig, InitialAfterS: 60}
	before := [2]float64{}
	for i, n := range [][2]float64{{25, 25}, {172, 25}, {172, 172}, {319, 172}} {
		step := StepObs{Name: string(rune('1' + i)), Loads: []StepLoad{{Load: "a", N: n[0], Weighed: true}, {Load: "b", N: n[1], Weighed: true}}}
		for g, gauge := range p.rig.Gauges {
			mm := 0.0
			for j, l := range p.rig.Loads {
				a, d := l.At.Value, n[j]-before[j]
				switch gauge.Name {
				case "s1":
					mm += p.seat(0, a, d)
				case "s2":
					mm += p.seat(1, a, d)
				default:
					mm += p.sag(gauge.At.Value, a, d)
				}
			}
			step.Gauges = append(step.Gauges, Obs{Gauge: g, MM: mm, U: 0.001})
		}
		before = n
		in.Steps = append(in.Steps, step)
	}
	return in
}

func relative(t *testing.T, name string, got, want, tol float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tol*math.Abs(want)) {
		t.Errorf("%s: %.12g, want %.12g within %g (off by %.2g)", name, got, want, tol, got/want-1)
	}
}

func TestRecoversStiffnessWithoutNoise(t *testing.T) {
	p := newPlank()
	p.s = p.ei / (16.0 * 38 * 38 / 12 * 6 / 5) // E/G = 16 exactly: the assumption is the truth
	p.c = [2]float64{2.5e-4, 4e-4}
	e, err := Compute(p.ladder())
	if err != nil {
		t.Fatal(err)
	}
	relative(t, "EI", e.Bending.Value, p.ei, 1e-9)
	relative(t, "E", e.Modulus.Value, 11800, 1e-9)
	for i := range 2 {
		if e.Supports[i].Compliance == nil {
			t.Fatalf("support %d has no compliance", i)
		}
		relative(t, "compliance", e.Supports[i].Compliance.Value, p.c[i], 1e-9)
	}
	if e.Fit.Chi2 > 1e-6 {
		t.Errorf("chi2 %g without noise", e.Fit.Chi2)
	}
	for k := range 4 {
		xs := []float64{-300, -250, 0, 400, 1234.5, 2100, 2300}
		got, err := e.Curve(k, xs)
		if err != nil {
			t.Fatal(err)
		}
		n := [][2]float64{{25, 25}, {172, 25}, {172, 172}, {319, 172}}[k]
		for i, x := range xs {
			want := p.sag(x, 700, n[0]) + p.sag(x, 1400, n[1])
			if math.Abs(got[i]-want) > 1e-8*12 {
				t.Errorf("curve of step %d at %g mm: %.9g, want %.9g", k+1, x, got[i], want)
			}
		}
	}
}

// A short deep beam with gauges on its overhangs tells bending and shear
// apart (practice 3c).
func TestTellsShearApart(t *testing.T) {
	p := newPlank()
	p.h = 250
	p.rig.Specimen.Section.Depth = []config.Length{length(250, 0)}
	p.ei = 11800 * 140 * 250 * 250 * 250 / 12.0
	p.s = 600.0 * 5 / 6 * 140 * 250
	p.c = [2]float64{2e-6, 3e-6}
	p.rig.Specimen.From, p.rig.Specimen.Length = length(-900, 0), length(3900, 0)
	p.rig.Gauges[0].At, p.rig.Gauges[7].At = length(-850, 0), length(2950, 0)
	in := p.ladder()
	for k := range in.Steps {
		for i := range in.Steps[k].Loads {
			in.Steps[k].Loads[i].N *= 100
		}
		for i := range in.Steps[k].Gauges {
			in.Steps[k].Gauges[i].MM *= 100
		}
	}
	e, err := Compute(in)
	if err != nil {
		t.Fatal(err)
	}
	if e.ShearFrom != "test" {
		t.Fatalf("shear %s", e.ShearWords)
	}
	relative(t, "EI", e.Bending.Value, p.ei, 1e-9)
	relative(t, "S", e.Shear.Value, p.s, 1e-9)
	relative(t, "G", e.ShearModulus.Value, 600, 1e-9)
}

// A beam that ends at its support: moving the support by its uncertainty must
// not take it off the beam.
func TestSupportsAtTheEnds(t *testing.T) {
	p := newPlank()
	p.rig.Specimen.From, p.rig.Specimen.Length = length(0, 0), length(2100, 0)
	p.rig.Supports[0].At.U, p.rig.Supports[1].At.U = 0.5, 0.5
	p.rig.Gauges = p.rig.Gauges[1:7]
	e, err := Compute(p.ladder())
	if err != nil {
		t.Fatal(err)
	}
	if d := math.Abs(e.Bending.Value/p.ei - 1); d > 1e-3 {
		t.Errorf("EI off by %.2g", d)
	}
}

func TestPriorIsSaid(t *testing.T) {
	p := newPlank()
	in := p.ladder()
	without(&in, "g1")
	without(&in, "g8")
	e, err := Compute(in)
	if err != nil {
		t.Fatal(err)
	}
	if e.ShearFrom != "prior" || !has(e, "shear-not-told") {
		t.Errorf("shear from %q (%s), warnings %v", e.ShearFrom, e.ShearWords, e.Warnings)
	}
	found := false
	for _, l := range e.Budget {
		found = found || l.Input == "E/G" && l.U == 16*0.3
	}
	if !found {
		t.Errorf("the assumed E/G is not in the budget: %+v", e.Budget)
	}
}

func has(e *Estimate, code string) bool {
	for _, w := range e.Warnings {
		if w.Code == code {
			return true
		}
	}
	return false
}

// A plunger spring beside a load takes its share k c/(1 + k c): the readings
// of a beam that a spring holds give the bare beam's stiffness.
func TestPlungerIsTakenOff(t *testing.T) {
	p := newPlank()
	p.rig.Loads = p.rig.Loads[:1]
	a := length(1050, 0)
	p.rig.Loads[0].At = &a
	p.s = math.Inf(1)
	p.rig.Specimen.Section = config.Section{Shape: "general", SecondMoment: &config.SecondMoment{Quantity: config.Quantity{Value: p.ei / 11800}}}
	const k, l = 0.05, 2100.0
	p.rig.Gauges = []config.Gauge{{Name: "mid", At: length(1050, 0), Sees: "beam", Resolution: length(0.001, 0),
		Contact: &config.Contact{Side: "above", Stiffness: &config.Stiffness{Quantity: config.Quantity{Value: k}}}}}
	c := l * l * l / (48 * p.ei)
	mm := 200 * c / (1 + k*c)
	e, err := Compute(Input{Rig: p.rig, InitialAfterS: 60, Steps: []StepObs{{Name: "1", Loads: []StepLoad{{Load: "a", N: 200}}, Gauges: []Obs{{MM: mm, U: 0.001}}}}})
	if err != nil {
		t.Fatal(err)
	}
	relative(t, "EI", e.Bending.Value, p.ei, 1e-9)
	if e.ShearFrom != "none" {
		t.Errorf("shear from %q without an area", e.ShearFrom)
	}
	relative(t, "apparent", e.ApparentModulus.Value, 11800*(1+k*c), 1e-9)
}

// What sticks in a sleeve may hold back that much of the load beside it: the
// stiffness is uncertain by its share of the load, as a rectangle.
func TestPlungerFrictionIsInTheBudget(t *testing.T) {
	p := newPlank()
	p.rig.Loads = p.rig.Loads[:1]
	a := length(1050, 0)
	p.rig.Loads[0].At = &a
	p.s = math.Inf(1)
	p.rig.Specimen.Section = config.Section{Shape: "general", SecondMoment: &config.SecondMoment{Quantity: config.Quantity{Value: p.ei / 11800}}}
	contact := &config.Contact{Side: "above"}
	p.rig.Gauges = []config.Gauge{{Name: "mid", At: length(1050, 0), Sees: "beam", Resolution: length(0.001, 0), Contact: contact}}
	in := Input{Rig: p.rig, InitialAfterS: 60, Steps: []StepObs{{Name: "1", Loads: []StepLoad{{Load: "a", N: 200}}, Gauges: []Obs{{MM: 200 * 2100 * 2100 * 2100 / (48 * p.ei), U: 1e-6}}}}}
	without := mustCompute(t, in).Bending
	contact.Friction = &config.Force{Quantity: config.Quantity{Value: 0.3}}
	e := mustCompute(t, in)
	relative(t, "EI", e.Bending.Value, p.ei, 1e-9)
	added := math.Sqrt(e.Bending.U*e.Bending.U - without.U*without.U)
	relative(t, "u from friction", added, p.ei*0.3/math.Sqrt(3)/200, 0.01)
	for _, l := range e.BendingBudget {
		if l.Input == "friction of gauge mid's plunger" && l.Share > 0 {
			return
		}
	}
	t.Errorf("no friction in the budget: %+v", e.BendingBudget)
}

// noisy adds readings' noise with a known spread: each plateau has its own
// error, shared by the increments on both sides of it.
func noisy(in Input, u float64, rng *rand.Rand) Input {
	last := make([]float64, len(in.Rig.Gauges))
	for g := range last {
		last[g] = u * rng.NormFloat64()
	}
	out := in
	out.Steps = nil
	for _, s := range in.Steps {
		t := s
		t.Gauges = append([]Obs(nil), s.Gauges...)
		for i := range t.Gauges {
			now := u * rng.NormFloat64()
			t.Gauges[i].MM += now - last[t.Gauges[i].Gauge]
			t.Gauges[i].U, t.Gauges[i].UBefore = u*math.Sqrt2, u
			last[t.Gauges[i].Gauge] = now
		}
		out.Steps = append(out.Steps, t)
	}
	return out
}

func TestWrongWiringIsNamed(t *testing.T) {
	p := newPlank()
	p.c = [2]float64{2.5e-4, 2.5e-4}
	in := noisy(p.ladder(), 0.002, rand.New(rand.NewPCG(1, 2)))
	for k := range in.Steps {
		g := in.Steps[k].Gauges
		g[2].MM, g[3].MM = g[3].MM, g[2].MM
	}
	e, err := Compute(in)
	if err != nil {
		t.Fatal(err)
	}
	text := ""
	for _, w := range e.Warnings {
		if w.Code == "wiring" {
			text = w.Text
		}
	}
	if text != "the readings fit if gauges g3 and g4 are swapped: check their ports or places" {
		t.Errorf("hint %q; warnings %+v", text, e.Warnings)
	}
	for k := range in.Steps {
		g := in.Steps[k].Gauges
		g[2].MM, g[3].MM = g[3].MM, g[2].MM
		for i := range g {
			if p.rig.Gauges[i].Sees == "beam" {
				g[i].MM *= -1
			}
		}
	}
	if _, err = Compute(in); err == nil || !strings.Contains(err.Error(), "rises under its loads") {
		t.Errorf("a beam that rises: %v", err)
	}
	in = noisy(p.ladder(), 0.002, rand.New(rand.NewPCG(3, 4)))
	for k := range in.Steps {
		in.Steps[k].Gauges[3].MM *= -1
	}
	if e, err = Compute(in); err != nil {
		t.Fatal(err)
	}
	if !has(e, "wiring") {
		t.Errorf("reversed sense of g4 not named: %+v", e.Warnings)
	}
}

// A support that drops once, not in proportion to its load, is taken as
// measured, and the stiffness stays right.
func TestSupportThatDrops(t *testing.T) {
	p := newPlank()
	in := noisy(p.ladder(), 0.001, rand.New(rand.NewPCG(5, 6)))
	for i := range in.Steps[1].Gauges {
		x := p.rig.Gauges[i].At.Value
		in.Steps[1].Gauges[i].MM += 0.3 * (1 - x/2100)
	}
	e, err := Compute(in)
	if err != nil {
		t.Fatal(err)
	}
	if !has(e, "support-not-elastic") {
		t.Errorf("no word of the dropped support: %+v", e.Warnings)
	}
	if d := math.Abs(e.Bending.Value/p.ei - 1); d > 4*e.Bending.U/p.ei {
		t.Errorf("EI off by %.3g, u %.3g", d, e.Bending.U/p.ei)
	}
}
