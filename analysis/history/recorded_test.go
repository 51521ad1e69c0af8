package history_test

import (
	"fmt"
	"math"
	"os"
	"path/filepath"
	"runtime"
	"slices"
	"strings"
	"testing"
	"time"

	"github.com/google/go-cmp/cmp"

	"gaugelog/analysis/history"
	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/ingest"
)

const recordedRig = `title: a slat
specimen:
  name: a3
  section: {shape: rectangle, width: 140 mm, depth: 38 mm}
  length: 800 mm
supports:
  - {name: left, at: 0 mm}
  - {name: right, at: 600 mm}
gauges:
  - {name: mid, at: 300 mm, sense: down, resolution: 0.001 mm}
  - {name: left, at: 0 mm, sense: down, resolution: 0.001 mm}
probes:
  - {name: air}
loads:
  - {name: pan, at: 300 mm}
record:
  sampling: SAMPLING
`

const thinningOut = "{dense: 1 s, around: 10 min, per_decade: 50, longest: 15 min}"

// bench records a run in virtual time: two gauges and a probe that send once a
// second, through the recorder itself, into a folder on disk.
type bench struct {
	t    *testing.T
	dir  string
	d    *ingest.Dir
	o    ingest.Options
	r    *ingest.Recorder
	at   device.Instant
	mm   [2]float64
	mute [2]bool
	sent [2]map[int64]float64
}

func newBench(t *testing.T, sampling string) *bench {
	t.Helper()
	b := &bench{t: t, dir: t.TempDir(), at: device.Instant{Wall: 1_790_000_000_000_000_000, Boot: 1e11},
		sent: [2]map[int64]float64{{}, {}}}
	d, err := ingest.OpenDir(b.dir, ingest.DirOptions{Virtual: true})
	b.must(err)
	t.Cleanup(func() { d.Close() })
	b.d = d
	text := []byte(strings.ReplaceAll(recordedRig, "SAMPLING", sampling))
	rig, err := config.Parse("rig.yaml", text)
	b.must(err)
	b.o = ingest.Options{FS: d.FS(), Rig: rig, RigBytes: text, Run: "run-1"}
	b.boot("boot-1")
	return b
}

func (b *bench) must(err error) {
	b.t.Helper()
	if err != nil {
		b.t.Fatal(err)
	}
}

// boot starts a recorder, in a machine with that boot id.
func (b *bench) boot(id string) {
	b.o.Start = b.at
	b.o.Clock = &ingest.FixedClock{Known: ingest.ClockState{BootID: id, Synchronised: true}}
	var err error
	b.r, err = ingest.Open(b.o)
	b.must(err)
}

func (b *bench) wait(d time.Duration) { b.at.Wall += int64(d); b.at.Boot += int64(d) }

// run lets the gauges send for a while.
func (b *bench) run(d time.Duration) {
	b.t.Helper()
	for end := b.at.Boot + int64(d); b.at.Boot < end; b.wait(time.Second) {
		for g, name := range []string{"mid", "left"} {
			if b.mute[g] {
				continue
			}
			at := device.Instant{Wall: b.at.Wall + int64(g), Boot: b.at.Boot + int64(g)}
			mm := math.Round(b.mm[g]*1000+float64(at.Wall/1e9*7%3)) / 1000
			b.sent[g][at.Wall] = mm
			b.must(b.r.Handle(ingest.Seen(device.Reading{Kind: device.Indication, Gauge: name, Port: "sim:" + name, MM: mm, Shown: mm, Unit: "mm", At: at})))
		}
		b.must(b.r.Handle(ingest.Seen(device.Reading{Kind: device.Ambient, Probe: "air", Celsius: 20, HumidityPercent: 50, At: b.at})))
		b.must(b.r.Handle(ingest.TickAt(b.at)))
	}
}

// mark enters a load that speaks of a moment some time ago.
func (b *bench) mark(ago time.Duration, newton float64) {
	b.t.Helper()
	at := b.at
	m := ingest.Mark{Time: at.Wall - int64(ago), Loads: []ingest.LoadValue{{Name: "pan", Newton: newton, Shown: "x"}}}
	id, err := ingest.AppendMark(b.o.FS, m, at, ingest.ClockState{Synchronised: true})
	b.must(err)
	m.ID = id
	b.must(b.r.Handle(ingest.Event{Kind: ingest.MarkSeen, At: at, Mark: m}))
}

func (b *bench) close() { b.t.Helper(); b.must(b.r.Close(b.at)) }

func (b *bench) load() *history.History {
	b.t.Helper()
	h, err := history.Load(b.dir)
	b.must(err)
	b.t.Cleanup(func() { h.Close() })
	return h
}

// exact holds the bins of h against the readings that Window gives, put into
// bins by sorting; it returns how many readings there are.
func exact(t *testing.T, h *history.History) (n int) {
	t.Helper()
	all, err := h.Window(h.First, h.Last)
	if err != nil {
		t.Fatal(err)
	}
	for g := range all {
		if len(all[g]) != int(h.GaugeReadings[g]) {
			t.Fatalf("gauge %d: window of %d readings, %d counted", g, len(all[g]), h.GaugeReadings[g])
		}
		n += len(all[g])
		m, err := history.FromSamples(history.Given{Rig: h.Rig, Samples: all})
		if err != nil {
			t.Fatal(err)
		}
		if d := cmp.Diff(m.Bins(g), h.Bins(g)); d != "" {
			t.Errorf("gauge %d: %s", g, d)
		}
	}
	return n
}

func codes(h *history.History) (out []string) {
	for _, n := range h.Notes {
		out = append(out, n.Code)
	}
	return out
}

// Readings that the recorder recalled from memory, behind younger ones, give
// exact bins without a word; and sampling that thins out makes no gap.
func TestRecalledReadings(t *testing.T) {
	b := newBench(t, thinningOut)
	b.run(2 * time.Hour)
	b.mark(4*time.Minute, 120) // late, with what came before it in memory
	b.run(5 * time.Hour)
	b.mm[0] += 0.5 // a jump that nobody marked
	b.run(30 * time.Hour)
	b.mark(2*time.Hour, 120) // later than memory reaches
	b.run(9 * time.Hour)
	b.close()
	h := b.load()
	n := exact(t, h)
	if n < 4000 || n > 40000 {
		t.Errorf("%d readings: the sampling is not what this test is about", n)
	}
	if got := codes(h); len(got) > 0 {
		t.Errorf("notes %v", h.Notes)
	}
	if len(h.Gaps) > 0 {
		t.Errorf("gaps %+v", h.Gaps)
	}
	if air := h.Ambient(0); !slices.IsSortedFunc(air, func(x, y history.AmbientSample) int { return int(x.Time - y.Time) }) || len(air) < 100 {
		t.Errorf("%d samples of the surroundings, or out of order", len(air))
	}
}

// A power cut is one gap of all gauges with its reason, and so is a stop that
// was meant; a gauge that falls silent is a gap of its own.
func TestGapsOfARecording(t *testing.T) {
	for _, sampling := range []string{thinningOut, "all", "{every: 10 s}", "{dead_band: 0.005 mm}"} {
		b := newBench(t, sampling)
		b.run(3 * time.Hour)
		b.mark(0, 120)
		b.run(20 * time.Minute)
		cut := b.at
		b.wait(47 * time.Minute) // the power fails: nobody closes the recorder
		b.boot("boot-2")
		back := b.at
		b.run(2 * time.Hour)
		b.mute[1] = true
		mute := b.at
		b.run(25 * time.Minute)
		b.mute[1] = false
		b.run(time.Hour)
		b.close()
		stop := b.at
		b.wait(3 * time.Hour)
		b.boot("boot-2")
		again := b.at
		b.run(time.Hour)
		b.mute[0] = true
		last := b.at
		b.run(2 * time.Hour)
		b.close()
		end := b.at
		h := b.load()
		want := []history.Gap{
			{From: cut.Wall, To: back.Wall, Why: "the recording broke off without being stopped, and the machine was started anew: a power cut or a restart"},
			{Gauge: "left", From: mute.Wall, To: mute.Wall + int64(25*time.Minute), Why: "no readings for"},
			{From: stop.Wall, To: again.Wall, Why: "the recording had been stopped and was taken up again"},
			{Gauge: "mid", From: last.Wall, To: end.Wall, Why: "the gauge fell silent"},
		}
		same := len(h.Gaps) == len(want)
		for i := 0; same && i < len(want); i++ {
			g, w := h.Gaps[i], want[i]
			// What was synced last was up to 10 s earlier, or 10 min where
			// nothing was to be stored.
			slack := int64(12e9)
			if i == 0 && sampling == "{dead_band: 0.005 mm}" {
				slack = 601e9
			}
			same = g.Gauge == w.Gauge && abs(g.From-w.From) < slack && abs(g.To-w.To) < 12e9 && strings.HasPrefix(g.Why, w.Why)
		}
		if !same {
			t.Errorf("%s: gaps\n%s\nwant\n%s", sampling, list(h.Gaps), list(want))
		}
		if got := codes(h); len(got) > 0 {
			t.Errorf("%s: notes %v", sampling, h.Notes)
		}
	}
}

func abs(d int64) int64 { return max(d, -d) }

func list(gaps []history.Gap) string {
	var s strings.Builder
	for _, g := range gaps {
		fmt.Fprintf(&s, "  %q %s %s: %s\n", g.Gauge, time.Unix(0, g.From).UTC(), time.Unix(0, g.To).UTC(), g.Why)
	}
	return s.String()
}

// A stretch that is lost with its segment is a gap although no event speaks of
// it.
func TestGapOfALostSegment(t *testing.T) {
	b := newBench(t, "{every: 1 s}")
	b.o.Rig.Record.Roll.Age.Value = 3600
	b.r.Close(b.at)
	b.boot("boot-1")
	b.run(5 * time.Hour)
	b.close()
	lost := filepath.Join(b.dir, "readings", "000004.lp")
	b.must(os.Remove(lost))
	h := b.load()
	if len(h.Gaps) != 1 || h.Gaps[0].Gauge != "" || abs(h.Gaps[0].To-h.Gaps[0].From-3600e9) > 15e9 ||
		h.Gaps[0].Why != "no reading, and nothing recorded says why" {
		t.Errorf("gaps\n%s", list(h.Gaps))
	}
}

// What is read back does not depend on the number of cores.
func TestCoresMakeNoDifference(t *testing.T) {
	b := newBench(t, thinningOut)
	b.o.Compress = true
	b.o.Rig.Record.Roll.Size.Value = 100_000
	b.r.Close(b.at)
	b.boot("boot-1")
	b.run(time.Hour)
	b.mark(time.Minute, 120)
	b.run(40 * time.Hour)
	b.close()
	type answer struct {
		Bins, Fine [][]history.Bin
		Window     [][]history.Sample
		Ambient    []history.AmbientSample
		Gaps       []history.Gap
		Notes      []history.Note
	}
	ask := func(cores int) (a answer) {
		defer runtime.GOMAXPROCS(runtime.GOMAXPROCS(cores))
		h := b.load()
		for g := range h.Rig.Gauges {
			a.Bins = append(a.Bins, h.Bins(g))
		}
		var err error
		a.Window, err = h.Window(h.First, h.Last)
		b.must(err)
		a.Fine, err = h.Fine([]int64{h.First, h.First + 1e9, h.First + 7777e9, h.Last + 1})
		b.must(err)
		a.Ambient, a.Gaps, a.Notes = h.Ambient(0), h.Gaps, h.Notes
		return a
	}
	one := ask(1)
	if len(one.Bins[0]) < 300 {
		t.Fatalf("only %d bins", len(one.Bins[0]))
	}
	for _, cores := range []int{4, 1, 4} {
		if d := cmp.Diff(one, ask(cores)); d != "" {
			t.Errorf("%d cores differ: %s", cores, d)
		}
	}
}
