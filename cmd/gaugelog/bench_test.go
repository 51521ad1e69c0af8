package main

import (
	"bytes"
	"encoding/json"
	"flag"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"sort"
	"strconv"
	"strings"
	"testing"
	"time"

	"github.com/klauspost/compress/zstd"

	"gaugelog/ingest"
	"gaugelog/simulators"
)

// The bench: seven instruments of every kind of frame on two rigs that share a
// multiplexer, a bus and a probe, for an hour of virtual time in which every
// fault of the schedule happens. What the two run folders hold is compared
// with the simulator's own log of each frame. The folders are read here as
// plain text, not by the program's own reader.

// sentFrame is one line of the simulator's log.
type sentFrame struct {
	Gauge  string  `json:"gauge"`
	NS     int64   `json:"unix_ns"`
	MM     float64 `json:"mm"`
	State  string  `json:"state"`
	Status string  `json:"status"`
}

// foundReading is one line of a run folder.
type foundReading struct {
	ns     int64
	value  float64
	fields string
}

// foundEvent is one line of events.lp.
type foundEvent struct {
	gauge, kind, detail string
	n                   int
	ns                  int64
}

// benchRun is one conducted hour.
type benchRun struct {
	joint    *simulators.Joint
	folders  []string
	sent     map[string][]sentFrame
	readings []map[string][]foundReading // by run, by gauge or probe
	events   [][]foundEvent
}

// benchSeeds is for longer campaigns than every change needs:
//
//	go test -run 'TestBench$' -timeout 1h ./cmd/gaugelog -args -bench.seeds 100
var benchSeeds = flag.Uint64("bench.seeds", 1, "how many benches to run, each with its own noise and damage")

// benchJoint builds the bench; beyond the first, the damage is drawn anew too.
func benchJoint(seed uint64, logged io.Writer) (*simulators.Joint, error) {
	if seed == 0 {
		return simulators.Bench(5, false, logged)
	}
	var sims []*simulators.Sim
	for n := 1; n <= simulators.BenchRigs; n++ {
		d := simulators.BenchRig(n)
		own := seed*simulators.BenchRigs + uint64(n)
		d.Faults.Seed = &own
		sim, err := simulators.New(simulators.Options{Rig: d.Rig, Truth: d.Truth, Faults: d.Faults, Seed: own, Frames: logged})
		if err != nil {
			return nil, err
		}
		sims = append(sims, sim)
	}
	return simulators.Join(sims...)
}

func conductBench(t *testing.T, seed uint64) *benchRun {
	t.Helper()
	var logged bytes.Buffer
	joint, err := benchJoint(seed, &logged)
	if err != nil {
		t.Fatal(err)
	}
	b := &benchRun{joint: joint, sent: map[string][]sentFrame{}}
	c := &conductor{source: joint, computer: joint.Sims()[0]}
	under := t.TempDir()
	for n := 1; n <= simulators.BenchRigs; n++ {
		d := simulators.BenchRig(n)
		folder := filepath.Join(under, d.Rig.Specimen.Name)
		dir, err := ingest.OpenDir(folder, ingest.DirOptions{Create: true, Virtual: true})
		if err != nil {
			t.Fatal(err)
		}
		defer dir.Close()
		c.runs = append(c.runs, &conductedRun{rig: d.Rig, rigText: d.RigText, fs: dir.FS(), runID: fmt.Sprintf("bench-%d", n)})
		b.folders = append(b.folders, folder)
	}
	began := time.Now()
	if err := c.conduct(t.Context()); err != nil {
		t.Fatal(err)
	}
	t.Logf("an hour in %.1f s", time.Since(began).Seconds())
	for line := range strings.Lines(logged.String()) {
		var f sentFrame
		if err := json.Unmarshal([]byte(line), &f); err != nil {
			t.Fatal(err)
		}
		b.sent[f.Gauge] = append(b.sent[f.Gauge], f)
	}
	for _, folder := range b.folders {
		b.readings = append(b.readings, readingsIn(t, folder))
		b.events = append(b.events, eventsIn(t, folder))
	}
	return b
}

// plainLines reads a file of line protocol, compressed or not, less its comments.
func plainLines(t *testing.T, path string) []string {
	t.Helper()
	text, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	if strings.HasSuffix(path, ".zst") {
		d, err := zstd.NewReader(bytes.NewReader(text))
		if err != nil {
			t.Fatal(err)
		}
		defer d.Close()
		if text, err = io.ReadAll(d); err != nil {
			t.Fatal(err)
		}
	}
	var out []string
	for line := range strings.Lines(string(text)) {
		if line = strings.TrimSuffix(line, "\n"); line != "" && line[0] != '#' {
			out = append(out, line)
		}
	}
	return out
}

var (
	readingLine = regexp.MustCompile(`^(?:indication,gauge|ambient,probe)=([a-z-]+) (?:mm|celsius)=(-?[0-9.eE+-]+)(\S*) (\d{19})$`)
	eventLine   = regexp.MustCompile(`^event(?:,gauge=([^, ]+))?,kind=([a-z-]+) (?:detail="((?:[^"\\]|\\.)*)",)?(?:from=[^,]*,)?n=(\d+)i(?:,\S+)? (\d{19})$`)
)

func readingsIn(t *testing.T, folder string) map[string][]foundReading {
	t.Helper()
	files, err := filepath.Glob(filepath.Join(folder, "readings", "*"))
	if err != nil {
		t.Fatal(err)
	}
	out := map[string][]foundReading{}
	for _, path := range files {
		if strings.HasSuffix(path, ".lp") && slices.Contains(files, path+".zst") {
			continue
		}
		for _, line := range plainLines(t, path) {
			m := readingLine.FindStringSubmatch(line)
			if m == nil {
				if strings.HasPrefix(line, "indication") || strings.HasPrefix(line, "ambient") {
					t.Fatalf("%s: %q", path, line)
				}
				continue
			}
			v, err := strconv.ParseFloat(m[2], 64)
			if err != nil {
				t.Fatal(err)
			}
			ns, _ := strconv.ParseInt(m[4], 10, 64)
			out[m[1]] = append(out[m[1]], foundReading{ns, v, m[3]})
		}
	}
	return out
}

func eventsIn(t *testing.T, folder string) []foundEvent {
	t.Helper()
	var out []foundEvent
	for _, line := range plainLines(t, filepath.Join(folder, "events.lp")) {
		m := eventLine.FindStringSubmatch(line)
		if m == nil {
			t.Fatalf("events.lp of %s: %q", folder, line)
		}
		n, _ := strconv.Atoi(m[4])
		ns, _ := strconv.ParseInt(m[5], 10, 64)
		out = append(out, foundEvent{m[1], m[2], m[3], n, ns})
	}
	return out
}

// tolerance is how far a recorded value may lie from the one shown: the
// simulator logs a probe's temperature before it is rounded to 0.01 degrees,
// and a queried gauge says eight digits of the metre.
func tolerance(name string) float64 {
	switch name {
	case "air":
		return 0.005 + 1e-9
	}
	return 1e-6
}

// TestBench: the folders hold every reading sent intact while plugged in, and
// none that is damaged or was never sent.
func TestBench(t *testing.T) {
	if testing.Short() {
		t.Skip("an hour of virtual time")
	}
	for seed := range *benchSeeds {
		t.Run(fmt.Sprintf("seed %d", seed), func(t *testing.T) {
			b := conductBench(t, seed)
			t.Run("schedule", b.checkSchedule)
			t.Run("readings", b.checkReadings)
			t.Run("ports", b.checkPorts)
			t.Run("units", b.checkUnits)
			t.Run("no readings", b.checkNoReadings)
			t.Run("refused", b.checkRefused)
			t.Run("ledger", b.checkLedger)
			t.Run("verify", b.checkWhole)
		})
	}
}

func (b *benchRun) checkWhole(t *testing.T) {
	for _, folder := range b.folders {
		var out, errOut bytes.Buffer
		if code := run([]string{"verify", folder}, strings.NewReader(""), &out, &errOut); code != Done {
			t.Errorf("verify %s ended with %d: %s%s", folder, code, &out, &errOut)
		}
	}
}

func (b *benchRun) checkReadings(t *testing.T) {
	if len(b.sent) != 8 {
		t.Fatalf("%d instruments spoke, want seven gauges and a probe", len(b.sent))
	}
	for i, found := range b.readings {
		d := simulators.BenchRig(i + 1)
		var names []string
		for _, g := range d.Rig.Gauges {
			names = append(names, g.Name)
		}
		for _, p := range d.Rig.Probes {
			names = append(names, p.Name)
		}
		if len(found) != len(names) {
			t.Errorf("run %d holds %d instruments, its rig has %d", i+1, len(found), len(names))
		}
		for _, name := range names {
			compareReadings(t, name, b.sent[name], found[name])
		}
	}
}

// compareReadings holds what was recorded of one instrument against what it sent.
func compareReadings(t *testing.T, name string, sent []sentFrame, found []foundReading) {
	t.Helper()
	at := map[int64]*sentFrame{}
	counts := map[string]int{}
	for i := range sent {
		f := &sent[i]
		if at[f.NS] != nil {
			t.Fatalf("%s sent two frames at one instant", name)
		}
		at[f.NS] = f
		counts["sent "+f.State]++
	}
	recorded := map[int64]bool{}
	for _, r := range found {
		f := at[r.ns]
		switch {
		case f == nil:
			t.Errorf("%s: %g at %d was never sent", name, r.value, r.ns)
			continue
		case recorded[r.ns]:
			t.Errorf("%s: the frame at %d was recorded twice", name, r.ns)
		case f.State != "intact" && f.State != "doubtful":
			t.Errorf("%s: a %s frame at %d was recorded as %g, it showed %g", name, f.State, r.ns, r.value, f.MM)
		case !(math.Abs(r.value-f.MM) <= tolerance(name)):
			t.Errorf("%s: %.9g recorded at %d, it showed %.9g", name, r.value, r.ns, f.MM)
		case f.Status != "" && !strings.Contains(r.fields, `"`+f.Status+`"`):
			t.Errorf("%s: status %s at %d is recorded as %q", name, f.Status, r.ns, r.fields)
		}
		recorded[r.ns] = true
		counts["recorded "+f.State]++
	}
	missing := 0
	for i := range sent {
		if f := &sent[i]; f.State == "intact" && !recorded[f.NS] {
			if missing++; missing <= 5 {
				t.Errorf("%s: the intact frame at %.3f s (%d) is missing", name, float64(f.NS-sent[0].NS)/1e9, f.NS)
			}
		}
	}
	if missing > 5 {
		t.Errorf("%s: %d intact frames are missing", name, missing)
	}
	var keys []string
	for k := range counts {
		keys = append(keys, k)
	}
	sort.Strings(keys)
	text := name + ":"
	for _, k := range keys {
		text += fmt.Sprintf(" %s %d,", k, counts[k])
	}
	t.Log(strings.TrimSuffix(text, ","))
}
