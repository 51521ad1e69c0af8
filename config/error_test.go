package config

import (
	"errors"
	"os"
	"strings"
	"testing"
)

// Each case puts new in the place of old in the sample rig; the mark § in new
// stands where the error must point. want begins the message, mend is in the
// mend.
var wrongRigs = []struct{ name, old, new, want, mend string }{
	{"unknown key", "  material: plastic", "  §materail: plastic", `unknown key "materail" in specimen`, "did you mean material?"},
	{"unknown empty key", "timezone: Europe/Dublin", "§shelves:", `unknown key "shelves"`, "known here: alarms, details, evaluate"},
	{"wrong case", "    at: 300 mm", "    §At: 300 mm", `unknown key "At" in gauges[mid]`, "did you mean at?"},
	{"key in a list, in braces", "{name: left,  at: 0 mm}", "{name: left, at: 0 mm, §knid: pin}", `unknown key "knid" in supports[left]`, "did you mean kind?"},
	{"repeated key", "  length: 800 mm", "  length: 800 mm\n  §length: 900 mm", "key length stands twice in specimen (first in line 10)", "keep one"},
	{"repeated detail", `batch: "7/4"`, `§Moisture: "7/4"`, "key Moisture stands twice in details", "keep one"},
	{"repeated load in a step", "set: {pan: 12.40 kg}", "set: {pan: 12.40 kg, §pan: 1 kg}", "key pan stands twice in plan[l1].set", "keep one"},
	{"bare number", "    at: 300 mm", "    at: §300", `gauges[mid].at: "300" has no unit: a length is wanted here`, "write the unit: 300 mm"},
	{"quoted bare number", "    at: 300 mm", `    at: §"300"`, `gauges[mid].at: "300" has no unit`, "write the unit: 300 mm"},
	{"bare number in a list", "width: [139.82 mm, 139.95 mm,", "width: [139.82 mm, §139.95,", `specimen.section.width[1]: "139.95" has no unit`, "139.95 mm"},
	{"bare weight", "set: {pan: 12.40 kg}", "set: {pan: §12.40}", `plan[l1].set.pan: "12.40" has no unit`, "12.40 kg"},
	{"metres for minutes", "hold: 30 min", "hold: §30 m", `plan[zero].hold: "30 m" is no time: m is metres`, "30 min"},
	{"unit on a ratio", "gain: 1.0004", "gain: §1.0004 mm", `gauges[mid].calibration.gain: "1.0004 mm" has a unit`, "write 1.0004"},
	{"no value", "    stand: frame-1 ", "    stand:§ ", "gauges[mid].stand has no value", "take the line out"},
	{"list for a value", "    at: 300 mm", "    at: §[300 mm]", "gauges[mid].at is one value, and here is a list", "one value"},
	{"value for a group", "gravity: {latitude: 55.9, height: 60 m}", "gravity: §9.81", "gravity is a group of keys", "latitude"},
	{"value for a list", "supports:\n", "supports: §two\nother:\n", "supports is a list", "begin each entry"},
	{"text for a whole number", "baud: 9600", "baud: §fast", `frames[streamed].line.baud is a whole number, and here is "fast"`, "digits only"},
	{"anchor", "    at: 300 mm", "    at: §&here 300 mm", "anchors (&) and aliases (*)", "write the value out"},
	{"tag", "    at: 300 mm", "    at: §!!str 300 mm", "YAML tags", "take the tag away"},
	{"tab", "  length: 800 mm", "§\tlength: 800 mm", "this is not YAML", "never with tabs"},
	{"sampling word", "sampling: {every: 1 s}", "sampling: §everything", `record.sampling is "everything"`, "write all"},
	{"gauge off the beam", "    at: 300 mm", "    at: §900 mm", "gauge mid at 900\u202fmm is not on the beam, which lies from -100\u202fmm to 700\u202fmm", "correct at"},
	{"load off the beam", "{name: pan, at: 300 mm}", "{name: pan, at: §-101 mm}", "load pan at -101\u202fmm is not on the beam", "correct at"},
	{"support off the beam", "at: 600.0(5) mm", "at: §701 mm", "support right at 701\u202fmm is not on the beam", "correct at"},
	{"one pin", "  - {name: right, at: 600.0(5) mm}", "", "the beam would fall: 1 of the two pins", "kind: clamp"},
	{"two supports at one place", "at: 600.0(5) mm", "at: §0 mm", "supports left and right stand at one place", "take it out"},
	{"same support name", "name: right", "name: §left", "two supports are called left (the first in line 15)", "its own name"},
	{"capital in a name", "  - name: mid", "  - name: §Mid", `gauge name "Mid" is not of small letters`, "no blanks or capitals"},
	{"zero depth", "depth: [37.95 mm,", "depth: [§0 mm,", "depth must be greater than zero", "such as 38.0 mm"},
	{"zero length", "  length: 800 mm", "  length: §0 mm", "specimen length must be greater than zero", "whole length"},
	{"no length", "  length: 800 mm", "", "specimen has no length", "add the whole length"},
	{"diameter of a rectangle", "u: 0.02 mm}", "u: 0.02 mm, diameter: §3 mm}", "a rectangle section has no diameter", "change the shape"},
	{"general with width", "shape: rectangle, width: [139.82 mm, 139.95 mm, 139.90 mm]", "shape: general, second_moment: 6e5 mm4, width: §139 mm", "a general section has no width", "take it out"},
	{"no resolution", "    resolution: 0.001 mm", "", "gauge mid has no resolution", "resolution: 0.001 mm"},
	{"no sense", "    sense: down                 #", "    #", "gauge mid has no sense", "add sense: down"},
	{"wrong sense", "    sense: down", "    sense: §dwon", `sense of gauge mid is "dwon"`, "did you mean down?"},
	{"travel reversed", "travel: [0 mm, 12.7 mm]", "travel: §[12.7 mm, 0 mm]", "travel of gauge mid is reversed", "lowest indication first"},
	{"gain zero", "gain: 1.0004", "gain: §0", "calibration gain of gauge mid is zero", "slope"},
	{"correlation", "correlation: -0.85", "correlation: §-1.2", "correlation must lie between -1 and 1", "not the covariance"},
	{"due before date", "due: 2027-09-14", "due: §2025-09-14", "calibration of gauge mid is due before its date", "correct one"},
	{"no date", "date: 2026-09-14", "date: §14.9.2026", `"14.9.2026" is not a date`, "2026-09-14"},
	{"unknown load in a step", "set: {pan: 12.40 kg}", "set: {§pen: 12.40 kg}", `step l1 sets load "pen", which is not in loads`, "did you mean pan?"},
	{"no hold", "{step: zero, hold: 30 min}", "§{step: zero}", "step zero of the plan has no hold", "hold: 24 h"},
	{"same step twice", "{step: bare,", "{step: §l1,", "two steps of the plan are called l1", "its own name"},
	{"load without a place", "{name: pan, at: 300 mm}", "§{name: pan}", "load pan has no place", "at: 300 mm"},
	{"load in two ways", "{name: pan, at: 300 mm}", "§{name: pan, at: 300 mm, from: 0 mm, to: 1 mm}", "load pan is both at one place and spread", "keep at"},
	{"every and dense", "sampling: {every: 1 s}", "sampling: {every: 1 s, dense: §1 s}", "sampling is at a fixed interval", "keep every"},
	{"sync", "sync: 10 s", "sync: §2 h", "sync must lie between 100 ms and 1 h", "10 s"},
	{"roll", "size: 16 MB", "size: §16 GB", "roll.size must lie between", "16 MB"},
	{"limits reversed", "[18 C, 24 C]", "§[24 C, 18 C]", "limits.temperature is reversed", "lowest first"},
	{"creep gauge", "creep_gauge: mid", "creep_gauge: §mit", `there is no gauge "mit"`, "did you mean mid?"},
	{"time zone", "timezone: Europe/Dublin", "timezone: §Europe/Doblin", `"Europe/Doblin" is not a time zone`, "IANA"},
	{"forecast", "forecast: [10 d, 1 a]", "forecast: [§0 d, 1 a]", "forecast must all be greater than zero", "1 h"},
	{"gravity twice", "gravity: {latitude: 55.9, height: 60 m}", "gravity: §{latitude: 55.9, value: 9.81}", "gravity is stated twice", "keep value"},
}

func TestWrongRigsPointAtThePlace(t *testing.T) {
	text, err := os.ReadFile("testdata/slat.yaml")
	if err != nil {
		t.Fatal(err)
	}
	for _, tc := range wrongRigs {
		t.Run(tc.name, func(t *testing.T) {
			if strings.Count(string(text), tc.old) < 1 {
				t.Fatalf("the sample does not hold %q", tc.old)
			}
			marked := strings.Replace(string(text), tc.old, tc.new, 1)
			line, col := 0, 0
			if before, _, ok := strings.Cut(marked, "§"); ok {
				line = strings.Count(before, "\n") + 1
				col = len([]rune(before[strings.LastIndex(before, "\n")+1:])) + 1
			}
			_, err := Parse("rig.yaml", []byte(strings.Replace(marked, "§", "", 1)))
			var list Problems
			if !errors.As(err, &list) {
				t.Fatalf("got %v", err)
			}
			p := list[0]
			if !strings.HasPrefix(p.What, tc.want) || !strings.Contains(p.Mend(), tc.mend) {
				t.Errorf("\n got %s\n     %s\nwant %s\n     %s", p.What, p.Fix, tc.want, tc.mend)
			}
			if p.Line == 0 || p.Col == 0 || line > 0 && (p.Line != line || p.Col != col) {
				t.Errorf("%d:%d, want %d:%d", p.Line, p.Col, line, col)
			}
		})
	}
}

func TestAllErrorsAtOnceInOrder(t *testing.T) {
	text, err := os.ReadFile("testdata/slat.yaml")
	if err != nil {
		t.Fatal(err)
	}
	s := strings.NewReplacer("    at: 300 mm", "    at: 300", "hold: 30 min", "hold: 30 m", "  mass: 4.10 kg", "  mas: 4.10 kg").Replace(string(text))
	_, err = Parse("rig.yaml", []byte(s))
	var list Problems
	if !errors.As(err, &list) || len(list) != 3 {
		t.Fatalf("got %v", err)
	}
	for i, want := range []string{"rig.yaml:11:3: unknown key \"mas\"", "rig.yaml:19:9: gauges[mid].at", "rig.yaml:40:24: plan[zero].hold"} {
		if !strings.HasPrefix(list[i].Error(), want) {
			t.Errorf("error %d: %v, want %s", i, list[i], want)
		}
	}
	var one Problem
	if !errors.As(err, &one) || one.Line != 11 {
		t.Errorf("the list does not unwrap to its problems: %v", one)
	}
}

func TestTwoGaugesOnOnePort(t *testing.T) {
	text, err := os.ReadFile("testdata/slat.yaml")
	if err != nil {
		t.Fatal(err)
	}
	second := "  - {name: end, at: 0 mm, sense: up, resolution: 0.01 mm, port: usb:0403:6001:A10K3}\nframes:"
	_, err = Parse("rig.yaml", []byte(strings.Replace(string(text), "frames:", second, 1)))
	if err == nil || !strings.HasPrefix(err.Error(), "rig.yaml:34:65: gauges mid and end are both on port usb:0403:6001:A10K3") {
		t.Errorf("got %v", err)
	}
	_, err = Parse("rig.yaml", []byte(strings.Replace(string(text), "frames:", strings.Replace(second, "}", ", channel: \"2\"}", 1), 1)))
	if err != nil {
		t.Errorf("another channel: %v", err)
	}
}

func TestFilesThatAreNoRig(t *testing.T) {
	for text, want := range map[string]string{
		"":                      "rig.yaml:1: the file is empty",
		"# nothing\n":           "rig.yaml:1: the file is empty",
		"[]":                    "rig.yaml:1:1: the file is a group of keys",
		"title: a\n---\nb: c\n": "rig.yaml:2:1: a second document begins here",
		"title: {a\n":           "rig.yaml:1: this is not YAML",
		"? [a]\n: b\n":          "rig.yaml:1:3: a key is a plain word",
		"<<: {title: b}\n":      "rig.yaml:1:1: a key is a plain word",
	} {
		if _, err := Parse("rig.yaml", []byte(text)); err == nil || !strings.HasPrefix(err.Error(), want) {
			t.Errorf("%q: got %v, want %s", text, err, want)
		}
	}
	if _, err := LoadRig(t.TempDir()); err == nil || !strings.Contains(err.Error(), "this is a folder") {
		t.Errorf("a folder: %v", err)
	}
	if _, err := LoadRig("testdata/none.yaml"); err == nil || err.Error() != "testdata/none.yaml: there is no such file" {
		t.Errorf("no file: %v", err)
	}
}
