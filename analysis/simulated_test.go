package analysis

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strings"

	"gaugelog/analysis/history"
	"gaugelog/config"
	"gaugelog/simulators"
)

// A simulated test has two rigs: the one its file states, and the true one,
// in which every place, dimension, mass, gain and stiffness differs from what
// is stated by an error drawn at its stated size. The true one is simulated
// with the simulator's own mechanics (unit loads and quadrature, hereditary
// creep, plungers as springs); the analysis sees the stated one.
type simulatedTest struct {
	rng        *rand.Rand
	layout     layout
	scale      float64 // of all stated uncertainties against everyday ones
	span, b, h float64
	modulus    float64 // true, at once
	stated     strings.Builder
	truly      strings.Builder
	truth      strings.Builder
	// ownError is each gauge's own error in each step, mm, standard uncertainty
	// ownU.
	ownU float64
}

// layout is a kind of rig: places are shares of the span from the left
// support, with a beam that reaches over it by the given share on both sides.
type layout struct {
	name      string
	material  string
	loads     []float64
	spread    float64 // each load's length, share of the span; 0: a point
	gauges    []place
	overhang  float64
	stiffly   bool // supports' compliance stated, no gauges there
	clamp     bool // one clamp at the left end
	stiffness float64
}

type place struct {
	name string
	at   float64
	sees string
	bar  []float64
}

var layouts = []layout{
	{name: "plank with overhangs", material: "timber", loads: []float64{1. / 3, 2. / 3}, overhang: 0.14, stiffness: 11000, gauges: []place{
		{"tail", -0.12, "beam", nil}, {"left", 0, "beam", nil}, {"quarter", 0.26, "beam", nil}, {"mid", 0.5, "beam", nil}, {"far", 0.74, "beam", nil}, {"right", 1, "beam", nil}}},
	{name: "three-point", material: "plastic", loads: []float64{0.5}, overhang: 0.05, stiffness: 2000, gauges: []place{
		{"left", 0, "seat", nil}, {"mid", 0.5, "beam", nil}, {"off", 0.35, "beam", nil}, {"right", 1, "seat", nil}}},
	{name: "four-point with a bar", material: "timber", loads: []float64{0.3, 0.7}, overhang: 0.06, stiffly: true, stiffness: 12000, gauges: []place{
		{"mid", 0.5, "beam", nil}, {"bar", 0.5, "beam", []float64{0.36, 0.64}}, {"off", 0.2, "beam", nil}}},
	{name: "spread load", material: "other", loads: []float64{0.55}, spread: 0.4, overhang: 0.05, stiffness: 9000, gauges: []place{
		{"left", 0, "seat", nil}, {"mid", 0.5, "beam", nil}, {"off", 0.7, "beam", nil}, {"right", 1, "seat", nil}}},
	{name: "cantilever", material: "metal", loads: []float64{0.9}, overhang: 0, stiffly: true, clamp: true, stiffness: 70000, gauges: []place{
		{"tip", 0.95, "beam", nil}, {"half", 0.5, "beam", nil}}},
}

// off draws an error of standard uncertainty u.
func (s *simulatedTest) off(u float64) float64 { return u * s.rng.NormFloat64() }

// u draws how well something is known: the everyday size, between half and
// twice, times the test's scale, so that now this cause dominates, now that.
func (s *simulatedTest) u(everyday float64) float64 {
	return s.scale * everyday * math.Pow(2, 2*s.rng.Float64()-1)
}

func (s *simulatedTest) both(format string, args ...any) {
	fmt.Fprintf(&s.stated, format, args...)
	fmt.Fprintf(&s.truly, format, args...)
}

// measured writes a quantity with its u in the stated rig and its true value
// in the true one, which it returns.
func (s *simulatedTest) measured(value, u float64, unit string) (stated, truly string, isTruly float64) {
	isTruly = value + s.off(u)
	return fmt.Sprintf("%.6f(%.0f) %s", value, math.Max(1, u*1e6), unit), fmt.Sprintf("%.9f %s", isTruly, unit), isTruly
}

// newSimulatedTest draws a test.
func newSimulatedTest(rng *rand.Rand) *simulatedTest {
	s := &simulatedTest{rng: rng, layout: layouts[rng.IntN(len(layouts))], scale: math.Pow(10, 0.8*rng.Float64()-0.6)}
	s.span = 400 + 1800*rng.Float64()
	slender := 14 + 26*rng.Float64()
	s.h, s.b = s.span/slender, 3*s.span/slender
	if s.layout.clamp {
		s.span /= 2
	}
	s.modulus = s.layout.stiffness * (0.8 + 0.4*rng.Float64())
	s.both("title: %s\n", s.layout.name)
	s.specimen()
	s.gravity()
	s.supports()
	s.gauges()
	s.loads()
	s.both("frames:\n  - {name: streamed, kind: text, end: \"\\r\\n\", pattern: '(?P<value>[+-]\\d{3}\\.\\d{6})', unit: mm}\n")
	s.both("read: {initial_after: 60 s, creep_gauge: %s}\n", s.creepGauge())
	fmt.Fprintf(&s.truth, "creep: {law: power, amplitude: %.6f, n: %.6f}\n", 0.02+0.1*rng.Float64(), 0.18+0.15*rng.Float64())
	fmt.Fprintf(&s.truth, "stands: [{name: frame, temperature: %.3f um/K, lag: 1 h}]\n", 3*rng.NormFloat64())
	fmt.Fprintf(&s.truth, "room: {temperature: {mean: 20, swing: 2, period: 24 h, peak: %.2f h}}\n", 24*rng.Float64())
	fmt.Fprintf(&s.truth, "placing: {takes: %.2f s, ringing: 0.04, hertz: 4, decay: 0.7 s}\n", 1+2*rng.Float64())
	return s
}

func (s *simulatedTest) creepGauge() string {
	best := s.layout.gauges[0]
	for _, g := range s.layout.gauges {
		if math.Abs(g.at-0.5) < math.Abs(best.at-0.5) && g.bar == nil {
			best = g
		}
	}
	return best.name
}

// specimen: the caliper errs by one amount at all places and scatters.
func (s *simulatedTest) specimen() {
	u, scatter := s.u(0.02), s.u(0.015)
	places := func(truly float64) string {
		common := s.off(u)
		var out []string
		for range 5 {
			out = append(out, fmt.Sprintf("%.5f mm", truly+common+s.off(scatter)))
		}
		return strings.Join(out, ", ")
	}
	from, length := -s.layout.overhang*s.span, (1+2*s.layout.overhang)*s.span
	fmt.Fprintf(&s.stated, "specimen:\n  name: one\n  material: %s\n  section: {shape: rectangle, width: [%s], depth: [%s], u: %.6f mm}\n",
		s.layout.material, places(s.b), places(s.h), u)
	fmt.Fprintf(&s.truly, "specimen:\n  name: one\n  section: {shape: rectangle, width: [%.9f mm], depth: [%.9f mm]}\n", s.b, s.h)
	fmt.Fprintf(&s.stated, "  from: %.6f mm\n  length: %.6f mm\n", from, length)
	fmt.Fprintf(&s.truly, "  from: %.6f mm\n  length: %.6f mm\n", from-0.1*s.span, length+0.2*s.span) // free ends bear nothing
	ratio := 2.6 * (1 + 0.2*s.rng.NormFloat64())
	if s.layout.material == "timber" {
		ratio = 16 * math.Max(0.05, 1+0.3*s.rng.NormFloat64())
	}
	fmt.Fprintf(&s.truth, "specimen: {modulus: %.6f MPa, shear_modulus: %.6f MPa}\n", s.modulus, s.modulus/ratio)
}

func (s *simulatedTest) gravity() {
	u := s.u(0.0005)
	fmt.Fprintf(&s.stated, "gravity: {value: 9.816630(%.0f)}\n", math.Max(1, u*1e6))
	fmt.Fprintf(&s.truth, "gravity: %.9f\n", 9.81663+s.off(u))
}

func (s *simulatedTest) supports() {
	s.both("supports:\n")
	flexible := s.span * s.span * s.span / (48 * s.modulus * s.b * s.h * s.h * s.h / 12)
	truth := "supports:\n"
	for i, name := range []string{"a", "b"}[:map[bool]int{true: 1, false: 2}[s.layout.clamp]] {
		stated, truly, _ := s.measured(float64(i)*s.span, s.u(0.3), "mm")
		kind := ""
		if s.layout.clamp {
			kind = ", kind: clamp"
		}
		compliance := 0.02 * flexible * s.rng.Float64()
		known := ""
		if s.layout.stiffly {
			known = fmt.Sprintf(", compliance: %.12f(%.0f) mm/N", compliance, math.Max(1, 0.15*compliance*1e12))
			compliance *= 1 + 0.15*s.rng.NormFloat64()
		}
		fmt.Fprintf(&s.stated, "  - {name: %s, at: %s%s%s}\n", name, stated, kind, known)
		fmt.Fprintf(&s.truly, "  - {name: %s, at: %s%s}\n", name, truly, kind)
		truth += fmt.Sprintf("  - {name: %s, compliance: %.15f mm/N}\n", name, math.Max(0, compliance))
	}
	s.truth.WriteString(truth)
}

// gauges: each has its own gain, plunger and place; a bar its feet.
func (s *simulatedTest) gauges() {
	s.both("gauges:\n")
	s.ownU = s.u(0.0015)
	uGain, uPlace := s.u(0.0003), s.u(0.4)
	truth := fmt.Sprintf("every_gauge: {noise: %.6f mm, preset: 8 mm}\ngauges:\n", 0.0003+0.001*s.rng.Float64())
	for _, g := range s.layout.gauges {
		stated, truly, _ := s.measured(g.at*s.span, uPlace, "mm")
		bar, trueBar := "", ""
		if g.bar != nil {
			a, ta, _ := s.measured(g.bar[0]*s.span, uPlace, "mm")
			b, tb, _ := s.measured(g.bar[1]*s.span, uPlace, "mm")
			bar, trueBar = fmt.Sprintf(", bar: [%s, %s]", a, b), fmt.Sprintf(", bar: [%s, %s]", ta, tb)
		}
		if g.sees == "seat" { // it follows the seat, wherever it stands
			stated, truly = fmt.Sprintf("%.6f mm", g.at*s.span), fmt.Sprintf("%.6f mm", g.at*s.span)
		}
		gain := 1 + 0.0005*s.rng.NormFloat64()
		contact, spring := "", ""
		if g.sees == "beam" && g.bar == nil {
			k := 0.03 * s.rng.Float64()
			contact = fmt.Sprintf(", contact: {side: above, force: 0.6 N, stiffness: %.6f(%.0f) N/mm}", k, math.Max(1, 0.1*k*1e6))
			spring = fmt.Sprintf(", stiffness: %.9f N/mm", math.Max(0, k*(1+0.1*s.rng.NormFloat64())))
		}
		line := "  - {name: %s, at: %s%s, sees: %s, sense: down, resolution: %s mm, stand: frame, port: sim:%s, frame: streamed%s}\n"
		own := fmt.Sprintf(", u: %.6f mm, calibration: {offset: 0 mm, gain: %.9f, u_offset: 0.001 mm, u_gain: %.9f}%s", s.ownU, gain, uGain, contact)
		fmt.Fprintf(&s.stated, line, g.name, stated, bar, g.sees, "0.001", g.name, own)
		fmt.Fprintf(&s.truly, line, g.name, truly, trueBar, g.sees, "0.000001", g.name, "") // rounded once the own error is in
		truth += fmt.Sprintf("  - {name: %s, gain: %.9f, drift: %.6f mm/d%s}\n", g.name, gain*(1+s.off(uGain)), 0.004*s.rng.NormFloat64(), spring)
	}
	s.truth.WriteString(truth)
}

// loads: one set of masses hung in three steps and taken off again, so heavy
// that the greatest sag is some millimetres and small against the span.
func (s *simulatedTest) loads() {
	s.both("loads:\n")
	flexible := s.span * s.span * s.span / (48 * s.modulus * s.b * s.h * s.h * s.h / 12)
	if s.layout.clamp {
		flexible *= 16
	}
	sag := math.Min(s.span/120, 2+8*s.rng.Float64())
	each := sag / flexible / 9.81 / float64(len(s.layout.loads)) / 3 // kg a step
	u, relative := s.u(0.4), s.u(2e-4)
	truth := "loads:\n"
	for i, at := range s.layout.loads {
		if s.layout.spread > 0 {
			from, trueFrom, _ := s.measured((at-s.layout.spread/2)*s.span, u, "mm")
			to, trueTo, _ := s.measured((at+s.layout.spread/2)*s.span, u, "mm")
			fmt.Fprintf(&s.stated, "  - {name: l%d, from: %s, to: %s}\n", i, from, to)
			fmt.Fprintf(&s.truly, "  - {name: l%d, from: %s, to: %s}\n", i, trueFrom, trueTo)
		} else {
			stated, truly, _ := s.measured(at*s.span, u, "mm")
			fmt.Fprintf(&s.stated, "  - {name: l%d, at: %s}\n", i, stated)
			fmt.Fprintf(&s.truly, "  - {name: l%d, at: %s}\n", i, truly)
		}
		truth += fmt.Sprintf("  - {name: l%d, factor: %.9f}\n", i, 1+s.off(relative))
	}
	s.truth.WriteString(truth)
	s.both("plan:\n  - {step: zero, hold: 4 min}\n")
	for step := 1; step <= 4; step++ {
		set := ""
		for i := range s.layout.loads {
			kg := each * float64(step%4)
			set += fmt.Sprintf("l%d: %.6f(%.0f) kg, ", i, kg, math.Max(1, relative*kg*1e6))
		}
		s.both("  - {step: s%d, set: {%s}, hold: 3 min}\n", step, strings.TrimSuffix(set, ", "))
	}
}

// run simulates the true rig and returns the history as the stated rig's, and
// the modulus that a perfect test would find 60 s after loading.
func (s *simulatedTest) run(seed uint64) (*history.History, float64, error) {
	stated, err := config.Parse("stated.yaml", []byte(s.stated.String()))
	if err != nil {
		return nil, 0, fmt.Errorf("%w\n%s", err, &s.stated)
	}
	truly, err := config.Parse("truly.yaml", []byte(s.truly.String()))
	if err != nil {
		return nil, 0, fmt.Errorf("%w\n%s", err, &s.truly)
	}
	truth, err := simulators.ParseTruth("truth.yaml", []byte(s.truth.String()))
	if err != nil {
		return nil, 0, fmt.Errorf("%w\n%s", err, &s.truth)
	}
	sim, err := simulators.New(simulators.Options{Rig: truly, Truth: truth, Seed: seed})
	if err != nil {
		return nil, 0, err
	}
	given := history.Given{Rig: stated, Samples: make([][]history.Sample, len(stated.Gauges))}
	add := s.adder(stated, sim, &given)
	for done := false; !done; {
		st := sim.Next(sim.End(), 0)
		done = st.Done
		for _, b := range st.Batches {
			for i := range b.Frames {
				add(&b.Frames[i])
			}
		}
		for _, e := range st.Events {
			given.Marks = append(given.Marks, marksOfEvent(e)...)
		}
	}
	h, err := history.FromSamples(given)
	return h, s.modulus / sim.Creep(60), err
}

// adder adds a frame's indication with the gauge's own error of that step.
func (s *simulatedTest) adder(stated *config.Rig, sim *simulators.Sim, given *history.Given) func(*simulators.Frame) {
	begins := sim.Steps()
	first := sim.Instant(0).Wall
	index := map[string]int{}
	own := make([][]float64, len(stated.Gauges))
	for i, g := range stated.Gauges {
		index[g.Name] = i
		for range begins {
			own[i] = append(own[i], s.off(s.ownU))
		}
	}
	return func(f *simulators.Frame) {
		g, step := index[f.Name], 0
		for k := range begins {
			if f.At.Wall-first >= begins[k].From {
				step = k
			}
		}
		mm := math.Round((f.MM+own[g][step])*1000) / 1000
		given.Samples[g] = append(given.Samples[g], history.Sample{Time: f.At.Wall, MM: mm})
	}
}

func marksOfEvent(e simulators.Event) []history.Mark {
	if e.Kind != simulators.MarkDue {
		return nil
	}
	var out []history.Mark
	for _, l := range e.Mark.Loads {
		kg := l.Kilogram
		out = append(out, history.Mark{Kind: "load", Load: l.Name, Newton: l.Newton, Kilogram: &kg, Shown: l.Shown, Step: e.Mark.Step, Time: e.At.Wall})
	}
	return out
}
