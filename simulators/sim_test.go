package simulators

import (
	"bytes"
	"encoding/json"
	"hash/fnv"
	"math"
	"regexp"
	"strconv"
	"strings"
	"testing"

	"gaugelog/config"

	"go.uber.org/goleak"
)

func TestMain(m *testing.M) { goleak.VerifyTestMain(m) }

func demo(t testing.TB, seed uint64) *Sim {
	t.Helper()
	d := DemoRig()
	s, err := New(Options{Rig: d.Rig, Truth: d.Truth, Faults: d.Faults, Seed: seed})
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// digest runs a simulation with batches of one size and sums everything up.
func digest(t testing.TB, s *Sim, most int, slice int64) (uint64, int) {
	t.Helper()
	sums := make([]uint64, len(s.Ports()))
	frames := 0
	until := int64(0)
	for done := false; !done; {
		until += slice
		for {
			st := s.Next(until, most)
			for _, b := range st.Batches {
				if most > 0 && len(b.Bytes) > most {
					t.Fatalf("a batch of %d bytes, bound %d", len(b.Bytes), most)
				}
				last := b.Start - 1
				for _, f := range b.Frames {
					if f.Offset <= last || f.Offset >= b.Start+int64(len(b.Bytes)) || f.At.Wall >= st.At.Wall {
						t.Fatalf("frame %+v does not lie in its batch (from %d, %d bytes, until %d)", f, b.Start, len(b.Bytes), st.At.Wall)
					}
					last = f.Offset
					frames++
				}
				h := fnv.New64a()
				for i, c := range b.Bytes {
					h.Reset()
					h.Write([]byte{c, byte(b.Start + int64(i)), byte((b.Start + int64(i)) >> 8), byte((b.Start + int64(i)) >> 16)})
					sums[b.Index] += h.Sum64()
				}
				for _, f := range b.Frames {
					sums[b.Index] += uint64(f.At.Wall)*31 + uint64(f.At.Boot) + math.Float64bits(f.MM)
				}
			}
			done = st.Done
			if done || st.Reached >= until {
				break
			}
		}
	}
	total := uint64(0)
	for i, x := range sums {
		total = total*1099511628211 + x + uint64(i)
	}
	return total, frames
}

// TestDeterminism: the same seed gives the same bytes and instants whatever
// the batches; another seed gives others.
func TestDeterminism(t *testing.T) {
	a, n := digest(t, demo(t, 1), 16000, 1<<62)
	b, m := digest(t, demo(t, 1), 1000, 3600e9)
	c, _ := digest(t, demo(t, 2), 16000, 1<<62)
	if a != b || n != m {
		t.Errorf("batches change what is sent: %x (%d frames), %x (%d)", a, n, b, m)
	}
	if a == c {
		t.Error("two seeds give the same")
	}
	if n < 300000 {
		t.Errorf("only %d frames", n)
	}
}

var streamed = regexp.MustCompile(`^[+-]\d{3}\.\d{3}$`)

// TestDemoIndications follows the gauge over station 1300 through the test:
// every frame says what the truth makes of the true sag.
func TestDemoIndications(t *testing.T) {
	s := demo(t, 5)
	port := -1
	for i, p := range s.Ports() {
		if p.Name == "sim:station" {
			port = i
		}
	}
	cuts := s.Cuts()
	if len(cuts) != 1 || cuts[0].To-cuts[0].From != 2400e9 {
		t.Fatalf("cuts %v", cuts)
	}
	frames, kinds := 0, ""
	for done := false; !done; {
		st := s.Next(s.End(), 16000)
		done = st.Done
		for _, e := range st.Events {
			kinds += e.Kind.String() + " "
			if e.Kind == PowerBack && (len(e.Boot) != 32 || e.At.Boot != bootLead) {
				t.Errorf("power back: boot id %q, boot clock %d", e.Boot, e.At.Boot)
			}
		}
		for _, b := range st.Batches {
			if b.Index != port {
				continue
			}
			for i, f := range b.Frames {
				end := b.Start + int64(len(b.Bytes))
				if i+1 < len(b.Frames) {
					end = b.Frames[i+1].Offset
				}
				text := strings.TrimSuffix(string(b.Bytes[f.Offset-b.Start:end-b.Start]), "\r\n")
				shown, err := strconv.ParseFloat(text, 64)
				if err != nil || !streamed.MatchString(text) || math.Abs(shown-f.MM) > 1e-9 {
					t.Fatalf("frame %q, said to show %g: %v", text, f.MM, err)
				}
				at := f.At.Wall - s.start.Wall
				if cuts[0].From <= at && at < cuts[0].To {
					t.Fatal("a frame came through a power cut")
				}
				frames++
				total, _, _ := s.Sag("station", at)
				want := 0.0013 + 1.00013*(1.5+total)
				// The frame's lagged swing is below 2.5 um/K times 4 K; noise 0.5 um.
				if since := sinceChange(s, at); math.Abs(shown-want) > 0.0125 && since > 10 {
					t.Fatalf("at %g s: shown %g, true %g", float64(at)/1e9, shown, want)
				}
			}
		}
	}
	if frames < 30000 {
		t.Errorf("%d frames", frames)
	}
	if kinds != "mark mark mark mark power-cut power-back mark " {
		t.Errorf("events %q", kinds)
	}
}

func sinceChange(s *Sim, at int64) float64 {
	since := math.Inf(1)
	for _, st := range s.Steps() {
		if at >= st.From {
			since = float64(at-st.From) / 1e9
		}
	}
	return since
}

// TestLateMark: the third step's mark is typed 35 s after its load hung.
func TestLateMark(t *testing.T) {
	s := demo(t, 1)
	for done := false; !done; {
		st := s.Next(s.End(), 0)
		done = st.Done
		for _, e := range st.Events {
			if e.Kind == MarkDue && e.Mark.Step == "s3" {
				if late := e.Mark.At.Wall - s.start.Wall - s.Steps()[3].Full; late != 35e9 {
					t.Errorf("mark %g s late", float64(late)/1e9)
				}
				if len(e.Mark.Loads) != 1 || e.Mark.Loads[0].Name != "b" || e.Mark.Loads[0].Kilogram != 17.5 {
					t.Errorf("mark %+v", e.Mark)
				}
				return
			}
		}
	}
	t.Error("no mark for s3")
}

func TestTruthLog(t *testing.T) {
	s := demo(t, 1)
	digest(t, s, 0, 1<<62)
	var out bytes.Buffer
	if err := s.WriteTruth(&out, []float64{60, 604800 - 10}); err != nil {
		t.Fatal(err)
	}
	kinds := map[string]int{}
	for line := range strings.Lines(out.String()) {
		var o map[string]any
		if err := json.Unmarshal([]byte(line), &o); err != nil {
			t.Fatalf("%q: %v", line, err)
		}
		kinds[o["kind"].(string)]++
	}
	// 7 beam gauges: 60 s in six steps, the end of the week in one.
	want := map[string]int{"specimen": 1, "step": 6, "sag": 49, "fault": 3, "port": 9}
	for k, n := range want {
		if kinds[k] != n {
			t.Errorf("%d lines of kind %s, want %d", kinds[k], k, n)
		}
	}
	if lost := s.Lost(0); lost != 80 {
		t.Errorf("%d frames lost to a cut of 40 min at 30 s", lost)
	}
}

func TestRewire(t *testing.T) {
	d := DemoRig()
	paths := map[string]string{}
	for _, p := range demo(t, 1).Ports() {
		paths[p.Name] = "/dev/pts/" + strconv.Itoa(len(paths))
	}
	text := Rewire(d.RigText, paths)
	rig, err := config.Parse("rig.yaml", text)
	if err != nil {
		t.Fatal(err)
	}
	for i, g := range rig.Gauges {
		if g.Port != paths[d.Rig.Gauges[i].Port] {
			t.Errorf("%s: port %q", g.Name, g.Port)
		}
	}
	if rig.Probes[0].Port != paths["sim:air"] {
		t.Errorf("probe's port %q", rig.Probes[0].Port)
	}
	if strings.Contains(string(text), "port: sim:") || bytes.Count(text, []byte("\n")) != bytes.Count(d.RigText, []byte("\n")) {
		t.Error("something else changed, or something was left")
	}
}

// BenchmarkFrames counts the cost of one frame of the demonstration.
func BenchmarkFrames(b *testing.B) {
	n := 0
	for n < b.N {
		b.StopTimer()
		s := demo(b, 1)
		b.StartTimer()
		for n < b.N {
			st := s.Next(s.End(), 16000)
			for _, batch := range st.Batches {
				n += len(batch.Frames)
			}
			if st.Done {
				break
			}
		}
	}
}
