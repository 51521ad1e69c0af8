package simulators

import (
	"math"
	"strings"
	"testing"

	"gaugelog/config"
)

const smallRig = `
specimen: {name: s, material: timber, section: {shape: rectangle, width: 40 mm, depth: 10 mm}, length: 1000 mm}
supports: [{name: l, at: 0 mm}, {name: r, at: 1000 mm}]
gauges:
  - {name: mid, at: 500 mm, stand: frame, sense: up, resolution: 0.001 mm, port: "sim:mid", frame: unit, travel: [0 mm, 12 mm]}
  - {name: side, at: 250 mm, stand: frame, sense: down, resolution: 0.001 mm, port: "sim:side", frame: streamed}
frames:
  - {name: unit, kind: text, request: "?\r", every: 1 s, end: "\r", pattern: '(?P<status>[ B])(?P<value>[+-]\d+\.\d+) (?P<unit>mm|in)', statuses: {B: battery-low}, no_readings: {Err: over-range}}
  - {name: streamed, kind: text, end: "\r\n", pattern: '(?P<value>[+-]\d{3}\.\d{3})', unit: mm}
loads: [{name: pan, at: 500 mm}]
plan: [{step: zero, hold: 100 s}, {step: l1, set: {pan: 0.5 kg}, hold: 100 s}]
`

// small runs the small rig with one fault and returns its frames by gauge with
// the second they came in, its text, and the events' kinds.
func small(t *testing.T, fault string) (s *Sim, frames map[string]map[int]Frame, text map[string]string, events string) {
	t.Helper()
	rig, err := config.Parse("rig.yaml", []byte(smallRig))
	if err != nil {
		t.Fatal(err)
	}
	truth, err := ParseTruth("truth.yaml", []byte("specimen: {modulus: 10000 MPa}\nevery_gauge: {preset: 6 mm}\n"))
	if err != nil {
		t.Fatal(err)
	}
	faults, err := ParseFaults("faults.yaml", []byte("faults: ["+fault+"]"))
	if err != nil {
		t.Fatal(err)
	}
	if s, err = New(Options{Rig: rig, Truth: truth, Faults: faults, Seed: 4}); err != nil {
		t.Fatal(err)
	}
	frames, text = map[string]map[int]Frame{"mid": {}, "side": {}}, map[string]string{}
	for done := false; !done; {
		st := s.Next(s.End(), 0)
		done = st.Done
		for _, b := range st.Batches {
			text[b.Port] += string(b.Bytes)
			for _, f := range b.Frames {
				frames[f.Name][int((f.At.Wall-s.start.Wall)/1e9)] = f
			}
		}
		for _, e := range st.Events {
			events += e.Kind.String() + " "
		}
	}
	return s, frames, text, events
}

// TestFaultsOnIndications checks what each fault of a gauge does to what it
// shows at 50 s, before and after. The gauge mid goes up when it sags.
func TestFaultsOnIndications(t *testing.T) {
	for name, c := range map[string]struct {
		fault               string
		mid40, mid50, mid70 float64
	}{
		"spike":       {"{kind: spike, gauge: mid, at: 45 s, for: 20 s, size: 0.5 mm}", 6, 5.5, 6},
		"knock":       {"{kind: gauge-knock, gauge: mid, at: 45 s, size: 0.062 mm}", 6, 5.938, 5.938},
		"stand knock": {"{kind: stand-knock, stand: frame, at: 45 s, size: -0.1 mm}", 6, 6.1, 6.1},
		"zero":        {"{kind: zero-pressed, gauge: mid, at: 45 s}", 6, 0, 0},
		"inches":      {"{kind: unit-key, gauge: mid, at: 45 s, for: 20 s}", 6, math.Round(6/25.4/5e-5) * 5e-5 * 25.4, 6},
		"travel":      {"{kind: end-of-travel, gauge: mid, at: 45 s, limit: 5.9 mm}", 6, 6, 6},
		"other gauge": {"{kind: spike, gauge: side, at: 45 s, for: 20 s, size: 0.5 mm}", 6, 6, 6},
		"support":     {"{kind: support-shift, support: r, at: 45 s, size: 0.2 mm}", 6, 5.9, 5.9},
		"load":        {"{kind: load-change, load: pan, at: 45 s, by: 9.6 N, for: 20 s}", 6, 6 - 9.6e9/(48*1e4*40*1000/12), 6},
	} {
		_, frames, _, _ := small(t, c.fault)
		for at, want := range map[int]float64{40: c.mid40, 50: c.mid50, 70: c.mid70} {
			if got, ok := frames["mid"][at]; !ok || math.Abs(got.MM-want) > 0.0006 {
				t.Errorf("%s: at %d s %.4f, want %.4f", name, at, got.MM, want)
			}
		}
	}
}

func TestFreezeAndTravel(t *testing.T) {
	_, frames, _, _ := small(t, "{kind: freeze, gauge: mid, at: 90 s, for: 60 s}")
	if got := frames["mid"][120].MM; got != 6 {
		t.Errorf("frozen gauge shows %g", got)
	}
	if got := frames["mid"][170].MM; math.Abs(got-(6-0.5*9.80665e9/(48*1e4*40*1000/12))) > 0.001 {
		t.Errorf("thawed gauge shows %g", got)
	}
	_, frames, _, _ = small(t, "{kind: end-of-travel, gauge: mid, at: 45 s, limit: 5.9 mm}")
	if got := frames["mid"][170].MM; got != 5.9 {
		t.Errorf("obstructed gauge shows %g", got)
	}
}

func TestFaultsOnLines(t *testing.T) {
	s, frames, _, events := small(t, "{kind: unplug, gauge: mid, at: 50 s, for: 20 s, name: /dev/other}")
	if events != "unplugged plugged mark " || s.Lost(0) != 20 {
		t.Errorf("unplug: events %q, %d lost", events, s.Lost(0))
	}
	if _, ok := frames["mid"][60]; ok {
		t.Error("an unplugged gauge was heard")
	}
	s, frames, _, _ = small(t, "{kind: stall, gauge: side, at: 50 s, for: 20 s}")
	if _, ok := frames["side"][60]; ok || s.Faults()[0].Frames != 20 {
		t.Errorf("stall: heard, or %d frames", s.Faults()[0].Frames)
	}
	var text map[string]string
	for _, kind := range []string{"garble", "drop-bytes"} {
		s, frames, text, _ = small(t, "{kind: "+kind+", gauge: side, at: 50 s, for: 50 s, share: 0.5}")
		damaged := 0
		for _, f := range frames["side"] {
			if f.Damaged {
				damaged++
			}
		}
		if n := s.Faults()[0].Frames; n != damaged || n < 10 || n > 40 {
			t.Errorf("%s: %d frames touched, %d said to be damaged", kind, n, damaged)
		}
		if whole := strings.Count(text["sim:side"], "+006.000\r\n"); kind == "garble" && whole > 100-damaged {
			t.Errorf("%s: %d whole frames", kind, whole)
		}
	}
	_, frames, text, _ = small(t, "{kind: echo, gauge: mid, at: 50 s, for: 20 s}")
	if n := strings.Count(text["sim:mid"], "?\r +6.000 mm\r"); n != 20 {
		t.Errorf("echo: %d", n)
	}
	if f := frames["mid"][60]; text["sim:mid"][f.Offset:f.Offset+11] != " +6.000 mm\r" {
		t.Errorf("echo: the frame's offset points to %q", text["sim:mid"][f.Offset:f.Offset+11])
	}
	_, _, text, _ = small(t, "{kind: battery-low, gauge: mid, at: 50 s, for: 20 s}, {kind: over-range, gauge: mid, at: 80 s, for: 5 s}")
	if a, b := strings.Count(text["sim:mid"], "B+6.000 mm\r"), strings.Count(text["sim:mid"], "Err\r"); a != 20 || b != 5 {
		t.Errorf("%d battery-low, %d over-range", a, b)
	}
	s, _, _, _ = small(t, "{kind: late-reply, gauge: mid, at: 50 s, for: 20 s, delay: 400 ms}")
	if n := s.Faults()[0].Frames; n != 20 {
		t.Errorf("%d late replies", n)
	}
}

// TestFilesRefused: each wrong file gets a message that says where and what.
func TestFilesRefused(t *testing.T) {
	for text, want := range map[string]string{
		"":                                       "the file is empty",
		"specimen: {modulus: 10 MPa}\nlode: 3\n": `line 2: unknown key "lode"`,
		"specimen: {modulus: 10}":                "line 1:",
		"specimen: {}":                           "specimen.modulus is missing",
		"specimen: {modulus: 10 MPa}\ncreep: {law: x}":                                           `unknown law "x"`,
		"specimen: {modulus: 10 MPa}\ncreep: {law: power, amplitude: 0.1, n: 2}":                 "0 < n < 1",
		"specimen: {modulus: 10 MPa}\nstands: [{name: a, temperature: 3 mm}]":                    "mm/K",
		"specimen: {modulus: 10 MPa}\ngauges: [{name: a, gain: -1}]":                             "gain must be above 0",
		"specimen: {modulus: 10 MPa}\n---\nspecimen: {modulus: 10 MPa}":                          "a second one follows",
		"specimen: {modulus: 10 MPa}\nevery_gauge: {noise: [1]}":                                 "line 2",
		"specimen: {modulus: 10 MPa}\ncreep: {law: kelvin-chain, amplitudes: [0.1], taus: []}\n": "as many amplitudes as taus",
	} {
		if _, err := ParseTruth("t.yaml", []byte(text)); err == nil || !strings.Contains(err.Error(), want) || !strings.HasPrefix(err.Error(), "t.yaml: ") {
			t.Errorf("%q: %v, want %q", text, err, want)
		}
	}
	for text, want := range map[string]string{
		"faults: [{kind: smoke}]":                                `unknown kind "smoke"`,
		"faults: [{kind: spike, gauge: a, at: 3 s}]":             "needs for",
		"faults: [{kind: garble, at: 3 s, for: 3 s}]":            "needs gauge or port",
		"faults: [{kind: stall, gauge: a, for: 3 s, share: 2}]":  "share lies in 0..1",
		"faults: [{kind: load-change, load: a, at: 3 s, by: 3}]": "line 1",
	} {
		if _, err := ParseFaults("f.yaml", []byte(text)); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%q: %v, want %q", text, err, want)
		}
	}
}

// TestMisfits: files that are right by themselves but do not fit the rig.
func TestMisfits(t *testing.T) {
	for name, c := range map[string]struct{ truth, faults, want string }{
		"gauge":   {"gauges: [{name: nobody}]", "[]", `gauge "nobody" is not in the rig`},
		"support": {"supports: [{name: nobody}]", "[]", `support "nobody" is not in the rig`},
		"step":    {"steps: [{step: nobody}]", "[]", `step "nobody" is not in the rig`},
		"fault":   {"", "[{kind: gauge-knock, gauge: nobody, at: 1 s, size: 1 mm}]", `no gauge "nobody"`},
		"after":   {"", "[{kind: gauge-knock, gauge: mid, after: nobody, at: 1 s, size: 1 mm}]", `no step "nobody"`},
		"outside": {"", "[{kind: gauge-knock, gauge: mid, at: 1 h, size: 1 mm}]", "outside the test"},
		"load":    {"", "[{kind: load-change, load: nobody, at: 1 s, by: 1 kg}]", `no load "nobody"`},
		"pace":    {"pace: [{at: 50 s, every: 1 s}, {at: 0 s, every: 1 s}]", "[]", "order of time"},
	} {
		rig, err := config.Parse("rig.yaml", []byte(smallRig))
		if err != nil {
			t.Fatal(err)
		}
		truth, err := ParseTruth("t.yaml", []byte("specimen: {modulus: 10000 MPa}\n"+c.truth))
		if err != nil {
			t.Fatal(name, err)
		}
		faults, err := ParseFaults("f.yaml", []byte("faults: "+c.faults))
		if err != nil {
			t.Fatal(name, err)
		}
		if _, err := New(Options{Rig: rig, Truth: truth, Faults: faults}); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: %v, want %q", name, err, c.want)
		}
	}
}
