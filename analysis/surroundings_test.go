package analysis

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"gaugelog/analysis/creep"
	"gaugelog/analysis/history"
	"gaugelog/config"
)

const shelfRig = `
title: Shelf board
specimen:
  name: shelf
  material: timber
  section: {shape: rectangle, width: [60.0 mm], depth: [20.0 mm], u: 0.02 mm}
  from: -100 mm
  length: 1000 mm
supports: [{name: left, at: 0 mm}, {name: right, at: 800 mm}]
gauges:
  - {name: mid, at: 400 mm, stand: frame, sense: down, resolution: 0.001 mm, u: 0.002 mm}
  - {name: left-of, at: 250 mm, stand: frame, sense: down, resolution: 0.001 mm, u: 0.002 mm}
  - {name: right-of, at: 550 mm, stand: frame, sense: down, resolution: 0.001 mm, u: 0.002 mm}
  - {name: block, at: 400 mm, sees: reference, stand: frame, sense: down, resolution: 0.001 mm, u: 0.002 mm}
probes: [{name: air}]
loads: [{name: pan, at: 400 mm}]
read: {initial_after: 60 s, times: [60 s, 1 d], creep_gauge: mid}
`

// shelf is a simulated run: a hold of twelve days in a room, seen by three
// gauges of one stand and a fourth on a block. Times are hours after loading.
type shelf struct {
	celsius, humidity func(h float64) float64
	// perK and perPercent are every beam gauge's answers, mm, through lags of
	// lagT and lagH, h.
	perK, lagT, perPercent, lagH float64
	stand                        func(h float64) float64 // mm, all gauges alike
	drift                        [4]float64              // mm/d, each gauge's own
	gauges                       int                     // all four, or the first alone
	u                            string                  // stated of each indication
}

// The board's law: 400 N, 8 um/N at mid-span and its share beside it.
const shelfN, shelfAmplitude = 0.23, 0.085

var shelfShare = [4]float64{1, 0.8154, 0.8154, 0} // (3 l^2 x - 4 x^3)/l^3 at x = 250 mm of l = 800 mm, the load at mid-span

func (s shelf) history(t *testing.T) *history.History {
	t.Helper()
	if testing.Short() {
		t.Skip("a fit of two weeks of several gauges")
	}
	text := strings.ReplaceAll(shelfRig, "0.002 mm", s.u)
	if s.gauges == 1 {
		var lines []string
		for _, l := range strings.Split(text, "\n") {
			if !strings.Contains(l, "-of,") && !strings.Contains(l, "block,") {
				lines = append(lines, l)
			}
		}
		text = strings.Join(lines, "\n")
	}
	rig, err := config.Parse("rig.yaml", []byte(text))
	if err != nil {
		t.Fatal(err)
	}
	const start, loaded, end = int64(1790000000e9), 48.0, 48 + 12*24.0 // h
	var room []history.AmbientSample
	var timeH, warm, damp []float64
	for h := 0.0; h <= end; h += 1.0 / 12 {
		a := history.AmbientSample{Time: start + int64(h*3600e9), Celsius: s.celsius(h), HumidityPercent: s.humidity(h)}
		room, timeH = append(room, a), append(timeH, h)
		warm, damp = append(warm, a.Celsius), append(damp, a.HumidityPercent)
	}
	felt := func(v []float64, lag float64) func(h float64) float64 {
		out, _ := creep.Lagged(timeH, v, lag)
		return func(h float64) float64 { return out[min(int(math.Round(h*12)), len(out)-1)] - out[0] }
	}
	t1, h1 := felt(warm, s.lagT), felt(damp, s.lagH)
	given := history.Given{Rig: rig, Samples: make([][]history.Sample, len(rig.Gauges)), Ambient: [][]history.AmbientSample{room},
		Marks: []history.Mark{{ID: "m1", Kind: "load", Load: "pan", Newton: 400, Time: start + int64(loaded*3600e9)}}}
	noise := rand.New(rand.NewPCG(11, 11))
	for h := 0.0; h < end; {
		for g := range rig.Gauges {
			mm := 5 + 0.0005*noise.NormFloat64() + s.stand(h) + s.drift[g]*h/24
			if shelfShare[g] > 0 {
				mm += s.perK*t1(h) + s.perPercent*h1(h)
			}
			if h > loaded {
				mm += 0.008 * 400 * shelfShare[g] * (1 + shelfAmplitude*math.Pow(h-loaded, shelfN))
			}
			given.Samples[g] = append(given.Samples[g], history.Sample{Time: start + int64(h*3600e9), MM: math.Round(mm*1000) / 1000})
		}
		if age := h - loaded; age > -0.2 && age < 0.5 {
			h += 1.0 / 3600
		} else {
			h += 1.0 / 12
		}
	}
	h, err := history.FromSamples(given)
	if err != nil {
		t.Fatal(err)
	}
	return h
}

// plain is a shelf in a room with a day and, slower and apart from it, weather.
func plain() shelf {
	return shelf{
		celsius:  func(h float64) float64 { return 20 + 2*math.Cos(2*math.Pi*h/24) },
		humidity: func(h float64) float64 { return 50 + 6*math.Sin(2*math.Pi*h/67) + 2*math.Sin(2*math.Pi*h/31) },
		lagT:     1.5, lagH: 24, stand: func(float64) float64 { return 0 }, gauges: 4, u: "0.002 mm",
	}
}

func (s shelf) result(t *testing.T) *Result {
	t.Helper()
	r, err := Evaluate(s.history(t), Options{})
	if err != nil {
		t.Fatal(err)
	}
	if r.Creep.Model != "power" {
		t.Fatalf("the law is %q: %+v", r.Creep.Model, r.Warnings)
	}
	return r
}

func warned(r *Result, code, gauge string) bool {
	for _, w := range r.Warnings {
		if w.Code == code && (gauge == "" || w.Gauge == gauge) {
			return true
		}
	}
	return false
}

// near reports a figure that lies more than four of its u, or more than a
// share, off.
func (r *Result) near(t *testing.T, what string, q *Q, truth, share float64) {
	t.Helper()
	if q == nil || q.U == nil {
		t.Errorf("%s: %+v", what, q)
		return
	}
	t.Logf("%s: %.6g u %.2g, true %.6g", what, q.Value, *q.U, truth)
	if d := math.Abs(q.Value - truth); d > 4**q.U || d > share*math.Abs(truth) {
		t.Errorf("%s: %g u %g, true %g", what, q.Value, *q.U, truth)
	}
}

func TestHumidityIsToldFromCreep(t *testing.T) {
	s := plain()
	s.perK, s.perPercent = -0.0025, 0.0015
	r := s.result(t)
	n := r.Creep.Parameters["n"]
	r.near(t, "n", &n, shelfN, 0.02)
	if len(r.Drift.Humidity) != 3 || len(r.Drift.Temperature) != 3 {
		t.Fatalf("%d answers to humidity, %d to temperature", len(r.Drift.Humidity), len(r.Drift.Temperature))
	}
	for i := range 3 {
		r.near(t, "humidity on "+r.Drift.Humidity[i].Gauge, &r.Drift.Humidity[i].Coefficient, 0.0015, 0.1)
		r.near(t, "temperature on "+r.Drift.Temperature[i].Gauge, &r.Drift.Temperature[i].Coefficient, -0.0025, 0.1)
	}
	r.near(t, "lag of humidity", r.Drift.Humidity[0].LagH, 24, 0.2)
	r.near(t, "lag of temperature", r.Drift.Temperature[0].LagH, 1.5, 0.2)
}

func TestHumidityThatMovesWithTemperature(t *testing.T) {
	s := plain()
	s.perK = -0.0025
	s.humidity = func(h float64) float64 { return 50 - 2*(s.celsius(h)-20) }
	r := s.result(t)
	if !warned(r, "humidity-with-temperature", "") || len(r.Drift.Humidity) != 0 || len(r.Drift.Temperature) == 0 {
		t.Errorf("%+v, %+v", r.Drift, r.Warnings)
	}
}

// The stand goes down over the days much as creep would: what the gauge on the block shows of
// it is taken off the others, and without that gauge the law is bent.
func TestReferenceGaugeTakesTheStandOff(t *testing.T) {
	s := plain()
	s.stand = func(h float64) float64 { return 0.04 * (1 - math.Exp(-h/100)) }
	r := s.result(t)
	if !warned(r, "reference-moved", "") {
		t.Errorf("not said: %+v", r.Warnings)
	}
	n := r.Creep.Parameters["n"]
	r.near(t, "n", &n, shelfN, 0.03)
	s.gauges = 1
	alone, err := Evaluate(s.history(t), Options{})
	if err != nil {
		t.Fatal(err)
	}
	if m := alone.Creep.Parameters["n"]; math.Abs(m.Value-shelfN) < 3*math.Abs(n.Value-shelfN) {
		t.Errorf("without the reference gauge n is %g, with it %g: the gauge told nothing", m.Value, n.Value)
	}
}

// A gauge that drifts breaks the beam's shape, which creep does not.
func TestDriftingGaugeIsNamed(t *testing.T) {
	s := plain()
	s.humidity = func(float64) float64 { return 50 } // a long lag would look like drift
	s.drift[1] = 0.01
	r := s.result(t)
	if !warned(r, "gauge-drift", "left-of") || warned(r, "gauge-drift", "mid") || warned(r, "gauge-drift", "right-of") {
		t.Errorf("%+v", r.Warnings)
	}
	n := r.Creep.Parameters["n"]
	r.near(t, "n", &n, shelfN, 0.03)
	for _, d := range r.Drift.Gauges {
		if d.Gauge == "left-of" {
			r.near(t, "drift", &d.Rate, 0.01, 0.2)
		}
	}
}

// One gauge alone cannot tell its drift from creep: that is bounded by what
// the rig file states, and said.
func TestDriftOfOneGaugeIsBounded(t *testing.T) {
	s := plain()
	s.gauges, s.u = 1, "0.00003 mm"
	r := s.result(t)
	if !warned(r, "drift-bounded", "mid") {
		t.Errorf("%+v", r.Warnings)
	}
	n := r.Creep.Parameters["n"]
	r.near(t, "n", &n, shelfN, 0.05)
}

func TestSoakAtRest(t *testing.T) {
	s := plain()
	r := s.result(t)
	if len(r.Drift.Soak) != 4 {
		t.Fatalf("%d soaks: %+v", len(r.Drift.Soak), r.Drift.Soak)
	}
	// Noise of 0.5 um and steps of 1 um leave hypot(0.5, 1/sqrt 12) um.
	k := r.Drift.Soak[3]
	if d := k.Deviation[0].Deviation.Value; math.Abs(d/math.Hypot(0.0005, 0.001/math.Sqrt(12))-1) > 0.15 || k.Floored || k.IntervalS != 1 {
		t.Errorf("deviation of one reading %g mm, floored %v, every %g s", d, k.Floored, k.IntervalS)
	}
	if k.AverageS < 64 {
		t.Errorf("white noise is to be averaged over %g s only", k.AverageS)
	}
}
