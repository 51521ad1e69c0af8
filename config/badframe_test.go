package config

import (
	"os"
	"strings"
	"testing"
)

// What no instrument can have is refused with its line and the mend: the rest
// of the wrong frames stands in TestCheckPortsFindsWrongFrames.
func TestImpossibleLinesBusesAndSums(t *testing.T) {
	text, err := os.ReadFile("testdata/slat.yaml")
	if err != nil {
		t.Fatal(err)
	}
	const asked = `{name: asked, kind: modbus, unit: mm, modbus: {function: holding, address: 7, register: 0, type: int32}}`
	const second = "gauges:\n  - {name: other, at: 200 mm, port: \"usb:0403:6001:A10K3\", frame: asked, channel: \"2\", sense: down, resolution: 0.001 mm}\n"
	for name, tt := range map[string]struct {
		frame, old, new, want string
	}{
		"a bus address used twice":    {asked, "gauges:\n", second, "are both at bus address 7, register 0"},
		"an impossible baud rate":     {`{name: asked, kind: text, end: "\r", pattern: '(?P<value>[+-]\d+)', unit: mm, line: {baud: 7}}`, "", "", "no serial line runs at 7 baud"},
		"an impossible word":          {`{name: asked, kind: text, end: "\r", pattern: '(?P<value>[+-]\d+)', unit: mm, line: {data_bits: 9}}`, "", "", "9 data bits do not exist"},
		"a sum behind the nibbles":    {`{name: asked, kind: nibbles, unit: mm, checksum: {kind: xor8, at: 6}, nibbles: {count: 12, coding: packed, sign: {at: 0, codes: {"0": "+", "8": "-"}}, digits: {at: 2, count: 6, decimals: 3}}}`, "", "", "the checksum (1 bytes from byte 6) does not lie in a frame of 6 bytes"},
		"a sum before the nibbles":    {`{name: asked, kind: nibbles, unit: mm, checksum: {kind: crc16, at: -7}, nibbles: {count: 12, coding: packed, sign: {at: 0, codes: {"0": "+", "8": "-"}}, digits: {at: 2, count: 6, decimals: 3}}}`, "", "", "the checksum (2 bytes from byte -1) does not lie in a frame of 6 bytes"},
		"a hex sum half outside":      {`{name: asked, kind: nibbles, unit: mm, checksum: {kind: sum8, at: -1, form: hex}, nibbles: {count: 12, coding: packed, sign: {at: 0, codes: {"0": "+", "8": "-"}}, digits: {at: 2, count: 6, decimals: 3}}}`, "", "", "the checksum (2 bytes from byte 5) does not lie in a frame of 6 bytes"},
		"a nibble outside":            {`{name: asked, kind: nibbles, unit: mm, nibbles: {count: 12, coding: packed, sign: {at: 12, codes: {"0": "+"}}, digits: {at: 2, count: 6, decimals: 3}}}`, "", "", "nibble 12 (sign) does not exist in a frame of 12 nibbles"},
		"a sum that covers itself":    {`{name: asked, kind: binary, unit: mm, checksum: {kind: sum8, at: 4, to: 6}, binary: {length: 6, sync: "AA", width: 2, offset: 2, type: signed, order: big}}`, "", "", "the checksum covers itself"},
		"a sum beyond the frame":      {`{name: asked, kind: binary, unit: mm, checksum: {kind: crc16, at: -1}, binary: {length: 6, sync: "AA", width: 2, offset: 2, type: signed, order: big}}`, "", "", "does not lie in a frame of 6 bytes"},
		"a stretch that ends early":   {`{name: asked, kind: text, end: "\r", pattern: '(?P<value>[+-]\d+)(?P<sum>..)', unit: mm, checksum: {kind: sum8, from: -2, to: -4}}`, "", "", "covers nothing"},
		"a pattern without value":     {`{name: asked, kind: text, end: "\r", pattern: '[+-]\d+', unit: mm}`, "", "", "no group value"},
		"a frame of nothing":          {`{name: asked, kind: text, end: "\r", pattern: '(?P<value>[+-]?\d*)', unit: mm}`, "", "", "can match nothing at all"},
		"a sign outside the value":    {`{name: asked, kind: text, end: "\r", pattern: '[+-](?P<value>\d+)', unit: mm}`, "", "", "the sign stands outside the group value"},
		"text with a place of a sum":  {`{name: asked, kind: text, end: "\r", pattern: '(?P<value>[+-]\d+)(?P<sum>..)', unit: mm, checksum: {kind: sum8, at: 3}}`, "", "", "a text frame has no at"},
		"a binary sum without a seat": {`{name: asked, kind: binary, unit: mm, checksum: {kind: sum8}, binary: {length: 6, sync: "AA", width: 2, offset: 2, type: signed, order: big}}`, "", "", "has no place"},
	} {
		t.Run(name, func(t *testing.T) {
			rigText := strings.Replace(string(text), tt.old, tt.new, 1)
			var out []string
			for line := range strings.Lines(rigText) {
				if strings.HasPrefix(line, "  - {name: asked,") {
					line = "  - " + tt.frame + "\n"
				}
				out = append(out, line)
			}
			rigText = strings.Join(out, "")
			if tt.old != "" {
				rigText = strings.Replace(rigText, "    frame: asked", "    frame: asked\n    channel: \"7\"", 1)
				rigText = strings.Replace(rigText, "    channel: \"\"", "    #", 1)
			}
			r, err := Parse("rig.yaml", []byte(rigText))
			if err != nil {
				t.Fatal(err)
			}
			found := false
			for _, p := range r.CheckPorts() {
				if p.Severity == Error && strings.Contains(p.What, tt.want) {
					found = true
					if p.Line == 0 || p.Mend() == "" {
						t.Errorf("no line or mend: %+v", p)
					}
				}
			}
			if !found {
				t.Errorf("%v, want %q", r.CheckPorts(), tt.want)
			}
		})
	}
}
