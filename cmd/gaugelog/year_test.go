package main

import (
	"encoding/json"
	"flag"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"syscall"
	"testing"
	"time"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/ingest/segment"
	"gaugelog/ingest/segment/segmenttest"
	"gaugelog/simulators"
)

var yearDays = flag.Float64("year.days", yearUsual, "how long the simulated year is, in days")

// TestYear records eight gauges for a year in virtual time, from bytes on ports
// in memory to files in memory: twelve changes of load, two power cuts, a full
// disk, and a clock that restarts three hours in the past behind the second cut
// and is set 25 minutes later. What the folder holds is what the simulator's own
// log of its frames says, reading by reading.
//
//	go test -tags campaign -run 'Year$' -v ./cmd/gaugelog
//
// takes the whole year; without the tag it is some days long.
func TestYear(t *testing.T) {
	if testing.Short() {
		t.Skip("two recordings of many days of virtual time")
	}
	combined := samplingRule{dense: 1e9, around: 300e9, perDecade: 50, longest: 900e9, deadBand: 0.02}
	t.Run("combined", func(t *testing.T) {
		y := newYear(t, "{dense: 1 s, around: 5 min, per_decade: 50, longest: 15 min, dead_band: 0.02 mm}", combined)
		y.record(t)
		y.check(t)
	})
	t.Run("all", func(t *testing.T) {
		y := newYear(t, "all", samplingRule{all: true})
		// Memory for eight tenths of what comes while the disk is full.
		y.run.mostWaiting = int(float64(y.full.To-y.full.From) / 60e9 * 8 * 0.8)
		y.record(t)
		y.check(t)
	})
}

// year is one recording of it.
type year struct {
	rule samplingRule
	rig  *config.Rig
	sim  *simulators.Sim
	run  *conductedRun
	disk *segmenttest.FS
	rng  *rand.Rand
	hold int64
	// full is when the disk is full, set when the clock is.
	full  simulators.Interval
	setAt int64
	// wrong is what the wall clock is ahead of true time at present, ns.
	wrong int64

	frames []loggedFrame
	lives  []yearLife
	took   time.Duration
}

// loggedFrame is one frame of the simulator's log.
type loggedFrame struct {
	true  int64 // ns since 1970 UTC
	gauge int
	mm    float64
}

// yearLife is one life of the recorder, in true ns since 1970 UTC.
type yearLife struct {
	from, to int64
	// synced is up to when the disk said that it had everything; math.MaxInt64
	// where nothing was lost.
	synced int64
}

const yearWrong = -3 * int64(time.Hour)

func newYear(t *testing.T, sampling string, rule samplingRule) *year {
	t.Helper()
	y := &year{rule: rule, disk: segmenttest.New(), rng: rand.New(rand.NewPCG(12, 8))}
	text := string(readFile(t, "testdata/year/rig.yaml"))
	hold := *yearDays / 13
	text = strings.ReplaceAll(strings.ReplaceAll(text, "HOLD", fmt.Sprintf("%.6f d", hold)), "SAMPLING", sampling)
	var err error
	if y.rig, err = config.Parse("rig.yaml", []byte(text)); err != nil {
		t.Fatal(err)
	}
	y.hold = int64(y.rig.Plan[0].Hold.Value * 1e9)
	at := func(holds float64) int64 { return int64(holds * float64(y.hold)) }
	y.full = simulators.Interval{From: at(9.3), To: at(9.7)}
	faults, err := simulators.ParseFaults("faults.yaml", fmt.Appendf(nil, "faults:\n  - {kind: power-cut, at: %d s, for: 10 min}\n  - {kind: power-cut, at: %d s, for: 2 h}\n", at(3.5)/1e9+33, at(6.4)/1e9+5))
	if err != nil {
		t.Fatal(err)
	}
	truth, err := simulators.ParseTruth("truth.yaml", y.paces(readFile(t, "testdata/year/truth.yaml")))
	if err != nil {
		t.Fatal(err)
	}
	if y.sim, err = simulators.New(simulators.Options{Rig: y.rig, Truth: truth, Faults: faults, Seed: 3, Frames: y}); err != nil {
		t.Fatal(err)
	}
	y.setAt = y.sim.Cuts()[1].To + int64(25*time.Minute)
	y.run = &conductedRun{rig: y.rig, rigText: []byte(text), fs: y.disk, runID: "year"}
	return y
}

// paces lets the gauges send once a second from six minutes before each change
// of load to twenty minutes behind it, and once a minute else.
func (y *year) paces(truth []byte) []byte {
	truth = append(truth, "pace:\n  - {at: 0 s, every: 60 s}\n"...)
	for i := 1; i < len(y.rig.Plan); i++ {
		change := int64(i) * y.hold / 1e9
		truth = fmt.Appendf(truth, "  - {at: %d s, every: 1 s}\n  - {at: %d s, every: 60 s}\n", change-360, change+1200)
	}
	return truth
}

// Write takes one line of the simulator's log of frames.
func (y *year) Write(line []byte) (int, error) {
	var f sentFrame
	if err := json.Unmarshal(line, &f); err != nil {
		return 0, err
	}
	if f.State != "intact" {
		return 0, fmt.Errorf("a frame that is %s, with nothing to harm it", f.State)
	}
	for i := range y.rig.Gauges {
		if y.rig.Gauges[i].Name == f.Gauge {
			// The log's float is off by a bit from what the display shows.
			y.frames = append(y.frames, loggedFrame{f.NS, i, math.Round(f.MM*1000) / 1000})
		}
	}
	return len(line), nil
}

// record conducts the year.
func (y *year) record(t *testing.T) {
	t.Helper()
	began := time.Now()
	c := &conductor{source: y.sim, computer: y.sim, runs: []*conductedRun{y.run}, ports: openMemoryPorts, cut: func() { y.crash(t) }}
	c.clockOf = func(i simulators.Instant) (device.Instant, bool) {
		return device.Instant{Wall: i.Wall + y.wrong, Boot: i.Boot}, y.wrong == 0
	}
	full := &segmenttest.Failure{At: 1, Persistent: true, Only: []string{"write", "create", "append"}, Err: syscall.ENOSPC}
	c.stops = []conductedStop{
		{y.setAt, func() { y.wrong = 0 }},
		{y.full.From, func() { y.disk.Inject(full) }},
		{y.full.To, func() { y.disk.Inject(nil) }},
	}
	y.lives = append(y.lives, yearLife{from: y.wall(0), synced: math.MaxInt64})
	if err := c.conduct(t.Context()); err != nil {
		t.Fatal(err)
	}
	y.lives[len(y.lives)-1].to = y.wall(y.sim.End())
	y.took = time.Since(began)
}

func (y *year) wall(at int64) int64 { return y.sim.Instant(at).Wall }

var wallWord = regexp.MustCompile(` wall=(\d+) `)

// crash leaves of the disk what a power cut leaves, and reads from it up to
// when it had been told everything.
func (y *year) crash(t *testing.T) {
	y.disk = y.disk.Crash(y.rng, false)
	y.run.fs = y.disk
	cut := y.sim.Cuts()[len(y.lives)-1]
	life := &y.lives[len(y.lives)-1]
	life.to = y.wall(cut.From)
	newest := ""
	for _, name := range y.disk.Names() {
		if path.Dir(name) == segment.ReadingsDir && strings.HasSuffix(name, ".lp") {
			newest = name
		}
	}
	all := wallWord.FindAllSubmatch(y.disk.Bytes(newest), -1)
	if len(all) == 0 {
		t.Fatalf("%q has no checkpoint", newest)
	}
	life.synced, _ = strconv.ParseInt(string(all[len(all)-1][1]), 10, 64)
	y.lives = append(y.lives, yearLife{from: y.wall(cut.To), synced: math.MaxInt64})
	if len(y.lives) == 3 {
		y.wrong = yearWrong // the clock restarts in the past
	}
}

func readFile(t *testing.T, name string) []byte {
	t.Helper()
	b, err := os.ReadFile(name)
	if err != nil {
		t.Fatal(err)
	}
	return b
}

// folder puts the files on a real disk.
func (y *year) folder(t *testing.T) string {
	t.Helper()
	dir := t.TempDir()
	for _, name := range y.disk.Names() {
		file := filepath.Join(dir, filepath.FromSlash(name))
		if err := os.MkdirAll(filepath.Dir(file), 0o755); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(file, y.disk.Bytes(name), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	return dir
}
