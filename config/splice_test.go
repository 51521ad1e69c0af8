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

func TestSpliceInOtherLayouts(t *testing.T) {
	for _, tc := range []struct{ text, path, value, want string }{
		{"a: 1 # one\r\nb: 2\r\n", "a", "3", "a: 3 # one\r\nb: 2\r\n"},
		{"a: 1\r\nb: 2\r\n", "c", "3", "a: 1\r\nb: 2\r\nc: 3\r\n"},
		{"a: 1\nb: 2", "c", "3", "a: 1\nb: 2\nc: 3"},
		{"ä: ü # µ\nb: {é: 2, c: 'it''s'}\n", "b.é", "x y", "ä: ü # µ\nb: {é: x y, c: 'it''s'}\n"},
		{"b: {c: it's, d: [1, \"}\"] } # }\n", "b.e", "5", "b: {c: it's, d: [1, \"}\"], e: 5 } # }\n"},
		{"b: {}\n", "b.e", "5", "b: {e: 5}\n"},
		{"a:\n  b: |\n    text\n    more\nz: 1\n", "a.c", "5", "a:\n  c: 5\n  b: |\n    text\n    more\nz: 1\n"},
		{"l:\n  - name: x\n    v: 1 mm\n\n  - name: y\n", "l[x].w", "2 mm", "l:\n  - name: x\n    v: 1 mm\n    w: 2 mm\n\n  - name: y\n"},
		{"\ufeffa: 1\n", "a", "2", "\ufeffa: 2\n"},
		{"{\n  a: 1, # one }\n  b: 2\n}\n", "c.d", "on", "{\n  a: 1, # one }\n  b: 2\n, c: {d: \"on\"}}\n"},
	} {
		got, err := Splice([]byte(tc.text), tc.path, tc.value)
		if err != nil || string(got) != tc.want {
			t.Errorf("%s of %q\n got %q %v\nwant %q", tc.path, tc.text, got, err, tc.want)
		}
	}
	for _, tc := range []struct{ text, path string }{
		{"a: |\n  text\n", "a"}, {"a: one\n  two\n", "a"}, {"a: &x 1\nb: *x\n", "a"}, {"a: [1, 2]\n", "a"},
		{"- name: x\n- name: x\n", "x"}, {"l: [{name: x}, {name: x}]\n", "l[x].v"}, {"a: {b\n", "a"}, {"", "a"},
	} {
		if got, err := Splice([]byte(tc.text), tc.path, "5"); err == nil {
			t.Errorf("%s of %q was written: %q", tc.path, tc.text, got)
		}
	}
}
