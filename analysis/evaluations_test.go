package analysis

import (
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"gaugelog/analysis/evaluate"
	"gaugelog/analysis/history"
	"gaugelog/config"
)

const boardRig = `
title: Board under one load
details: {sample_size: "30"}
specimen:
  name: board
  material: timber
  section: {shape: rectangle, width: [100.0 mm], depth: [40.0 mm], u: 0.02 mm}
  length: 700 mm
  expect: {strength: 40 MPa}
supports:
  - {name: left, at: 30.0(2) mm}
  - {name: right, at: 670.0(2) mm}
gauges:
  - {name: mid, at: 350.0(2) mm, sense: down, resolution: 0.001 mm, u: 0.001 mm}
loads:
  - {name: pan, at: 350 mm}
read: {initial_after: 60 s, times: [60 s, 1 d], creep_gauge: mid}
limits: {span_over_sag: 100}
evaluate: [astm-d6815, own, no-such-rule]
`

// board is a run whose sag under 500 N is 4(1 + 0.085 t^0.23) mm, t in hours
// after loading, with noise of 1.5 um: read every second for ten minutes, then
// every two minutes.
func board(t *testing.T, days float64) *history.History {
	t.Helper()
	rig, err := config.Parse("rig.yaml", []byte(boardRig))
	if err != nil {
		t.Fatal(err)
	}
	const start, second = int64(1790000000e9), int64(1e9)
	loaded := start + 600*second
	var list []history.Sample
	noise := rand.New(rand.NewPCG(6815, 1))
	add := func(at int64) {
		mm := 0.0015 * noise.NormFloat64()
		if h := float64(at-loaded) / 3600e9; h > 0 {
			mm += 4 * (1 + 0.085*math.Pow(h, 0.23))
		}
		list = append(list, history.Sample{Time: at, MM: math.Round(mm*1000) / 1000})
	}
	for s := int64(0); s < 1200; s++ {
		add(start + s*second)
	}
	for s := int64(1320); float64(s) <= days*86400+600; s += 120 {
		add(start + s*second)
	}
	h, err := history.FromSamples(history.Given{Rig: rig, Samples: [][]history.Sample{list},
		Marks: []history.Mark{{ID: "m1", Kind: "load", Load: "pan", Newton: 500, Shown: "500 N", Time: loaded}}})
	if err != nil {
		t.Fatal(err)
	}
	return h
}

const ownRule = `
rule: own
title: Stress under the load
standard: none
edition: none
numbers:
  - {name: most, value: 3 MPa, source: our procedure, confidence: confirmed}
clauses:
  - {clause: stress, part: load, measure: stress, unit: MPa, at_most: most, source: our procedure, confidence: confirmed}
`

func evaluationOf(t *testing.T, r *Result, rule, clause string) Evaluation {
	t.Helper()
	for _, e := range r.Evaluations {
		if e.Rule == rule && e.Clause == clause {
			return e
		}
	}
	t.Fatalf("no %s %s in %+v", rule, clause, r.Evaluations)
	return Evaluation{}
}

func TestEvaluationsOfARun(t *testing.T) {
	folder := t.TempDir()
	if err := os.WriteFile(filepath.Join(folder, "own.yaml"), []byte(ownRule), 0o600); err != nil {
		t.Fatal(err)
	}
	r, err := Evaluate(board(t, 95), Options{Rules: folder})
	if err != nil {
		t.Fatal(err)
	}
	law := func(hours float64) float64 { return 4 * (1 + 0.085*math.Pow(hours, 0.23)) }
	for _, c := range []struct {
		rule, clause string
		value        float64 // from the law and the rig file, by hand
		tolerance    float64
		pass         bool
	}{
		{"astm-d6815", "decreasing-rate-1", law(720) - law(1.0/60), 0.004, true},
		{"astm-d6815", "decreasing-rate-2", law(1440) - law(720), 0.004, true},
		{"astm-d6815", "fractional-deflection", law(2160) / law(1.0/60), 0.001, true},
		{"astm-d6815", "duration", 95, 0.01, true},
		{"astm-d6815", "one-loading", 1, 0, true},
		{"astm-d6815", "sample-size", 30, 0, true},
		{"span-over-sag", "initial", 640 / law(1.0/60), 0.2, true},
		{"span-over-sag", "end", 640 / law(95*24), 0.2, true},
	} {
		e := evaluationOf(t, r, c.rule, c.clause)
		if e.Measured == nil || math.Abs(e.Measured.Value-c.value) > c.tolerance || e.Pass == nil || *e.Pass != c.pass {
			t.Errorf("%s %s: measured %+v, want %g within %g, pass %t: %s", c.rule, c.clause, e.Measured, c.value, c.tolerance, c.pass, e.Why)
		}
		if !strings.HasSuffix(e.Why, evaluate.Informative) {
			t.Errorf("%s %s: no reservation: %s", c.rule, c.clause, e.Why)
		}
	}
	if e := evaluationOf(t, r, "astm-d6815", "reading-times"); e.Pass == nil || !*e.Pass {
		t.Errorf("reading times: %s", e.Why)
	}
	if e := evaluationOf(t, r, "own", "stress"); e.Measured == nil || math.Abs(e.Measured.Value-3) > 1e-6 {
		t.Errorf("stress %+v, want F L/(4 W) = 3 MPa", e.Measured)
	}
	if e := evaluationOf(t, r, "no-such-rule", "rule"); e.Pass != nil {
		t.Errorf("an unknown rule was decided: %+v", e)
	}
	if len(r.Creep.After) != 2 || r.Creep.After[1].AfterS != 86400 {
		t.Errorf("the rules' reading times stayed in the result: %+v", r.Creep.After)
	}
}

// TestEvaluationsOfAShortRun holds that a run of a day decides no clause of
// ninety days but its duration.
func TestEvaluationsOfAShortRun(t *testing.T) {
	r, err := Evaluate(board(t, 1.2), Options{})
	if err != nil {
		t.Fatal(err)
	}
	for _, clause := range []string{"decreasing-rate-1", "decreasing-rate-2", "fractional-deflection", "reading-times"} {
		if e := evaluationOf(t, r, "astm-d6815", clause); e.Pass != nil || !strings.Contains(e.Why, "cannot evaluate") {
			t.Errorf("%s: %+v", clause, e)
		}
	}
	if e := evaluationOf(t, r, "astm-d6815", "duration"); e.Pass == nil || *e.Pass {
		t.Errorf("duration: %+v", e)
	}
	// The own rule lies in no folder here.
	if e := evaluationOf(t, r, "own", "rule"); e.Pass != nil {
		t.Errorf("own: %+v", e)
	}
}

func TestWrongRuleFile(t *testing.T) {
	folder := t.TempDir()
	if err := os.WriteFile(filepath.Join(folder, "own.yaml"), []byte("rule: own\nlimit: 3\n"), 0o600); err != nil {
		t.Fatal(err)
	}
	_, err := Evaluate(board(t, 1.2), Options{Rules: folder})
	if err == nil || !strings.Contains(err.Error(), "own.yaml:2:1") {
		t.Errorf("a wrong rule file: %v", err)
	}
}
