package main

import (
	"bytes"
	"encoding/json"
	"errors"
	"math"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/santhosh-tekuri/jsonschema/v6"

	"gaugelog/analysis"
	"gaugelog/simulators"
)

// The closed loop: the demonstration's bytes go through pseudo-terminals, the
// device code, the recorder and the analysis, and what comes out is held
// against the simulator's own log of the truth, which shares no mathematics
// with the analysis.

var demoOnce = sync.OnceValues(func() (string, error) {
	dir, err := os.MkdirTemp("", "gaugelog-demo-*")
	if err != nil {
		return "", err
	}
	var out, errOut bytes.Buffer
	into := filepath.Join(dir, "demo")
	if code := run([]string{"demo", "--into", into, "--seed", "1"}, strings.NewReader(""), &out, &errOut); code != Done {
		return "", errorText(errOut.String())
	}
	return into, nil
})

type errorText string

func (e errorText) Error() string { return string(e) }

// demoRun is the folder of one demo, shared by the tests.
func demoRun(t *testing.T) string {
	t.Helper()
	dir, err := demoOnce()
	if err != nil {
		t.Fatal(err)
	}
	return dir
}

// demoResult is its result through the command line.
func demoResult(t *testing.T) (*analysis.Result, []byte) {
	t.Helper()
	var out, errOut bytes.Buffer
	if code := run([]string{"analyse", demoRun(t), "--json"}, strings.NewReader(""), &out, &errOut); code != Done {
		t.Fatalf("analyse ended with %d: %s", code, &errOut)
	}
	var r analysis.Result
	if err := json.Unmarshal(out.Bytes(), &r); err != nil {
		t.Fatal(err)
	}
	return &r, out.Bytes()
}

// demoSim is the simulation behind the demo, never run: only asked for its truth.
func demoSim(t *testing.T) *simulators.Sim {
	t.Helper()
	d := simulators.DemoRig()
	sim, err := simulators.New(simulators.Options{Rig: d.Rig, Truth: d.Truth, Faults: d.Faults, Seed: 1})
	if err != nil {
		t.Fatal(err)
	}
	return sim
}

func near(t *testing.T, what string, got, want, within float64) {
	t.Helper()
	if !(math.Abs(got-want) <= within) {
		t.Errorf("%s is %.6g, the truth is %.6g; they must agree within %g", what, got, want, within)
	}
}

func TestClosedLoop(t *testing.T) {
	r, _ := demoResult(t)
	sim := demoSim(t)
	modulus, _, _ := sim.Stiffness()
	at60 := modulus / sim.Creep(60)
	if r.Stiffness.Modulus == nil {
		t.Fatal("no modulus")
	}
	near(t, "E at 60 s", r.Stiffness.Modulus.Value, at60, 0.005*at60)
	near(t, "the creep exponent", r.Creep.Parameters["n"].Value, 0.23, 0.02)

	steps := map[string]simulators.StepTruth{}
	for _, s := range sim.Steps() {
		steps[s.Step] = s
	}
	for _, after := range []float64{60, 168 * 3600} {
		_, net, ok := sim.Sag("station", steps["s4"].Full+int64(after*1e9))
		if !ok {
			t.Fatal("the simulation knows no sag of station")
		}
		found := false
		for _, a := range r.Creep.After {
			if a.AfterS == after {
				found = true
				near(t, "the creep gauge's net sag", a.Sag.Value, net, 0.01)
			}
		}
		if !found {
			t.Errorf("no sag at %g s", after)
		}
	}
	for _, s := range r.Steps {
		if s.Largest == nil {
			continue
		}
		for _, g := range s.Gauges {
			if g.Initial != nil && s.Largest.Sag.Value < g.Initial.Value-3**g.Initial.U {
				t.Errorf("%s: the greatest sag %g mm is less than %g mm at %s", s.Step, s.Largest.Sag.Value, g.Initial.Value, g.Gauge)
			}
		}
	}
	// At mid-span the curve of s4 is nearly flat: the greatest sag lies within
	// 0.01 mm of the larger of the two gauges there.
	if s := r.Steps[4]; s.Largest != nil {
		_, net, _ := sim.Sag("station", steps["s4"].Full+60e9)
		near(t, "the greatest sag in s4", s.Largest.Sag.Value, net, 0.01)
		near(t, "its place", s.Largest.At.Value, 1320.3, 3) // the closed form's zero slope, shear counted
	} else {
		t.Error("s4 has no greatest sag")
	}
	first := sim.Instant(0).Wall
	for _, s := range r.Steps[1:] {
		found, err := time.Parse(time.RFC3339Nano, *s.Start.Found)
		if err != nil {
			t.Fatal(err)
		}
		near(t, "the start of "+s.Step+", s", float64(found.UnixNano()-first)/1e9, float64(steps[s.Step].From)/1e9, 2)
	}
}

// The figures of the scenario, worked out beforehand by closed forms without
// plunger springs, independently of this repository's code: net sag in mm by superposition, at the gauges outside the left
// support, at a quarter, off the middle and at three quarters.
func TestScenarioFigures(t *testing.T) {
	r, _ := demoResult(t)
	gauges := []string{"tail", "quarter-a", "station", "quarter-b"}
	for _, c := range []struct {
		step  string
		after float64
		mm    [4]float64
	}{
		{"s1", 60, [4]float64{-.411, .816, 1.106, .816}},
		{"s2", 60, [4]float64{-1.789, 3.490, 4.478, 3.065}},
		{"s3", 60, [4]float64{-2.914, 5.780, 7.830, 5.772}},
		{"s4", 60, [4]float64{-4.317, 8.505, 11.273, 8.076}},
		{"s4", 3600, [4]float64{-4.471, 8.808, 11.673, 8.360}},
		{"s4", 24 * 3600, [4]float64{-4.839, 9.534, 12.635, 9.049}},
		{"s4", 72 * 3600, [4]float64{-5.048, 9.944, 13.178, 9.439}},
		{"s4", 168 * 3600, [4]float64{-5.248, 10.340, 13.703, 9.814}},
		{"bare", 60, [4]float64{-1.000, 1.970, 2.610, 1.870}},
		{"bare", 3600, [4]float64{-.788, 1.553, 2.058, 1.474}},
		{"bare", 24 * 3600, [4]float64{-.445, .878, 1.163, .833}},
	} {
		for i, g := range gauges {
			got, ok := sagOf(r, c.step, g, c.after)
			if !ok {
				t.Errorf("%s has no sag of %s at %g s", c.step, g, c.after)
				continue
			}
			near(t, c.step+" "+g, got, c.mm[i], 0.03)
		}
	}
}

func sagOf(r *analysis.Result, step, gauge string, after float64) (float64, bool) {
	for _, s := range r.Steps {
		for _, g := range s.Gauges {
			if s.Step != step || g.Gauge != gauge {
				continue
			}
			for _, a := range g.SagAt {
				if a.AfterS == after {
					return a.Sag.Value, true
				}
			}
		}
	}
	return 0, false
}

// What was made to happen must be named for what it was.
func TestDemoDisturbances(t *testing.T) {
	r, _ := demoResult(t)
	sim := demoSim(t)
	want := map[string]string{"spike": "middle", "gauge-knock": "quarter-a", "gap": ""}
	for _, d := range r.Disturbances {
		gauge, known := want[d.Kind]
		if !known {
			t.Errorf("a %s of %v at %s was reported and never happened", d.Kind, d.Gauges, d.From)
			continue
		}
		if gauge != "" && (len(d.Gauges) != 1 || d.Gauges[0] != gauge) {
			t.Errorf("the %s is laid to %v, it was %s", d.Kind, d.Gauges, gauge)
		}
		if d.Kind == "gap" { // the power cut, 120 h after the full load of s4, for 40 min
			from, _ := time.Parse(time.RFC3339Nano, d.From)
			cut := sim.Cuts()[0]
			near(t, "the beginning of the gap, s", float64(from.UnixNano()-sim.Instant(0).Wall)/1e9, float64(cut.From)/1e9, 15*60)
			if d.To == nil {
				t.Error("the gap has no end")
			}
		}
		if d.Kind == "gauge-knock" {
			near(t, "the knock, mm", d.Size.Value, 0.062, 0.003)
		}
		delete(want, d.Kind)
	}
	for kind := range want {
		t.Errorf("the %s was not found", kind)
	}
}

// Every output is held to the schema in the repository.
func TestResultSchema(t *testing.T) {
	_, out := demoResult(t)
	checkSchema(t, out)
}

func checkSchema(t *testing.T, out []byte) {
	t.Helper()
	schema, err := jsonschema.NewCompiler().Compile("../../analysis/schema.json")
	if err != nil {
		t.Fatal(err)
	}
	doc, err := jsonschema.UnmarshalJSON(bytes.NewReader(out))
	if err != nil {
		t.Fatal(err)
	}
	if err := schema.Validate(doc); err != nil {
		t.Errorf("%v", err)
	}
}

// The same seed gives the same folder, byte for byte, and a second demo in
// the same place works.
func TestDemoRepeats(t *testing.T) {
	if testing.Short() {
		t.Skip("a second whole demo")
	}
	first := demoRun(t)
	second := filepath.Join(t.TempDir(), "again")
	// An earlier demo lies there already; the new one takes its place.
	stale := filepath.Join(second, "readings", "000099.lp")
	for name, text := range map[string]string{stale: "left over", filepath.Join(second, "demo.txt"): demoSign} {
		if err := errors.Join(os.MkdirAll(filepath.Dir(name), 0o755), os.WriteFile(name, []byte(text), 0o644)); err != nil {
			t.Fatal(err)
		}
	}
	var errOut bytes.Buffer
	if code := run([]string{"demo", "--into", second, "--seed", "1", "--replace"}, strings.NewReader(""), &bytes.Buffer{}, &errOut); code != Done {
		t.Fatalf("demo ended with %d: %s", code, &errOut)
	}
	if _, err := os.Stat(stale); err == nil {
		t.Error("the earlier demo was not taken away")
	}
	err := filepath.WalkDir(first, func(path string, d os.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		rel, _ := filepath.Rel(first, path)
		a, err := os.ReadFile(path)
		if err != nil {
			return err
		}
		b, err := os.ReadFile(filepath.Join(second, rel))
		if err != nil {
			return err
		}
		if !bytes.Equal(a, b) {
			t.Errorf("%s differs between two demos of one seed", rel)
		}
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
}
