package config

import (
	"os"
	"strings"
	"testing"
)

// withFrame puts a frame in the place of frame asked of the sample rig.
func withFrame(t *testing.T, frame string) (*Rig, error) {
	t.Helper()
	text, err := os.ReadFile("testdata/slat.yaml")
	if err != nil {
		t.Fatal(err)
	}
	var out []string
	for line := range strings.Lines(string(text)) {
		if strings.HasPrefix(line, "  - {name: asked,") {
			line = "  - " + frame + "\n"
		}
		out = append(out, line)
	}
	return Parse("rig.yaml", []byte(strings.Join(out, "")))
}

func TestCheckPortsOfSample(t *testing.T) {
	r, err := LoadRig("testdata/slat.yaml")
	if err != nil {
		t.Fatal(err)
	}
	if p := r.CheckPorts(); len(p) != 0 {
		t.Errorf("the sample's ports: %v", p)
	}
}

func TestCheckPortsFindsWrongFrames(t *testing.T) {
	for _, tc := range []struct{ frame, want string }{
		{`{name: asked, kind: text, end: "\r\n", pattern: '[+-](?P<value>\d{3}\.\d{3})', unit: mm}`, "the sign stands outside the group value"},
		{`{name: asked, kind: text, end: "\r\n", pattern: '[+-] ?(?P<value>\d{3}\.\d{3})', unit: mm}`, "the sign stands outside the group value"},
		{`{name: asked, kind: text, end: "\r\n", pattern: '(?P<value>\d{3}\.\d{3})(-| )', unit: mm}`, "the sign stands behind the group value"},
		{`{name: asked, kind: text, end: "\r\n", pattern: '(?P<valeu>[+-]\d{3}\.\d{3})', unit: mm}`, "no group value"},
		{`{name: asked, kind: text, end: "\r\n", pattern: '(?P<value>[+-]?\d*)', unit: mm}`, "can match nothing at all"},
		{`{name: asked, kind: text, end: "\r\n", pattern: '(?P<value>[+-]\d', unit: mm}`, "cannot be read"},
		{`{name: asked, kind: text, end: "\r\n", pattern: '(?P<value>[+-]\d+)'}`, "does not say the unit"},
		{`{name: asked, kind: text, pattern: '(?P<value>[+-]\d+)', unit: mm}`, "has no end"},
		{`{name: asked, kind: text, end: "\r", pattern: '(?P<value>[+-]\d+)', unit: mm, checksum: {kind: sum8}}`, "no group sum"},
		{`{name: asked, kind: text, end: "\r", pattern: '(?P<value>[+-]\d+)(?P<sum>..)', unit: mm}`, "a group sum in its pattern and no checksum"},
		{`{name: asked, kind: text, end: "\r", pattern: '(?P<value>[+-]\d+)(?P<sum>..)', unit: mm, checksum: {kind: sum8, from: 3, to: 3}}`, "covers nothing"},
		{`{name: asked, kind: text, end: "\r", pattern: '(?P<value>[+-]\d+)', unit: mm, line: {baud: 0}}`, "0 baud"},
		{`{name: asked, kind: text, end: "\r", pattern: '(?P<value>[+-]\d+)', unit: mm, line: {parity: evne}}`, `parity is "evne"`},
		{`{name: asked, kind: text, end: "\r", pattern: '(?P<value>[+-]\d+)', unit: mm, every: 1 s}`, "nothing is asked"},
		{`{name: asked, kind: text, end: "\r", pattern: '(?P<value>[+-]\d+)', unit: mm, scpi: {query: "READ?"}}`, "a text frame has no scpi"},
		{`{name: askd, kind: text, end: "\r", pattern: '(?P<value>[+-]\d+)', unit: mm}`, `there is no frame "asked"`},
		{`{name: asked, kind: modbus, unit: mm, modbus: {function: holding, type: int32, register: 0}}`, "is no bus address"},
		{`{name: asked, kind: binary, unit: mm, binary: {length: 4, width: 4, offset: 2, type: signed, order: big}}`, "does not lie in a frame of 4 bytes"},
		{`{name: asked, kind: nibbles, unit: mm, nibbles: {count: 8, coding: hex, digits: {at: 2, count: 6}, sign: {at: 3, codes: {"0": "+"}}}}`, "nibble 3 is both digits and sign"},
	} {
		r, err := withFrame(t, tc.frame)
		if err != nil {
			t.Errorf("%s: %v", tc.frame, err)
			continue
		}
		found := ""
		for _, p := range r.CheckPorts() {
			if p.Severity == Error {
				found += p.Error() + "\n"
			}
			if p.Line == 0 || p.Fix == "" {
				t.Errorf("%s: no line or mend: %+v", tc.frame, p)
			}
		}
		if !strings.Contains(found, tc.want) {
			t.Errorf("%s\n got %s\nwant %s", tc.frame, found, tc.want)
		}
	}
}

func TestRightFramesPass(t *testing.T) {
	for _, frame := range []string{
		`{name: asked, kind: text, end: "\r", pattern: 'A-(?P<value>[+-]\d+)', unit: mm}`,
		`{name: asked, kind: scpi, unit: mm, scpi: {query: "READ?"}}`,
		`{name: asked, kind: modbus, unit: mm, modbus: {function: input, type: float32, register: 2, address: 5}}`,
		`{name: asked, kind: binary, unit: mm, binary: {length: 8, sync: "AA55", width: 4, offset: 2, type: signed, order: big, scale: 0.001}, checksum: {kind: crc16, at: -2}}`,
		`{name: asked, kind: nibbles, unit: mm, nibbles: {count: 8, coding: packed, header: "F", digits: {at: 2, count: 6, decimals: 3}, sign: {at: 1, codes: {"0": "+", "8": "-"}}}}`,
	} {
		r, err := withFrame(t, frame)
		if err != nil {
			t.Errorf("%s: %v", frame, err)
		} else if p := r.CheckPorts(); len(p) != 0 {
			t.Errorf("%s: %v", frame, p)
		}
	}
}

func TestBuiltinFrames(t *testing.T) {
	for _, f := range BuiltinFrames() {
		r := &Rig{Frames: []Frame{f}}
		if p := r.CheckPorts(); len(p) != 0 {
			t.Errorf("%s: %v", f.Name, p)
		}
	}
	text, err := os.ReadFile("testdata/slat.yaml")
	if err != nil {
		t.Fatal(err)
	}
	r, err := Parse("rig.yaml", []byte(strings.Replace(string(text), "frame: asked", "frame: signed-decimal", 1)))
	if err != nil || len(r.CheckPorts()) != 0 {
		t.Fatal(err, r.CheckPorts())
	}
	f := r.Frames[len(r.Frames)-1]
	if f.Name != "signed-decimal" || f.Line.Baud != 9600 || f.Unit != "mm" {
		t.Errorf("the built-in frame was not added to the rig's: %+v", f)
	}
}
