package config

import (
	"os"
	"strings"
	"testing"
)

func TestDoubtfulRigsLoadWithAWarning(t *testing.T) {
	text, err := os.ReadFile("testdata/slat.yaml")
	if err != nil {
		t.Fatal(err)
	}
	for _, tc := range []struct{ old, new, want string }{
		{"139.95 mm", "193.95 mm", "rig.yaml:8:38: the places measured for width differ by more than a tenth (139.82\u202fmm to 193.95\u202fmm)"},
		{"gain: 1.0004", "gain: 0.0004", "calibration gain of gauge mid is 0.0004, more than a tenth from 1"},
		{"    u: 0.002 mm", "    u: 0.0002 mm", "u of gauge mid is smaller than its resolution allows"},
		{"resolution: 0.001 mm", "resolution: 1 cm", "resolution of gauge mid is coarse: 10\u202fmm"},
		{"sees: beam", "sees: seat", "gauge mid sees a seat, but the nearest support is 300\u202fmm away"},
		{"{step: zero, hold: 30 min}", "{step: zero, set: {pan: 1 kg}, hold: 30 min}", "the plan begins with a load"},
		{"catcher_gap: 40 mm", "catcher_gap: 5 mm", "the sag limit is not below catcher_gap"},
		{"times: [60 s, 1 h, 24 h]", "times: [60 s, 24 h, 1 h]", "times are not in ascending order"},
		{"sync: 10 s", "sync: 5 min", "a power cut loses up to 300 s of readings"},
		{"size: 16 MB", "size: 100 MB", "line-protocol servers commonly refuse"},
	} {
		s := strings.Replace(string(text), tc.old, tc.new, 1)
		if tc.new == "resolution: 1 cm" {
			s = strings.Replace(s, "    u: 0.002 mm", "    u: 5 mm", 1)
		}
		if tc.new == "sees: seat" {
			s = strings.Replace(s, ", creep_gauge: mid", "", 1)
		}
		r, err := Parse("rig.yaml", []byte(s))
		if err != nil {
			t.Errorf("%s: %v", tc.new, err)
			continue
		}
		found := Problems(r.Check())
		if len(found) != 1 || found[0].Severity != Warning || !strings.Contains(found[0].Error(), tc.want) || found[0].Fix == "" || found[0].Line == 0 {
			t.Errorf("%s\n got %v\nwant %s", tc.new, found, tc.want)
		}
	}
}

func TestRigMadeInGoIsCheckedWithoutLines(t *testing.T) {
	r := &Rig{Gauges: []Gauge{{Name: "mid", Sense: "down", Resolution: Length{Quantity{Value: 0.01}}}}}
	for _, p := range r.Check() {
		if p.Line != 0 || p.File != "" || strings.HasPrefix(p.Error(), ":") {
			t.Errorf("%v", p)
		}
		if strings.Contains(p.What, "gauge mid") && p.Severity == Error {
			t.Errorf("a zero meant as such: %v", p)
		}
	}
	if _, err := r.Apply(nil); err == nil {
		t.Error("a rig without a text was amended")
	}
}

func TestLineWithOverridesWhatIsStated(t *testing.T) {
	f := Frame{Line: Line{Baud: 9600, DataBits: 8, Parity: "none", StopBits: "1", DTR: "on"}}
	if got := f.LineWith(&Line{Baud: 4800, Parity: "even"}); got != (Line{4800, 8, "even", "1", "on", ""}) {
		t.Errorf("got %+v", got)
	}
	if f.LineWith(nil) != f.Line {
		t.Error("nil changed the line")
	}
}
