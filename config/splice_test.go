package config

import (
	"os"
	"strings"
	"testing"
)

func TestSplice(t *testing.T) {
	text, err := os.ReadFile("testdata/slat.yaml")
	if err != nil {
		t.Fatal(err)
	}
	for _, tc := range []struct{ path, value, old, new string }{
		{"gauges[mid].port", "usb:1:2:3", "port: usb:0403:6001:A10K3   #", "port: usb:1:2:3   #"},
		{"gauges[mid].channel", "#2", `channel: ""  `, `channel: "#2"  `},
		{"gauges[0].calibration.gain", "1.0009", "gain: 1.0004,", "gain: 1.0009,"},
		{"specimen.section.depth[1]", "38.5 mm", "38.02 mm", "38.5 mm"},
		{"specimen.section.u", "0.05 mm", "u: 0.02 mm}", "u: 0.05 mm}"},
		{"supports[right].compliance", "0.1 mm/N", "at: 600.0(5) mm}", "at: 600.0(5) mm, compliance: 0.1 mm/N}"},
		{"gauges[mid].line.baud", "4800", "for a gauge that sends on its button\n", "for a gauge that sends on its button\n    line: {baud: 4800}\n"},
		{"timezone", "on", "timezone: Europe/Dublin", `timezone: "on"`},
	} {
		got, err := Splice(text, tc.path, tc.value)
		if want := strings.Replace(string(text), tc.old, tc.new, 1); err != nil || string(got) != want {
			t.Errorf("%s = %s: %v\n%s", tc.path, tc.value, err, got)
		}
	}
	got, err := SpliceList(text, "specimen.section.depth", []string{"1 mm", "2 mm"})
	if want := strings.Replace(string(text), "[37.95 mm, 38.02 mm, 38.01 mm]", "[1 mm, 2 mm]", 1); err != nil || string(got) != want {
		t.Errorf("list: %v\n%s", err, got)
	}
	for _, path := range []string{"gauges", "specimen", "gauges[none].at", "title.x", "", "plan[x"} {
		if got, err := Splice(text, path, "1 mm"); err == nil {
			t.Errorf("%q was written:\n%s", path, got)
		}
	}
}
