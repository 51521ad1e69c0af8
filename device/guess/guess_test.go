package guess_test

import (
	"encoding/hex"
	"fmt"
	"math"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/device/frame"
	"gaugelog/device/guess"
)

// capture puts each burst 100 ms behind the last, at 9600 8N1.
func capture(request string, bursts ...string) guess.Capture {
	c := guess.Capture{Line: config.Line{Baud: 9600, DataBits: 8, Parity: "none", StopBits: "1"}, Request: []byte(request)}
	for i, b := range bursts {
		c.Chunks = append(c.Chunks, guess.Chunk{At: time.Duration(i) * 100 * time.Millisecond, Bytes: []byte(b)})
	}
	return c
}

// loaded pastes a proposal into a rig file, loads and checks it, and returns
// the frame as the program would use it.
func loaded(t testing.TB, p guess.Proposal) config.Frame {
	t.Helper()
	text := "specimen: {name: a, section: {shape: rectangle, width: 100 mm, depth: 40 mm}, length: 800 mm}\n" +
		"supports: [{name: l, at: 0 mm}, {name: r, at: 700 mm}]\nloads: [{name: pan, at: 350 mm}]\n" +
		"gauges: [{name: mid, at: 350 mm, sense: down, resolution: 0.001 mm, port: p, frame: proposed, channel: \"2\"}]\nframes:\n" + p.YAML()
	rig, err := config.Parse("rig.yaml", []byte(text))
	if err != nil {
		t.Fatalf("the proposal does not load: %v\n%s", err, text)
	}
	for _, problem := range append(rig.Check(), rig.CheckPorts()...) {
		if problem.Severity == config.Error && !strings.Contains(problem.What, "channel") {
			t.Fatalf("check refuses the proposal: %v (%s)\n%s", problem, problem.Mend(), text)
		}
	}
	f, ok := rig.FrameOf("proposed")
	if !ok {
		t.Fatal("the frame is not in the rig")
	}
	return f
}

// decode reads bytes by the proposal, as the program would.
func decode(t testing.TB, p guess.Proposal, b []byte) []string {
	t.Helper()
	o, err := device.FrameOptions(loaded(t, p), "")
	if err != nil {
		t.Fatal(err)
	}
	d, err := frame.New(o)
	if err != nil {
		t.Fatalf("%v\n%s", err, p.YAML())
	}
	var out []string
	take := func(f *frame.Frame) {
		switch {
		case f.Rejected != frame.None:
			out = append(out, "rejected")
		case f.HasValue:
			out = append(out, strings.TrimSpace(string(f.Channel)+" "+f.Value.String()+" "+f.Unit.String()))
		}
	}
	d.Feed(b, take)
	d.Quiet(take)
	return out
}

// Instruments as their manuals might describe them in a sentence; the bytes
// were made by hand from that sentence.
func TestTextInstruments(t *testing.T) {
	sum := func(s string) string { return fmt.Sprintf("%s%02X\r", s, xor(s)) }
	for name, c := range map[string]struct {
		capture guess.Capture
		values  string // as decoded, joined by commas
		pattern string
		other   func(guess.Proposal) bool
	}{
		"sign, three digits, point, three digits, CR LF": {
			capture: capture("", "+000.123\r\n", "+001.250\r\n", "-000.004\r\n", "+012.345\r\n", "-010.000\r\n"),
			values:  "0.123 mm,1.250 mm,-0.004 mm,12.345 mm,-10.000 mm", pattern: `(?P<value>[+-]\d{3}\.\d{3})`,
		},
		"number, blank, unit, CR; split anywhere": {
			capture: capture("", "1.2", "34 mm\r-0.", "5 mm\r0.0480 in\r", "10.02 mm\r", "7.1 mm\r"),
			values:  "1.234 mm,-0.5 mm,0.0480 in,10.02 mm,7.1 mm",
		},
		"channel of two digits, blank, number": {
			capture: capture("", "01 1.234\r\n", "02 -5.010\r\n", "01 1.235\r\n", "02 -5.012\r\n", "01 1.236\r\n", "02 -5.013\r\n"),
			values:  "01 1.234 mm,02 -5.010 mm,01 1.235 mm,02 -5.012 mm,01 1.236 mm,02 -5.013 mm",
			other:   func(p guess.Proposal) bool { return strings.Contains(p.Frame.Pattern, `(?P<channel>\d{2})`) },
		},
		"exclusive or of all before it as two hex digits": {
			capture: capture("", sum("A+01.234*"), sum("A+01.236*"), sum("A-00.500*"), sum("A+11.000*"), sum("A+07.777*")),
			values:  "1.234 mm,1.236 mm,-0.500 mm,11.000 mm,7.777 mm",
			other: func(p guess.Proposal) bool {
				return p.Frame.Checksum != nil && p.Frame.Checksum.Kind == "xor8"
			},
		},
		"STX, blanks in front, ETX": {
			capture: capture("", "\x02    1.23 mm\x03", "\x02   -1.23 mm\x03", "\x02  101.50 mm\x03", "\x02 -101.50 mm\x03"),
			values:  "1.23 mm,-1.23 mm,101.50 mm,-101.50 mm",
			other:   func(p guess.Proposal) bool { return p.Frame.Start == "\x02" && p.Frame.End == "\x03" },
		},
		"asked by a question mark": {
			capture: capture("?\r", "12.7000\r", "12.7001\r", "12.7002\r"),
			values:  "12.7000 mm,12.7001 mm,12.7002 mm",
			other:   func(p guess.Proposal) bool { return p.Frame.Request == "?\r" && !p.Frame.Button },
		},
		"torn at both ends": {
			capture: capture("", ".500\r\n+01.501\r\n+01.502\r\n-01.503\r\n+01.5"),
			values:  "1.501 mm,1.502 mm,-1.503 mm",
		},
	} {
		all := guess.Propose(c.capture)
		if len(all) == 0 {
			t.Errorf("%s: nothing is proposed", name)
			continue
		}
		p := all[0]
		got := decode(t, p, c.capture.Bytes())
		if name == "torn at both ends" && len(got) > 0 && got[0] == "rejected" {
			got = got[1:]
		}
		if strings.Join(got, ",") != c.values {
			t.Errorf("%s: %q, want %q\n%s", name, strings.Join(got, ","), c.values, p.YAML())
		}
		if c.pattern != "" && p.Frame.Pattern != c.pattern {
			t.Errorf("%s: pattern %s, want %s", name, p.Frame.Pattern, c.pattern)
		}
		if c.other != nil && !c.other(p) {
			t.Errorf("%s: not as it should be:\n%s", name, p.YAML())
		}
	}
}

func xor(s string) (x byte) {
	for _, b := range []byte(s) {
		x ^= b
	}
	return x
}

// What was not seen is said to be unsure.
func TestUnsure(t *testing.T) {
	p := guess.Propose(capture("", "1.234\r\n", "1.235\r\n", "Err\r\n", "1.236\r\n", "1.237\r\n"))[0]
	words := strings.Join(p.Unsure, "\n")
	for _, want := range []string{"no value below zero", "no unit: mm is assumed", `"Err" came too`} {
		if !strings.Contains(words, want) {
			t.Errorf("nothing is said of %q:\n%s", want, words)
		}
	}
}

// Seven data bits with even parity, read as eight bits without.
func TestSevenDataBits(t *testing.T) {
	c := capture("", "+01.234\r\n", "-01.235\r\n", "+11.236\r\n")
	for _, k := range c.Chunks {
		for i, b := range k.Bytes {
			ones := 0
			for v := b; v != 0; v &= v - 1 {
				ones++
			}
			k.Bytes[i] = b | byte(ones%2)<<7
		}
	}
	p := guess.Propose(c)
	if len(p) == 0 || p[0].Frame.Line.DataBits != 7 || p[0].Frame.Line.Parity != "even" || p[0].Frame.Kind != "text" {
		t.Fatalf("not seen: %+v", p)
	}
	if f := loaded(t, p[0]); f.Line.DataBits != 7 || f.Line.Parity != "even" {
		t.Errorf("lost in the snippet: %+v", f.Line)
	}
}

// Rubbish read at a wrong speed makes no proposal above that of the right one.
func TestRightSpeedWins(t *testing.T) {
	right := capture("", "+01.234\r\n", "-01.235\r\n", "+11.236\r\n", "+11.236\r\n")
	right.Line.Baud = 4800
	wrong := capture("", "\xe6\x18\x9e\x00\x86", "\xf8\x18\x1e\xe0", "\x98\x18\x06\x78\x86\xfe", "\xe6\x1e")
	p := guess.Propose(wrong, right)
	if len(p) == 0 || p[0].Frame.Line.Baud != 4800 || p[0].Frame.Kind != "text" {
		t.Fatalf("%+v", p)
	}
}

// A caliper's cable: 13 hex characters, F F F F, sign, six digits, place of
// the point, unit.
func TestHexNibbles(t *testing.T) {
	c := capture("", "FFFF001234520\r\n", "FFFF801234620\r\n", "FFFF000045620\r\n", "FFFF001000020\r\n")
	p := guess.Propose(c)
	if len(p) == 0 || p[0].Frame.Kind != "nibbles" {
		t.Fatalf("%+v", p)
	}
	f := loaded(t, p[0])
	n := f.Nibbles
	if n.Count != 13 || n.Header != "FFFF" || n.Sign == nil || n.Sign.At != 4 || n.Digits.At != 5 || n.Digits.Count != 6 || n.Point == nil || n.Point.At != 11 || n.Unit == nil || n.Unit.At != 12 {
		t.Errorf("layout %+v %+v", n, n.Digits)
	}
	if got := strings.Join(decode(t, p[0], c.Bytes()), ","); got != "123.45 mm,-123.46 mm,4.56 mm,100.00 mm" {
		t.Errorf("decoded %q", got)
	}
}

// Eight bytes: AA 55, a counter-free 32-bit number low byte first, a spare
// zero, the sum of all before.
func TestBinary(t *testing.T) {
	var bursts []string
	for _, v := range []int32{1234, 1230, 980, 700, 3, -12, -700, -66000} {
		b := []byte{0xaa, 0x55, byte(v), byte(v >> 8), byte(v >> 16), byte(v >> 24), 0}
		var sum byte
		for _, x := range b {
			sum += x
		}
		bursts = append(bursts, string(append(b, sum)))
	}
	for name, c := range map[string]guess.Capture{"with pauses": capture("", bursts...), "without": capture("", strings.Join(bursts, ""))} {
		p := guess.Propose(c)
		if len(p) == 0 || p[0].Frame.Kind != "binary" {
			t.Fatalf("%s: %+v", name, p)
		}
		f := loaded(t, p[0])
		if f.Binary.Length != 8 || f.Binary.Sync != "AA55" || f.Checksum == nil || f.Checksum.Kind != "sum8" || f.Binary.Offset != 2 || f.Binary.Width != 4 || f.Binary.Order != "little" {
			t.Errorf("%s: %+v %+v", name, f.Binary, f.Checksum)
		}
		got := strings.Join(decode(t, p[0], c.Bytes()), ",")
		if !strings.HasPrefix(got, "1.234 mm,1.230 mm,0.980 mm,0.700 mm,0.003 mm,-0.012 mm,-0.700 mm") {
			t.Errorf("%s: decoded %q", name, got)
		}
	}
}

// The read of registers 107 to 109 at address 17 and its answer's form are
// those of the MODBUS Application Protocol V1.1b3; the float is 12.345.
func TestModbus(t *testing.T) {
	q := guess.ModbusRead(17, 3, 107, 2)
	answer := []byte{17, 3, 4}
	bits := math.Float32bits(12.345)
	answer = append(answer, byte(bits>>24), byte(bits>>16), byte(bits>>8), byte(bits))
	crc := frame.CRC16(answer)
	answer = append(answer, byte(crc), byte(crc>>8))
	p := guess.Propose(capture(string(q), string(answer)))
	if len(p) != 1 || p[0].Frame.Kind != "modbus" {
		t.Fatalf("%+v", p)
	}
	m := loaded(t, p[0]).Modbus
	if *m.Address != 17 || m.Function != "holding" || m.Register != 107 || m.Type != "float32" || m.WordOrder != "high-first" {
		t.Errorf("%+v", m)
	}
	answer[4] ^= 1
	if p := guess.Propose(capture(string(q), string(answer))); len(p) > 0 && p[0].Frame.Kind == "modbus" {
		t.Errorf("a damaged answer was believed: %+v", p)
	}
}

func TestModbusRequest(t *testing.T) {
	// MODBUS over Serial Line: read of register 0, 1 register, address 1: 84 0A.
	if got := hex.EncodeToString(guess.ModbusRead(1, 3, 0, 1)); got != "010300000001840a" {
		t.Errorf("%s", got)
	}
}

func TestSCPI(t *testing.T) {
	p := guess.Propose(capture("READ?\n", "+1.234500E+00\n", "+1.234600E+00\n"))
	if len(p) == 0 || p[0].Frame.Kind != "scpi" || loaded(t, p[0]).SCPI.Query != "READ?" {
		t.Fatalf("%+v", p)
	}
}

// A button: frames seconds apart, at no regular time.
func TestButton(t *testing.T) {
	c := capture("", "140.01\r\n", "139.98\r\n", "140.02\r\n", "139.97\r\n", "140.00\r\n")
	for i, s := range []int{0, 3, 4, 11, 19} {
		c.Chunks[i].At = time.Duration(s) * time.Second
	}
	if p := guess.Propose(c); len(p) == 0 || !loaded(t, p[0]).Button {
		t.Errorf("%+v", p)
	}
}

// Whatever bytes come, what is proposed loads; text proposals decode at least
// one frame of them.
func TestAnyBytes(t *testing.T) {
	rapid.Check(t, func(r *rapid.T) {
		alphabet := rapid.SampledFrom([]byte("0123456789+-. mniF\r\n\x02\x03*A\"'\\\x80\xff{}:#"))
		if rapid.Bool().Draw(r, "any") {
			alphabet = rapid.Byte()
		}
		c := guess.Capture{Line: config.Line{Baud: 9600}}
		for i := range rapid.IntRange(1, 8).Draw(r, "chunks") {
			c.Chunks = append(c.Chunks, guess.Chunk{At: time.Duration(i) * 50 * time.Millisecond, Bytes: rapid.SliceOfN(alphabet, 1, 24).Draw(r, "bytes")})
		}
		for _, p := range guess.Propose(c) {
			loaded(t, p)
			if p.Share < guess.LeastShare || p.Share > 1 || p.Frames < 1 {
				r.Fatalf("%+v", p)
			}
		}
	})
}
