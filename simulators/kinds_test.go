package simulators

import (
	"bytes"
	"encoding/hex"
	"regexp"
	"strings"
	"testing"

	"gaugelog/config"
)

const kindsRig = `
specimen: {name: s, material: timber, section: {shape: rectangle, width: 40 mm, depth: 10 mm}, length: 1000 mm}
supports: [{name: l, at: 0 mm}, {name: r, at: 1000 mm}]
gauges:
  - {name: one, at: 500 mm, sense: down, resolution: 0.001 mm, port: "sim:bus", frame: registers, channel: "1"}
  - {name: two, at: 250 mm, sense: down, resolution: 0.001 mm, port: "sim:bus", frame: registers, channel: "2"}
  - {name: button, at: 300 mm, sense: down, resolution: 0.001 mm, port: "sim:button", frame: pressed}
  - {name: text, at: 300 mm, sense: down, resolution: 0.001 mm, port: "sim:text", frame: streamed}
  - {name: query, at: 300 mm, sense: down, resolution: 0.001 mm, port: "sim:query", frame: queried}
frames:
  - {name: registers, kind: modbus, unit: mm, timeout: 200 ms, modbus: {function: holding, register: 4, type: int16, scale: 0.001, status: 5, status_bits: {"2": hold}}}
  - {name: pressed, kind: text, button: true, end: "\r", pattern: '(?P<value>[+-]\d{3}\.\d{3})', unit: mm}
  - {name: streamed, kind: text, end: "\r\n", pattern: '(?P<value>[+-]\d{3}\.\d{3})(?P<status>[ HUO])', unit: mm, statuses: {H: hold, U: high-limit, O: over-range}}
  - {name: queried, kind: scpi, unit: mm, scpi: {query: "READ?"}}
loads: [{name: pan, at: 500 mm}]
plan: [{step: zero, hold: 100 s}, {step: l1, set: {pan: 1 kg}, hold: 100 s}]
`

func kinds(t *testing.T, fault string, asked bool) *Sim {
	t.Helper()
	rig, err := config.Parse("rig.yaml", []byte(kindsRig))
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
	s, err := New(Options{Rig: rig, Truth: truth, Faults: faults, Seed: 4, Asked: asked})
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// play runs to the end and gives each port's bytes and every frame.
func play(s *Sim) (text map[string]string, frames []Frame) {
	text = map[string]string{}
	for done := false; !done; {
		st := s.Next(s.End(), 0)
		done = st.Done
		for _, b := range st.Batches {
			text[b.Port] += string(b.Bytes)
			frames = append(frames, b.Frames...)
		}
	}
	return text, frames
}

func counts(s *Sim, name string) Counts {
	for _, c := range s.Counts() {
		if c.Name == name {
			return c
		}
	}
	return Counts{}
}

// TestButton: nothing is sent without a press, one frame for each.
func TestButton(t *testing.T) {
	s := kinds(t, "", false)
	if text, _ := play(s); text["sim:button"] != "" {
		t.Errorf("sent %q unasked", text["sim:button"])
	}
	s = kinds(t, "{kind: press, gauge: button, at: 7 s}, {kind: press, gauge: button, at: 50 s, for: 10 s, every: 4 s}", false)
	text, frames := play(s)
	if want := strings.Repeat("+006.000\r", 4); text["sim:button"] != want {
		t.Errorf("sent %q, want %q", text["sim:button"], want)
	}
	var at []int64
	for _, f := range frames {
		if f.Name == "button" {
			at = append(at, (f.At.Wall-s.start.Wall)/1e9)
		}
	}
	if len(at) != 4 || at[0] != 7 || at[1] != 50 || at[2] != 54 || at[3] != 58 {
		t.Errorf("sent at %v s", at)
	}
	if f := s.Faults(); f[0].Frames != 1 || f[1].Frames != 3 {
		t.Errorf("presses %d and %d", f[0].Frames, f[1].Frames)
	}
	s = kinds(t, "", true)
	b, err := s.Press("button", 3e9)
	if err != nil || string(b.Bytes) != "+006.000\r" || len(b.Frames) != 1 {
		t.Errorf("pressed: %q, %v", b.Bytes, err)
	}
	if _, err := s.Press("text", 3e9); err == nil {
		t.Error("a button pressed that is not there")
	}
}

// TestStatusFaults: hold keeps the number and says so; a limit and over-range
// are said by the status of a frame that has one.
func TestStatusFaults(t *testing.T) {
	s := kinds(t, `{kind: hold, gauge: text, at: 90 s, for: 20 s}, {kind: status, gauge: text, status: high-limit, at: 40 s, for: 10 s},
  {kind: over-range, gauge: text, at: 60 s, for: 5 s}, {kind: hold, gauge: one, at: 90 s, for: 20 s}`, false)
	text, frames := play(s)
	for want, n := range map[string]int{"+006.000H\r\n": 20, "+006.000U\r\n": 10, "O\r\n": 5, "\r\n": 200} {
		if got := strings.Count(text["sim:text"], want); got != n {
			t.Errorf("%d frames with %q, want %d", got, want, n)
		}
	}
	if c := counts(s, "text"); c != (Counts{Name: "text", Intact: 195, NoReading: 5}) {
		t.Errorf("%+v", c)
	}
	held := 0
	for _, f := range frames {
		if f.Name == "one" && f.Status == "hold" {
			held++
		}
	}
	if held != 20 {
		t.Errorf("%d frames of the slave on hold", held)
	}
}

// TestNoiseAndEndless: noise makes the frame behind it doubtful; an endless
// stream has no terminator and swallows the frame after it.
func TestNoiseAndEndless(t *testing.T) {
	s := kinds(t, "{kind: noise, gauge: text, at: 50 s, for: 20 s}, {kind: endless, gauge: text, at: 100 s, for: 20 s}", false)
	text, _ := play(s)
	if c := counts(s, "text"); c != (Counts{Name: "text", Intact: 159, Doubtful: 21, Damaged: 20}) {
		t.Errorf("%+v", c)
	}
	if n := len(regexp.MustCompile(`^[0-9]+$`).FindString(longestRun(text["sim:text"]))); n != 20*endlessBytes {
		t.Errorf("the longest run without terminator has %d bytes, want %d", n, 20*endlessBytes)
	}
	if f := s.Faults(); f[0].Frames != 20 || f[1].Frames != 20 {
		t.Errorf("noise %d, endless %d", f[0].Frames, f[1].Frames)
	}
}

// longestRun is the longest stretch of digits.
func longestRun(text string) (longest string) {
	for _, run := range regexp.MustCompile(`[0-9]+`).FindAllString(text, -1) {
		// The next frame's own digits follow its sign, so they are no part.
		if len(run) > len(longest) {
			longest = run
		}
	}
	return longest
}

// TestLostEnd: a frame whose end is damaged takes the next one with it; on a
// line that is asked it does not.
func TestLostEnd(t *testing.T) {
	s := kinds(t, "{kind: drop-bytes, gauge: text, at: 20 s, for: 170 s, share: 0.2}", false)
	_, frames := play(s)
	doubtful, last := 0, Frame{}
	for _, f := range frames {
		if f.Name != "text" {
			continue
		}
		if f.Doubtful {
			doubtful++
			if !last.Damaged {
				t.Errorf("a frame behind a whole one is doubtful: %+v", f)
			}
		}
		last = f
	}
	if c := counts(s, "text"); doubtful == 0 || c.Doubtful > c.Damaged || c.Due() != 200 {
		t.Errorf("%+v", c)
	}
	s = kinds(t, "{kind: garble, gauge: one, at: 20 s, for: 170 s, share: 0.2}", false)
	play(s)
	if c := counts(s, "one"); c.Doubtful != 0 || c.Damaged == 0 {
		t.Errorf("asked: %+v", c)
	}
}

// TestLateAndLost: an answer after its time-out is doubtful; unplugged frames
// are lost and not sent.
func TestLateAndLost(t *testing.T) {
	s := kinds(t, `{kind: late-reply, gauge: one, at: 50 s, for: 20 s, delay: 300 ms}, {kind: late-reply, gauge: two, at: 50 s, for: 20 s, delay: 100 ms},
  {kind: unplug, port: "sim:bus", at: 120 s, for: 10 s, name: "sim:other"}, {kind: stall, gauge: query, at: 10 s, for: 5 s}`, false)
	play(s)
	for _, want := range []Counts{{Name: "one", Intact: 170, Doubtful: 20, Lost: 10}, {Name: "two", Intact: 190, Lost: 10}, {Name: "query", Intact: 195, Silent: 5}} {
		if got := counts(s, want.Name); got != want {
			t.Errorf("%+v, want %+v", got, want)
		}
	}
}

// TestAskEveryKind asks a bus and a query line, in pieces and with echo; the
// same questions at the same instants give the same answers.
func TestAskEveryKind(t *testing.T) {
	answers := func() (out []string) {
		s := kinds(t, `{kind: echo, port: "sim:bus", at: 50 s, for: 50 s}`, true)
		say := func(port int, request string, at float64) {
			b := s.Ask(port, []byte(request), int64(at*1e9))
			out = append(out, hex.EncodeToString(b.Bytes))
		}
		call := "\x02\x03\x00\x04\x00\x02\x85\xf9" // CRC by hand: see the frame read back below
		say(0, call[:3], 1)
		say(0, call[3:], 1.1)
		say(0, "\xff\xff"+call, 60)
		say(3-0, "rea", 61)
		say(3, "d?\n*IDN?\n", 62)
		return out
	}
	got := answers()
	call := []byte{2, 3, 0, 4, 0, 2}
	sum := remainder(call)
	if sum != 0xF985 {
		t.Fatalf("the call's CRC is %04x", sum)
	}
	reply := []byte{2, 3, 4, 0x17, 0x70, 0, 0}
	sum = remainder(reply)
	reply = append(reply, byte(sum), byte(sum>>8))
	want := []string{"", hex.EncodeToString(reply), "020300040002" + "85f9" + hex.EncodeToString(reply), "",
		hex.EncodeToString([]byte("+6.0000000E+00\nSIMULATED,INDICATOR,0,1.0\n"))}
	again := answers()
	for i := range want {
		if got[i] != want[i] || got[i] != again[i] {
			t.Errorf("%d: answered %s, then %s; want %s", i, got[i], again[i], want[i])
		}
	}
}

// TestKindsRefused: faults that could not happen are refused.
func TestKindsRefused(t *testing.T) {
	for fault, want := range map[string]string{
		"{kind: unit-key, gauge: query, at: 5 s}":                   "does not say its unit",
		"{kind: press, gauge: text, at: 5 s}":                       "no button",
		"{kind: press, gauge: nobody, at: 5 s}":                     `no gauge "nobody"`,
		"{kind: noise, gauge: nobody, at: 5 s, for: 1 s}":           `gauge "nobody"`,
		"{kind: status, gauge: text, at: 5 s, for: 1 s}":            "needs status",
		"{kind: press, gauge: button, at: 5 s, every: 1 s}":         "needs for",
		"{kind: status, gauge: text, status: x, at: 5 s, for: 1 s}": "needs status",
	} {
		rig, err := config.Parse("rig.yaml", []byte(kindsRig))
		if err != nil {
			t.Fatal(err)
		}
		truth, err := ParseTruth("truth.yaml", []byte("specimen: {modulus: 10000 MPa}"))
		if err != nil {
			t.Fatal(err)
		}
		faults, err := ParseFaults("faults.yaml", []byte("faults: ["+fault+"]"))
		if err == nil {
			_, err = New(Options{Rig: rig, Truth: truth, Faults: faults})
		}
		if err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%s: %v, want %q", fault, err, want)
		}
	}
}

// TestJoinRefused: rigs that one computer cannot record together.
func TestJoinRefused(t *testing.T) {
	if _, err := Join(); err == nil {
		t.Error("joined nothing")
	}
	if _, err := Join(kinds(t, "", false), kinds(t, "", false)); err == nil || !strings.Contains(err.Error(), "two rigs have a gauge") {
		t.Errorf("the same gauges twice: %v", err)
	}
	if _, err := Join(kinds(t, "", false), kinds(t, "{kind: power-cut, at: 5 s, for: 5 s}", false)); err == nil || !strings.Contains(err.Error(), "power") {
		t.Errorf("power cuts of one rig only: %v", err)
	}
}

// TestFrameLogFails: an error in writing the log of frames is told.
func TestFrameLogFails(t *testing.T) {
	d := BenchRig(2)
	s, err := New(Options{Rig: d.Rig, Truth: d.Truth, Frames: failing{}})
	if err != nil {
		t.Fatal(err)
	}
	play(s)
	if err := s.WriteTruth(&bytes.Buffer{}, nil); err == nil || !strings.Contains(err.Error(), "frames log") {
		t.Errorf("%v", err)
	}
}

type failing struct{}

func (failing) Write([]byte) (int, error) { return 0, errFull }

var errFull = &fullError{}

type fullError struct{}

func (*fullError) Error() string { return "full" }
