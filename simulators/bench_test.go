package simulators

import (
	"bytes"
	"encoding/binary"
	"encoding/json"
	"io"
	"math"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"testing"
)

func bench(t *testing.T, seed uint64, asked bool, frames io.Writer) *Joint {
	t.Helper()
	j, err := Bench(seed, asked, frames)
	if err != nil {
		t.Fatal(err)
	}
	return j
}

// TestBenchRigs: the rig files pass the checks a recorder makes.
func TestBenchRigs(t *testing.T) {
	kinds := map[string]int{}
	for n := 1; n <= BenchRigs; n++ {
		d := BenchRig(n)
		for _, p := range d.Rig.CheckPorts() {
			t.Errorf("rig %d: %v", n, p)
		}
		for _, g := range d.Rig.Gauges {
			f, _ := d.Rig.FrameOf(g.Frame)
			kinds[f.Kind]++
		}
	}
	if kinds["text"] != 2 || kinds["modbus"] != 2 || kinds["nibbles"] != 1 || kinds["binary"] != 1 || kinds["scpi"] != 1 {
		t.Errorf("kinds %v", kinds)
	}
	j := bench(t, 1, false, nil)
	if j.End() != 3600e9 || len(j.Ports()) != 6 {
		t.Errorf("%d ports, %d ns", len(j.Ports()), j.End())
	}
	for _, p := range j.Ports() {
		if p.Name == "sim:multiplexer" && !slices.Equal(p.Gauges, []string{"one-channel", "two-channel"}) || p.Name == "sim:air" && len(p.Gauges) != 1 {
			t.Errorf("%+v", p)
		}
	}
}

var (
	channelText = regexp.MustCompile(`^C(\d)([+-](?:\d{3}\.\d{3}|\d{2}\.\d{5}))(mm|in)([NHBUDO])([0-9A-F]{4})\r\n$`)
	digitsText  = regexp.MustCompile(`^\x02F([08])(\d{6})([234])([01])([0-3])\r$`)
	queryText   = regexp.MustCompile(`^[+-]\d\.\d{7}E[+-]\d\d\n$`)
	airText     = regexp.MustCompile(`^T (-?\d{1,2}\.\d{2}) H (\d{1,3}\.\d)\r\n$`)
)

// CRC-16/MODBUS by its definition, bit by bit over the whole message as one
// number: the remainder is that of the bytes fed lowest bit first.
func remainder(b []byte) uint16 {
	crc := 0xFFFF
	for _, c := range b {
		for bit := range 8 {
			low := (crc ^ int(c)>>bit) & 1
			crc >>= 1
			if low == 1 {
				crc ^= 0xA001
			}
		}
	}
	return uint16(crc)
}

// read reads one frame of the bench as a person with the manual would; ok is
// false where it is damaged or says that there is no number.
func readBench(gauge string, b []byte) (mm float64, ok bool) {
	inch := func(x float64, in bool) float64 {
		if in {
			return x * 25.4
		}
		return x
	}
	switch gauge {
	case "one-channel", "two-channel":
		m := channelText.FindSubmatch(b)
		if m == nil {
			return 0, false
		}
		sum, _ := strconv.ParseUint(string(m[5]), 16, 16)
		crc := remainder(b[:len(b)-6])
		x, _ := strconv.ParseFloat(string(m[2]), 64)
		right := uint16(sum) == crc<<8|crc>>8 && (m[1][0] == '1') == (gauge == "one-channel")
		return inch(x, m[3][0] == 'i'), right && m[4][0] != 'O'
	case "one-bus", "two-bus":
		if len(b) != 11 || remainder(b) != 0 || b[1] != 3 || b[2] != 6 || (b[0] == 1) != (gauge == "one-bus") {
			return 0, false
		}
		return float64(int32(binary.BigEndian.Uint32(b[3:]))) / 1000, b[8]&16 == 0
	case "one-button":
		m := digitsText.FindSubmatch(b)
		if m == nil {
			return 0, false
		}
		x, _ := strconv.ParseFloat(string(m[2]), 64)
		x /= math.Pow10(int(m[3][0] - '0'))
		if m[1][0] == '8' {
			x = -x
		}
		return inch(x, m[4][0] == '1'), m[5][0] != '3'
	case "two-counts":
		if len(b) != 10 || b[0] != 0xAA || b[1] != 0x55 || remainder(b) != 0 {
			return 0, false
		}
		return inch(float64(int32(binary.LittleEndian.Uint32(b[2:])))/10000, b[6]&128 != 0), b[6]&16 == 0
	case "two-query":
		x, err := strconv.ParseFloat(strings.TrimSpace(string(b)), 64)
		return x * 1000, err == nil && queryText.Match(b)
	}
	m := airText.FindSubmatch(b)
	if m == nil {
		return 0, false
	}
	x, _ := strconv.ParseFloat(string(m[1]), 64)
	return x, true
}

// TestBench reads the whole hour: every frame said to be whole says its value,
// no damaged one says any, and the counts are those of the frames.
func TestBench(t *testing.T) {
	var logged bytes.Buffer
	j := bench(t, 5, false, &logged)
	counts, events := map[string]*Counts{}, map[string]int{}
	at := int64(0)
	for done := false; !done; {
		st := j.Next(at+20e9, 16000)
		at, done = st.Reached, st.Done
		for _, e := range st.Events {
			events[e.Kind.String()+strconv.Itoa(e.Rig)]++
		}
		for _, b := range st.Batches {
			if j.Ports()[b.Index].Name != b.Port {
				t.Fatalf("batch of %s with index %d", b.Port, b.Index)
			}
			for _, f := range b.Frames {
				c := counts[f.Name]
				if c == nil {
					c = &Counts{Name: f.Name}
					counts[f.Name] = c
				}
				c.add(&f)
				checkFrame(t, &f, b.Bytes[f.Offset-b.Start:][:f.Length])
			}
		}
	}
	if events["mark0"] != 3 || events["mark1"] != 2 || events["unplugged0"] != 3 || events["unplugged1"] != 2 || events["plugged0"] != 3 || events["plugged1"] != 2 {
		t.Errorf("events %v", events)
	}
	for _, c := range j.Counts() {
		got := *counts[c.Name]
		got.Silent, got.Lost = c.Silent, c.Lost
		if got != c {
			t.Errorf("counted %+v, told %+v", got, c)
		}
		want := 3600
		if c.Name == "one-button" {
			want = 179
		}
		if d := c.Due() - want; d < -1 || d > 1 {
			t.Errorf("%s: %d frames were due, want %d", c.Name, c.Due(), want)
		}
	}
	states := map[string]int{}
	for line := range strings.Lines(logged.String()) {
		var o struct{ Kind, Gauge, State string }
		if err := json.Unmarshal([]byte(line), &o); err != nil || o.Kind != "frame" {
			t.Fatalf("%q: %v", line, err)
		}
		states[o.Gauge+" "+o.State]++
	}
	for name, c := range counts {
		if states[name+" intact"] != c.Intact || states[name+" doubtful"] != c.Doubtful || states[name+" damaged"] != c.Damaged || states[name+" no-reading"] != c.NoReading {
			t.Errorf("%s: log %v, counts %+v", name, states, *c)
		}
	}
}

func checkFrame(t *testing.T, f *Frame, sent []byte) {
	t.Helper()
	got, ok := readBench(f.Name, sent)
	if f.Intact() && (!ok || math.Abs(got-f.MM) > 1e-6 && f.Name != "air" || f.Name == "air" && math.Abs(got-f.MM) > 0.00501) {
		t.Errorf("%s: %q says %g, %v; sent %+v", f.Name, sent, got, ok, f)
	}
	if f.Damaged && ok {
		t.Errorf("%s: %q, damaged or without a number, says %g", f.Name, sent, got)
	}
}

// TestBenchFaults: every fault touches as many frames as its length and the
// pace say, within the share.
func TestBenchFaults(t *testing.T) {
	j := bench(t, 5, false, nil)
	for !j.Next(j.End(), 0).Done {
	}
	for rig, s := range j.Sims() {
		for _, f := range s.Faults() {
			gauges := 1
			if f.Fault.Gauge == "" {
				gauges = 2 // the shared ports
			}
			n := float64(f.Fault.For) * float64(gauges)
			if f.Fault.Gauge == "one-button" {
				n /= 20
			}
			low, high := n-float64(gauges), n+float64(gauges)
			switch f.Fault.Kind {
			case Unplug:
				low, high = 0, 0
			case ZeroPressed:
				low, high = 1000, 1600
			case Garble, DropBytes:
				if low, high = 0.2*n, 0.8*n; f.Fault.Share == nil {
					low, high = n-1, n+1
				}
			case Press:
				low = 100
			case OverRange, Hold, ShowStatus, BatteryLow, Freeze, UnitKey:
			}
			if got := float64(f.Frames); got < low || got > high {
				t.Errorf("rig %d: %s %s%s touched %g frames, want %g to %g", rig+1, f.Fault.Kind, f.Fault.Gauge, f.Fault.Port, got, low, high)
			}
		}
	}
}

// TestBenchDeterminism: batches do not change what is sent, seeds do; a shared
// probe speaks once.
func TestBenchDeterminism(t *testing.T) {
	run := func(seed uint64, slice int64, most int) (out string) {
		j := bench(t, seed, false, nil)
		ports := map[string]*strings.Builder{}
		for at, done := int64(0), false; !done; {
			st := j.Next(at+slice, most)
			at, done = st.Reached, st.Done
			for _, b := range st.Batches {
				if ports[b.Port] == nil {
					ports[b.Port] = &strings.Builder{}
				}
				if b.Start != int64(ports[b.Port].Len()) {
					t.Fatalf("%s: batch from %d after %d bytes", b.Port, b.Start, ports[b.Port].Len())
				}
				ports[b.Port].Write(b.Bytes)
			}
		}
		for _, p := range j.Ports() {
			out += p.Name + "\n" + ports[p.Name].String()
		}
		return out
	}
	a := run(1, 1e9, 0)
	if b := run(1, 500e9, 2000); a != b {
		t.Error("batches change what is sent")
	}
	if c := run(2, 1e9, 0); a == c {
		t.Error("two seeds give the same")
	}
	if n := strings.Count(a, " H "); n < 3598 || n > 3601 {
		t.Errorf("the probe spoke %d times", n)
	}
}
