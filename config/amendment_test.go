package config

import (
	"errors"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

const amendments = `# learned later
- path: specimen.section.depth
  value: [37.90 mm, 37.92 mm]
  why: measured again
  by: mk
  entered: 2026-10-01T09:00:00Z
- {path: "gauges[mid].calibration.gain", value: 1.0009, since: 2026-10-02T00:00:00+01:00, why: new certificate}
- {path: details.Humidity, value: "55 %", why: forgotten}
- {path: plan, value: [{step: zero, hold: 30 min}, {step: l1, set: {pan: 12.40 kg}, hold: 48 h}], why: longer hold}
- {path: "decisions[knock-1]", value: keep, why: it was a truck}
`

func TestApplyAmendments(t *testing.T) {
	r, err := LoadRig("testdata/slat.yaml")
	if err != nil {
		t.Fatal(err)
	}
	list, err := ParseAmendments("amendments.yaml", []byte(amendments))
	if err != nil {
		t.Fatal(err)
	}
	if len(list) != 5 || list[0].Shown != "[37.90 mm, 37.92 mm]" || list[1].Shown != "1.0009" || !list[4].IsDecision() {
		t.Fatalf("read %+v", list)
	}
	got, err := r.Apply(list)
	if err != nil {
		t.Fatal(err)
	}
	if d := got.Specimen.Section.Depth; len(d) != 2 || d[1].Value != 37.92 {
		t.Errorf("depth %+v", d)
	}
	if got.Gauges[0].Calibration.Gain.Value != 1.0004 {
		t.Errorf("a dated amendment counted from the beginning")
	}
	if d := got.Details; len(d) != 3 || d[2] != (Detail{"Humidity", "55 %"}) {
		t.Errorf("details %v", d)
	}
	if len(got.Plan) != 2 || got.Plan[1].Hold.Value != 48*3600 {
		t.Errorf("plan %+v", got.Plan)
	}
	if r.Specimen.Section.Depth[0].Value != 37.95 || len(r.Plan) != 3 {
		t.Errorf("the rig itself was changed")
	}
	since := time.Date(2026, 10, 1, 23, 0, 0, 0, time.UTC)
	if c := Changes(list); len(c) != 1 || !c[0].Equal(since) {
		t.Errorf("changes %v", c)
	}
	for _, tc := range []struct {
		at   time.Time
		gain float64
	}{{since.Add(-time.Second), 1.0004}, {since, 1.0009}} {
		at, err := r.ApplyAt(list, tc.at)
		if err != nil || at.Gauges[0].Calibration.Gain.Value != tc.gain {
			t.Errorf("at %v: gain %v, want %v (%v)", tc.at, at.Gauges[0].Calibration.Gain, tc.gain, err)
		}
	}
	again, err := got.Apply([]Amendment{{Path: "specimen.length", Value: "900 mm", Why: "x"}})
	if err != nil || again.Specimen.Length.Value != 900 || again.Plan[1].Hold.Value != 48*3600 {
		t.Errorf("a second round lost the first: %v", err)
	}
}

func TestWrongAmendmentNamesItsPlace(t *testing.T) {
	r, err := LoadRig("testdata/slat.yaml")
	if err != nil {
		t.Fatal(err)
	}
	for _, tc := range []struct{ text, want string }{
		{"- {path: specimen.length, value: 800, why: x}\n", "a.yaml:1:34: specimen.length: \"800\" has no unit"},
		{"- {path: specimen.lenght, value: 800 mm, why: x}\n", "a.yaml:1:10: unknown key \"lenght\" in specimen"},
		{"- {path: \"gauges[mit].at\", value: 300 mm, why: x}\n", "a.yaml:1:10: amendment of gauges[mit].at: there is no mit in the list (did you mean mid?)"},
		{"- {path: \"gauges[mid].at\", value: 3 m, why: x}\n", "a.yaml:1:35: gauge mid at 3000\u202fmm is not on the beam"},
	} {
		list, err := ParseAmendments("a.yaml", []byte(tc.text))
		if err != nil {
			t.Errorf("%s: %v", tc.text, err)
			continue
		}
		if _, err = r.Apply(list); err == nil || !strings.HasPrefix(err.Error(), tc.want) {
			t.Errorf("%s\n got %v\nwant %s", tc.text, err, tc.want)
		}
	}
	for _, tc := range []struct{ text, want string }{
		{"- {path: plan, valeu: 3, why: x}\n", "a.yaml:1:16: unknown key \"valeu\" in amendments[0]"},
		{"- {path: plan, value: 3, why: x, since: yesterday}\n", "a.yaml:1:41: since \"yesterday\" is not an instant"},
		{"- {path: plan, value: 3}\n", "a.yaml:1:3: the amendment has no reason"},
		{"- {path: \"plan[\", value: 3, why: x}\n", "a.yaml:1:10: path \"plan[\""},
	} {
		if _, err := ParseAmendments("a.yaml", []byte(tc.text)); err == nil || !strings.HasPrefix(err.Error(), tc.want) {
			t.Errorf("%s\n got %v\nwant %s", tc.text, err, tc.want)
		}
	}
}

func TestAppendAmendment(t *testing.T) {
	path := filepath.Join(t.TempDir(), "amendments.yaml")
	first := Amendment{Path: "details.moisture", Value: "11.2 %", Why: "oven: \"dry\"\nsecond line", By: "mk"}
	second := Amendment{Path: "plan", Value: []any{map[string]any{"step": "zero", "hold": "30 min"}}, Since: "2026-10-02T00:00:00Z", Why: "extended"}
	for _, a := range []Amendment{first, second} {
		if err := AppendAmendment(path, a); err != nil {
			t.Fatal(err)
		}
	}
	list, err := LoadAmendments(path)
	if err != nil || len(list) != 2 {
		t.Fatalf("%v %v", list, err)
	}
	if list[0].Value != "11.2 %" || list[0].Why != first.Why || list[1].Since != second.Since || list[1].Path != "plan" {
		t.Errorf("read back %+v", list)
	}
	if err := os.WriteFile(path, []byte("- {path: plan}\n"), 0o644); err != nil {
		t.Fatal(err)
	}
	var p Problem
	if err := AppendAmendment(path, first); !errors.As(err, &p) || p.Line != 1 {
		t.Errorf("appended to a file that cannot be read: %v", err)
	}
	if list, err := LoadAmendments(filepath.Join(t.TempDir(), "none.yaml")); list != nil || err != nil {
		t.Errorf("no file: %v %v", list, err)
	}
}
