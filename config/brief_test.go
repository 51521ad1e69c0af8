package config

import (
	"reflect"
	"strings"
	"testing"
)

// TestBrief: what a brief reading gives is what the whole reading gives, and
// what it leaves out may be anything.
func TestBrief(t *testing.T) {
	text := Template(TemplateOptions{})
	whole, err := Parse("rig.yaml", text)
	if err != nil {
		t.Fatal(err)
	}
	got, err := ParseBrief("rig.yaml", text)
	if err != nil {
		t.Fatal(err)
	}
	want := &Rig{Title: whole.Title}
	want.Specimen.Name = whole.Specimen.Name
	for _, g := range whole.Gauges {
		b := Gauge{Name: g.Name, Sees: g.Sees, Sense: g.Sense}
		if g.Calibration != nil {
			b.Calibration = &Calibration{Gain: g.Calibration.Gain}
		}
		want.Gauges = append(want.Gauges, b)
	}
	for _, p := range whole.Plan {
		want.Plan = append(want.Plan, PlanStep{Step: p.Step, Hold: p.Hold})
	}
	want.Limits.Sag, want.Read.CreepGauge = whole.Limits.Sag, whole.Read.CreepGauge
	if !reflect.DeepEqual(got, want) {
		t.Errorf("%+v\nwant\n%+v", got, want)
	}
	if len(got.Gauges) == 0 || len(got.Plan) == 0 || got.Title == "" {
		t.Errorf("the template shows too little for this test: %+v", got)
	}
	line := whole.Brief()
	if strings.Contains(line, "\n") {
		t.Fatalf("%q", line)
	}
	if back, err := ParseBrief("rig.yaml", []byte(line)); err != nil || !reflect.DeepEqual(back, want) {
		t.Errorf("%+v, %v", back, err)
	}
	for _, bad := range []string{"", "[", "gauges: 7\n", "specimens: {}\n", "specimen: {name: a}\nplan: [{step: l1, hold: 3 mm}]\n"} {
		if _, err := ParseBrief("rig.yaml", []byte(bad)); err == nil {
			t.Errorf("%q is taken", bad)
		}
	}
}

// BenchmarkParse is a rig file as it comes with the program, read whole and
// only for how its run stands.
func BenchmarkParse(b *testing.B) {
	text := Template(TemplateOptions{})
	for name, parse := range map[string]func(string, []byte) (*Rig, error){"whole": Parse, "brief": ParseBrief} {
		b.Run(name, func(b *testing.B) {
			for b.Loop() {
				if _, err := parse("rig.yaml", text); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}
