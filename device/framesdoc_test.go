package device_test

import (
	"os"
	"strconv"
	"strings"
	"testing"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/device/frame"
)

// example is one description of FRAMES.md with the frames shown under it.
type example struct {
	yaml   string
	frames []string
}

func examples(t *testing.T) []example {
	text, err := os.ReadFile("frame/FRAMES.md")
	if err != nil {
		t.Fatal(err)
	}
	var out []example
	for i, block := range strings.Split(string(text), "```") {
		if i%2 == 0 {
			continue
		}
		if yaml, ok := strings.CutPrefix(block, "yaml\n"); ok {
			out = append(out, example{yaml: yaml})
		} else if lines, ok := strings.CutPrefix(block, "frames\n"); ok && len(out) > 0 {
			last := &out[len(out)-1]
			last.frames = append(last.frames, strings.Split(strings.TrimSpace(lines), "\n")...)
		}
	}
	return out
}

// rigOf puts a description into a rig file with one gauge.
func rigOf(description string) string {
	name := strings.Fields(description)[2]
	channel := ""
	switch {
	case strings.Contains(description, "modbus"):
		channel = `, channel: "7"`
	case strings.Contains(description, "{channel}"):
		channel = `, channel: "07"`
	}
	return `
specimen: {name: a, section: {shape: rectangle, width: 140 mm, depth: 38 mm}, length: 800 mm}
supports: [{name: left, at: 0 mm}, {name: right, at: 600 mm}]
gauges:
  - {name: mid, at: 300 mm, sense: down, resolution: 0.001 mm, port: /dev/ttyUSB0, frame: ` + name + channel + `}
loads: [{name: pan, at: 300 mm}]
frames:
` + "  " + strings.ReplaceAll(description, "\n", "\n  ")
}

// Every example of FRAMES.md passes check and reads its frames as it says.
func TestExamplesOfTheManual(t *testing.T) {
	all := examples(t)
	kinds := map[string]bool{}
	for _, e := range all {
		r, err := config.Parse("rig.yaml", []byte(rigOf(e.yaml)))
		if err != nil {
			t.Errorf("%s\n%v", e.yaml, err)
			continue
		}
		for _, p := range r.CheckPorts() {
			t.Errorf("%s\n%s", e.yaml, p.Error())
		}
		f, g := r.Frames[0], r.Gauges[0]
		kinds[f.Kind] = true
		o, err := device.FrameOptions(f, g.Channel)
		if err != nil {
			t.Errorf("%s: %v", f.Name, err)
			continue
		}
		if len(e.frames) < 3 {
			t.Errorf("%s: only %d frames shown", f.Name, len(e.frames))
		}
		for _, line := range e.frames {
			raw, want, ok := strings.Cut(line, "  ")
			if !ok {
				t.Errorf("%s: %q does not say what it reads", f.Name, line)
				continue
			}
			d, err := frame.New(o)
			if err != nil {
				t.Fatalf("%s: %v", f.Name, err)
			}
			if got := outcome(d, rawOf(t, raw)); got != strings.TrimSpace(want) {
				t.Errorf("%s: %s: %s, want %s", f.Name, raw, got, want)
			}
		}
	}
	if len(kinds) != 5 {
		t.Errorf("examples of %d kinds, want 5", len(kinds))
	}
}

// rawOf reads a Go string in quotes, or hex bytes.
func rawOf(t *testing.T, s string) []byte {
	t.Helper()
	if !strings.HasPrefix(s, `"`) {
		return fromHex(t, s)
	}
	text, err := strconv.Unquote(s)
	if err != nil {
		t.Fatalf("%s: %v", s, err)
	}
	return []byte(text)
}

// outcome feeds one frame and the pause behind it.
func outcome(d frame.Decoder, p []byte) string {
	var got []string
	emit := func(f *frame.Frame) {
		switch {
		case f.Rejected != frame.None:
			got = append(got, "rejected")
		case f.NoReading != "":
			got = append(got, "no reading "+f.NoReading)
		default:
			got = append(got, strings.TrimSpace("reads "+f.Value.String()+" "+f.Unit.String()+" "+f.Status))
		}
	}
	d.Feed(p, emit)
	d.Quiet(emit)
	return strings.Join(got, ", then ")
}
