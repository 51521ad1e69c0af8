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

// Nine instruments that exist nowhere but in a paragraph of prose each
// (testdata/prose/*.md): a text streamer with status letters and a checksum,
// text on request and by bus address, packed and hexadecimal digits, streamed
// and on a button, binary with a sum, Modbus RTU, SCPI. Their bytes were made by
// hand from that prose, and are read in two ways: by the description written
// from the prose and device/frame/FRAMES.md alone (the yaml beside it), and by
// what `listen --guess` proposes, completed from the prose.
//
// What --guess hears is the capture beside the page, which `listen --guess
// --save` kept at a pseudo-terminal on which a few lines of script spoke as the
// prose says: at a wrong speed as a UART would have read it. The .mend file is
// all that a person changed in the proposal, and why.

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
var proseChannels = map[string]string{"pillar": "01", "rail": "07"}

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
	if err != nil || len(pages) != 9 {
		t.Fatalf("%d pages, want nine: %v", len(pages), err)
	}
	for _, page := range pages {
		name := strings.TrimSuffix(filepath.Base(page), ".md")
		made := handMadeIn(t, page)
		t.Run(name+"/from the docs", func(t *testing.T) {
			text, err := os.ReadFile(strings.TrimSuffix(page, ".md") + ".yaml")
			if err != nil {
				t.Fatal(err)
			}
			readProse(t, proseOptions(t, name, string(text)), made)
		})
		t.Run(name+"/through listen --guess", func(t *testing.T) {
			proposal := proposedFor(t, strings.TrimSuffix(page, ".md")+".capture")
			readProse(t, proseOptions(t, name, mended(t, strings.TrimSuffix(page, ".md")+".mend", name, proposal)), made)
		})
	}
}

// proseOptions pastes a description into a rig file, checks it as `check`
// does, and returns what the decoder is told.
func proseOptions(t *testing.T, name, description string) frame.Options {
	t.Helper()
	rig, err := config.Parse("rig.yaml", []byte(proseRig(name, description)))
	if err != nil {
		t.Fatalf("%v\n%s", err, description)
	}
	for _, p := range append(rig.Check(), rig.CheckPorts()...) {
		if p.Severity == config.Error {
			t.Errorf("check: %v", p)
		}
	}
	o, err := device.FrameOptions(rig.Frames[0], rig.Gauges[0].Channel)
	if err != nil {
		t.Fatal(err)
	}
	return o
}

// proposedFor is the entry that `listen --guess` prints first of a capture, as
// it would be pasted. It must read something but Modbus, whose values it tells
// in words.
func proposedFor(t *testing.T, capture string) string {
	t.Helper()
	var out, errs strings.Builder
	root := newRoot()
	root.SetArgs([]string{"listen", "--replay", capture, "--guess"})
	root.SetOut(&out)
	root.SetErr(&errs)
	if err := root.ExecuteContext(t.Context()); err != nil {
		t.Fatalf("%v\n%s", err, errs.String())
	}
	first, _, _ := strings.Cut(out.String(), "# Or, less likely:")
	if !strings.Contains(first, "# reads ") && !strings.Contains(first, "kind: modbus") {
		t.Errorf("no value was read by the proposal:\n%s", first)
	}
	var entry []string
	for line := range strings.Lines(first) {
		if line = strings.TrimSpace(line); line != "" && !strings.HasPrefix(line, "#") {
			entry = append(entry, line)
		}
	}
	if len(entry) != 1 {
		t.Fatalf("%d entries were proposed:\n%s", len(entry), first)
	}
	return entry[0]
}

// mended is a proposal with what the person changed: in the .mend file a line
// "- OLD" names the one text to change and "+ NEW" what stands in its place;
// any other line says why.
func mended(t *testing.T, file, name, proposal string) string {
	t.Helper()
	text, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	out := strings.Replace(proposal, "name: proposed", "name: "+name, 1)
	old := ""
	for line := range strings.Lines(string(text)) {
		line = strings.TrimSuffix(line, "\n")
		switch {
		case strings.HasPrefix(line, "- "):
			old = line[2:]
		case strings.HasPrefix(line, "+ "):
			if n := strings.Count(out, old); n != 1 || old == "" {
				t.Fatalf("%s: %q stands %d times in the proposal, not once:\n%s", file, old, n, out)
			}
			out, old = strings.Replace(out, old, line[2:], 1), ""
		}
	}
	return out
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
