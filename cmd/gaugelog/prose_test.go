package main

import (
	"encoding/hex"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/device/frame"
)

// Six instruments that exist nowhere but in a paragraph of prose each
// (testdata/prose/*.md). Their bytes were made by hand from that prose; their
// frames (the yaml beside it) were described from the prose and
// device/frame/FRAMES.md alone. What is read must be what the prose says.

// handMade is one line of an instrument's page: bytes, and what they mean.
type handMade struct {
	bytes []byte
	means string
}

func handMadeIn(t *testing.T, page string) (out []handMade) {
	t.Helper()
	text, err := os.ReadFile(page)
	if err != nil {
		t.Fatal(err)
	}
	_, block, _ := strings.Cut(string(text), "```bytes\n")
	block, _, ok := strings.Cut(block, "```")
	if !ok {
		t.Fatalf("%s has no bytes", page)
	}
	for line := range strings.Lines(block) {
		raw, means, ok := strings.Cut(strings.TrimSpace(line), "  ")
		b, err := hex.DecodeString(strings.ReplaceAll(raw, " ", ""))
		if !ok || err != nil {
			t.Fatalf("%s: %q: %v", page, line, err)
		}
		out = append(out, handMade{b, means})
	}
	return out
}

// proseChannels are the gauges' channels where the prose says a number.
var proseChannels = map[string]string{"pillar": "01"}

// proseRig is a rig file with one gauge that has the description.
func proseRig(name, description string) string {
	channel := ""
	if c := proseChannels[name]; c != "" {
		channel = `, channel: "` + c + `"`
	}
	return `
specimen: {name: a, section: {shape: rectangle, width: 140 mm, depth: 38 mm}, length: 800 mm}
supports: [{name: left, at: 0 mm}, {name: right, at: 600 mm}]
gauges:
  - {name: mid, at: 300 mm, sense: down, resolution: 0.001 mm, port: /dev/ttyUSB0, frame: ` + name + channel + `}
loads: [{name: pan, at: 300 mm}]
frames:
  ` + strings.ReplaceAll(strings.TrimSpace(description), "\n", "\n  ") + "\n"
}

func TestProse(t *testing.T) {
	pages, err := filepath.Glob("testdata/prose/*.md")
	if err != nil || len(pages) != 6 {
		t.Fatalf("%d pages, want six: %v", len(pages), err)
	}
	for _, page := range pages {
		name := strings.TrimSuffix(filepath.Base(page), ".md")
		t.Run(name, func(t *testing.T) {
			text, err := os.ReadFile(strings.TrimSuffix(page, ".md") + ".yaml")
			if err != nil {
				t.Fatal(err)
			}
			rig, err := config.Parse("rig.yaml", []byte(proseRig(name, string(text))))
			if err != nil {
				t.Fatal(err)
			}
			for _, p := range rig.CheckPorts() {
				t.Errorf("check: %v", p)
			}
			o, err := device.FrameOptions(rig.Frames[0], rig.Gauges[0].Channel)
			if err != nil {
				t.Fatal(err)
			}
			readProse(t, o, handMadeIn(t, page))
		})
	}
}

func readProse(t *testing.T, o frame.Options, made []handMade) {
	t.Helper()
	var stream []byte
	var want []string
	for _, m := range made {
		if got := strings.Join(decodeAll(t, o, m.bytes, len(m.bytes)), ", then "); got != m.means {
			t.Errorf("% X: %s, want %s", m.bytes, got, m.means)
		}
		if m.means != "rejected" {
			stream = append(stream, m.bytes...)
			want = append(want, m.means)
		}
	}
	if len(want) < 3 || len(want) == len(made) {
		t.Errorf("%d frames that count of %d are too few to tell", len(want), len(made))
	}
	// One behind the other, in pieces of every size up to that of two frames.
	for piece := 1; piece <= 2*len(made[0].bytes); piece++ {
		if got := decodeAll(t, o, stream, piece); strings.Join(got, "\n") != strings.Join(want, "\n") {
			t.Errorf("as a stream in pieces of %d: %q, want %q", piece, got, want)
			return
		}
	}
}

// decodeAll feeds bytes in pieces, and the pause behind them.
func decodeAll(t *testing.T, o frame.Options, b []byte, piece int) (got []string) {
	t.Helper()
	d, err := frame.New(o)
	if err != nil {
		t.Fatal(err)
	}
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
	for len(b) > 0 {
		n := min(piece, len(b))
		d.Feed(b[:n], emit)
		b = b[n:]
	}
	d.Quiet(emit)
	return got
}
