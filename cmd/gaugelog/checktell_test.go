package main

import (
	"encoding/json"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"gaugelog/config"
	"gaugelog/simulators"
)

// A calibration counts through the day on which it is due, in the rig's zone,
// and has lapsed from the next midnight on.
func TestLapsedCalibrations(t *testing.T) {
	rig := &config.Rig{Timezone: "Europe/Dublin", Gauges: []config.Gauge{
		{Name: "old", Calibration: &config.Calibration{Due: "2026-07-01"}},
		{Name: "new", Calibration: &config.Calibration{Due: "2027-07-01"}},
		{Name: "undated", Calibration: &config.Calibration{}},
		{Name: "none"},
	}}
	for at, want := range map[string]int{
		"2026-07-01T22:59:59Z": 0, // 23:59:59 in Dublin
		"2026-07-01T23:00:00Z": 1,
		"2026-07-11T12:00:00Z": 10,
	} {
		now, err := time.Parse(time.RFC3339, at)
		if err != nil {
			t.Fatal(err)
		}
		got := calibrationsAt(rig, now)
		switch {
		case want == 0 && len(got) != 0:
			t.Errorf("at %s: %+v", at, got)
		case want > 0 && (len(got) != 1 || got[0].Gauge != "old" || got[0].Days != want):
			t.Errorf("at %s: %+v, want old by %d days", at, got, want)
		}
	}
}

// What check foretells of the demonstration is what the test then reaches.
func TestCheckForetellsTheDemosUncertainty(t *testing.T) {
	file := filepath.Join(t.TempDir(), "rig.yaml")
	if err := os.WriteFile(file, simulators.DemoRig().RigText, 0o644); err != nil {
		t.Fatal(err)
	}
	code, out, errOut := gaugelog("check", file, "--json")
	if code != Done {
		t.Fatalf("check ended with %d: %s", code, errOut)
	}
	var c checked
	if err := json.Unmarshal([]byte(out), &c); err != nil {
		t.Fatal(err)
	}
	r, _ := demoResult(t)
	reached := *r.Stiffness.Modulus.U / r.Stiffness.Modulus.Value
	t.Logf("foretold %.4f %%, reached %.4f %%", 100*c.Prediction.RelativeU, 100*reached)
	if d := c.Prediction.RelativeU/reached - 1; math.Abs(d) > 0.25 {
		t.Errorf("foretold %.3g, reached %.3g: off by %.0f %%", c.Prediction.RelativeU, reached, 100*d)
	}
	last := r.Creep.After[len(r.Creep.After)-1].Coefficient
	if last.U == nil {
		t.Fatal("the creep coefficient has no uncertainty")
	}
	t.Logf("creep coefficient: foretold %.5f, reached %.5f", c.Prediction.CreepU, *last.U)
	if d := c.Prediction.CreepU / *last.U - 1; math.Abs(d) > 0.25 {
		t.Errorf("creep: foretold %.3g, reached %.3g: off by %.0f %%", c.Prediction.CreepU, *last.U, 100*d)
	}
	if len(c.Prediction.Dominating) != 3 || len(c.Prediction.CreepDominating) != 3 {
		t.Errorf("dominating inputs: %d of E, %d of creep, want 3 each", len(c.Prediction.Dominating), len(c.Prediction.CreepDominating))
	}
}

// In US units no table holds another.
func TestCheckInUSUnits(t *testing.T) {
	file := filepath.Join(t.TempDir(), "rig.yaml")
	if err := os.WriteFile(file, simulators.DemoRig().RigText, 0o644); err != nil {
		t.Fatal(err)
	}
	_, out, _ := gaugelog("check", file, "--units", "us")
	tables, _, _ := strings.Cut(out, "The modulus can be known")
	for _, no := range []string{" mm", "MPa"} {
		if strings.Contains(tables, no) {
			t.Errorf("%q in US units:\n%s", no, tables)
		}
	}
	if !strings.Contains(tables, "stress, psi") || !strings.Contains(tables, "greatest sag, in") {
		t.Errorf("no US units in\n%s", tables)
	}
}
