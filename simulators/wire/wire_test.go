package wire

import (
	"math"
	"regexp"
	"strconv"
	"strings"
	"testing"

	"gaugelog/config"

	"pgregory.net/rapid"
)

func offset(i int) *int { return &i }

var textFrames = map[string]config.Frame{
	"signed decimal":  {End: `\r\n`, Pattern: `(?P<value>[+-]\d{3}\.\d{3})`, Unit: "mm"},
	"asked with unit": {Request: `?\r`, End: "\r", Pattern: `(?P<value>[+-]\d+\.\d+) (?P<unit>mm|in)`},
	"padded":          {End: "\n", Pattern: `\s*D(?P<value> *-?\d{1,4}\.\d{3})(?P<unit>")?`, Units: map[string]string{`"`: "in", "": "mm"}},
	"channel and sum": {Start: `\x02`, End: `\x03`, Pattern: `(?P<channel>\d\d)(?P<value>[+-]\d{3}\.\d{3})(?P<sum>[0-9A-F]{2})`, Unit: "mm", Checksum: &config.Checksum{Kind: "sum8"}},
	"crc":             {End: "\r", Pattern: `(?P<value>[+-]\d{3}\.\d{3})\*(?P<sum>[0-9A-F]{4})`, Unit: "mm", Checksum: &config.Checksum{Kind: "crc16", To: offset(-5)}},
	"status":          {End: "\r", Pattern: `(?P<status>[ HB])(?P<value>[+ -]\d{2}\.\d{3})`, Unit: "mm", Statuses: map[string]string{"H": "hold", "B": "battery-low"}, NoReadings: map[string]string{"Err": "over-range"}},
	"words":           {End: "\r", Pattern: `(?:Length|Weg): (?P<value>-?\d+\.\d{3,6}) (?P<unit>MM|IN)[;,]?`, Units: map[string]string{"MM": "mm", "IN": "in"}},
	"inches only":     {End: "\r", Pattern: `(?P<value>[+-]\d\.\d{5})`, Unit: "in"},
}

// TestRoundTrip reads frames back with the frame's pattern as a plain regular
// expression: the value, unit, channel and checksum are those sent.
func TestRoundTrip(t *testing.T) {
	for name, f := range textFrames {
		f.Kind, f.Name = "text", name
		t.Run(name, func(t *testing.T) {
			e, err := New(&f, Instrument{Channel: "07", Resolution: 0.001, InchResolution: 0.00005})
			if err != nil {
				t.Fatal(err)
			}
			start, _ := strconv.Unquote(`"` + f.Start + `"`)
			whole := regexp.MustCompile("^(?:" + f.Pattern + ")$")
			rapid.Check(t, func(rt *rapid.T) {
				v := Value{Shown: float64(rapid.IntRange(-99999, 99999).Draw(rt, "counts")) / 1000, Unit: "mm"}
				if whole.SubexpIndex("unit") >= 0 && rapid.Bool().Draw(rt, "inches") {
					v.Shown, v.Unit = math.Round(v.Shown/10*20000)/20000, "in"
				}
				out, ok := e.Append([]byte("before"), &v)
				if !ok {
					if name == "status" || name == "inches only" {
						return // too few digits for it, and it says so
					}
					rt.Fatalf("refused %v", v)
				}
				frame := strings.TrimPrefix(string(out), "before")
				read(rt, &f, whole, frame, start, v)
			})
		})
	}
}

func read(t *rapid.T, f *config.Frame, whole *regexp.Regexp, frame, start string, v Value) {
	t.Helper()
	end, _ := strconv.Unquote(`"` + strings.NewReplacer("\r", `\r`, "\n", `\n`).Replace(f.End) + `"`)
	if !strings.HasPrefix(frame, start) || !strings.HasSuffix(frame, end) {
		t.Fatalf("%q: start or end missing", frame)
	}
	body := frame[len(start) : len(frame)-len(end)]
	m := whole.FindStringSubmatch(body)
	if m == nil {
		t.Fatalf("%q does not match", body)
	}
	group := func(name string) string {
		if i := whole.SubexpIndex(name); i >= 0 {
			return m[i]
		}
		return ""
	}
	shown, err := strconv.ParseFloat(strings.ReplaceAll(strings.TrimSpace(group("value")), " ", ""), 64)
	if err != nil {
		t.Fatal(err)
	}
	want, bound := v.Shown, 1e-9
	if f.Unit == "in" {
		want, bound = v.Shown/25.4, 0.5000001e-5
	} else if v.Unit == "in" && f.Name == "padded" {
		bound = 0.5000001e-3 // three digits behind the point is all it has
	}
	if math.Abs(shown-want) > bound {
		t.Fatalf("%q says %g, sent %g", body, shown, want)
	}
	if whole.SubexpIndex("unit") >= 0 {
		said := group("unit")
		if u, ok := f.Units[said]; ok {
			said = u
		}
		if said != v.Unit {
			t.Fatalf("%q says %q, sent %q", body, said, v.Unit)
		}
	}
	if c := group("channel"); c != "" && c != "07" {
		t.Fatalf("channel %q", c)
	}
	if f.Checksum != nil && f.Checksum.Kind == "sum8" {
		total := 0
		for _, b := range []byte(frame[:strings.LastIndex(frame, group("sum"))]) {
			total += int(b)
		}
		if got, _ := strconv.ParseInt(group("sum"), 16, 64); int(got) != total%256 {
			t.Fatalf("%q: sum %x, want %x", frame, got, total%256)
		}
	}
}

// TestChecksums: CRC-16/MODBUS check value 0x4B37 for "123456789" (from
// memory; the Modbus specification gives the algorithm), and the 8-bit sums of
// the same bytes by hand: 0x1DD.
func TestChecksums(t *testing.T) {
	nine := []byte("123456789")
	for _, c := range []struct {
		kind string
		want uint16
	}{{"crc16", 0x4B37}, {"sum8", 0xDD}, {"twos-complement", 0x23}, {"xor8", 0x31}} {
		s := sum{kind: c.kind}
		if got := s.over(nine); got != c.want {
			t.Errorf("%s: %#x, want %#x", c.kind, got, c.want)
		}
	}
}

func TestStatusAndNoReading(t *testing.T) {
	f := textFrames["status"]
	f.Kind = "text"
	e, err := New(&f, Instrument{Resolution: 0.001})
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		v    Value
		want string
	}{
		{Value{Shown: 1.5, Unit: "mm"}, " +01.500\r"},
		{Value{Shown: -1.5, Unit: "mm", Status: "battery-low"}, "B-01.500\r"},
		{Value{Unit: "mm", NoReading: "over-range"}, "Err\r"},
		{Value{Shown: 100, Unit: "mm"}, ""},
		{Value{Unit: "mm", NoReading: "error"}, ""},
	} {
		got, ok := e.Append(nil, &c.v)
		if string(got) != c.want || ok != (c.want != "") {
			t.Errorf("%+v: %q, %v; want %q", c.v, got, ok, c.want)
		}
	}
}

func TestRefusedFrames(t *testing.T) {
	for name, f := range map[string]config.Frame{
		"sign outside":     {End: "\r", Pattern: `[+-](?P<value>\d{3}\.\d{3})`, Unit: "mm"},
		"bad pattern":      {End: "\r", Pattern: `(?P<value>`, Unit: "mm"},
		"sum without kind": {End: "\r", Pattern: `(?P<value>[+-]\d\.\d)(?P<sum>..)`, Unit: "mm"},
		"channel":          {End: "\r", Pattern: `(?P<channel>[AB])(?P<value>[+-]\d\.\d)`, Unit: "mm"},
		"kind":             {Kind: "smoke"},
	} {
		if f.Kind == "" {
			f.Kind = "text"
		}
		if _, err := New(&f, Instrument{Channel: "7", Resolution: 0.1}); err == nil {
			t.Errorf("%s: taken", name)
		}
	}
}

func BenchmarkText(b *testing.B) {
	f := textFrames["signed decimal"]
	f.Kind = "text"
	e, err := New(&f, Instrument{Resolution: 0.001})
	if err != nil {
		b.Fatal(err)
	}
	v := Value{Shown: 12.345, Unit: "mm"}
	var buf []byte
	b.ReportAllocs()
	for b.Loop() {
		buf, _ = e.Append(buf[:0], &v)
	}
}
