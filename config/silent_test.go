package config

import (
	"os"
	"strings"
	"testing"
)

// silent_after may be none; no other time may.
func TestSilentAfterNone(t *testing.T) {
	text, err := os.ReadFile("testdata/slat.yaml")
	if err != nil {
		t.Fatal(err)
	}
	with := func(old, new string) (*Rig, error) {
		if !strings.Contains(string(text), old) {
			t.Fatalf("the sample lacks %q", old)
		}
		return Parse("rig.yaml", []byte(strings.Replace(string(text), old, new, 1)))
	}
	r, err := with("silent_after: 10 s ", "silent_after: none ")
	if err != nil {
		t.Fatal(err)
	}
	if got := r.Gauges[0].SilentAfter; got == nil || *got != Never {
		t.Errorf("none reads as %+v", got)
	}
	for _, p := range append(r.Check(), r.CheckPorts()...) {
		if strings.Contains(p.What, "silent") {
			t.Error(p)
		}
	}
	if _, err := with("silent_after: 10 s ", "silent_after: 0 s "); err == nil || !strings.Contains(err.Error(), "silent_after must be greater than zero") {
		t.Errorf("0 s: %v", err)
	}
	if _, err := with("hold: 30 min", "hold: none"); err == nil {
		t.Error("a hold of none is taken")
	}
	a := Amendment{Path: "gauges[mid].silent_after", Value: "none", Why: "sends on its button", By: "mo"}
	later, err := r.Apply([]Amendment{a})
	if err != nil {
		t.Fatal(err)
	}
	if got := later.Gauges[0].SilentAfter; got == nil || *got != Never {
		t.Errorf("amended to none it reads as %+v", got)
	}
}
