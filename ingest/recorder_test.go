package ingest

import (
	"bytes"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"github.com/google/go-cmp/cmp"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/ingest/segment"
	"gaugelog/ingest/segment/segmenttest"
)

// tester is what the helpers need of a test, or of a property's run.
type tester interface {
	Helper()
	Fatal(...any)
	Fatalf(string, ...any)
}

// testStart is 2026-09-21 14:13:20 UTC, with a machine up for 100 s.
var testStart = device.Instant{Wall: 1_790_000_000_000_000_000, Boot: 100_000_000_000}

func later(at device.Instant, d time.Duration) device.Instant {
	return device.Instant{Wall: at.Wall + int64(d), Boot: at.Boot + int64(d)}
}

func duration(s float64) *config.Duration {
	return &config.Duration{Quantity: config.Quantity{Value: s}}
}

func length(mm float64) *config.Length { return &config.Length{Quantity: config.Quantity{Value: mm}} }

func number(v float64) *config.Number { return &config.Number{Quantity: config.Quantity{Value: v}} }

// testRig has gauges g0, g1 and so on, and the sampling given.
func testRig(gauges int, s config.Sampling) *config.Rig {
	r := &config.Rig{}
	for i := range gauges {
		r.Gauges = append(r.Gauges, config.Gauge{
			Name: fmt.Sprintf("g%d", i), Port: fmt.Sprintf("sim:g%d", i), Resolution: *length(0.001),
		})
	}
	r.Record.Sampling = s
	r.Record.Sync = *duration(10)
	return r
}

func testOptions(fsys segment.FS, rig *config.Rig) Options {
	return Options{
		FS: fsys, Rig: rig, RigBytes: []byte("title: bench\n"), Run: "run-1", Start: testStart,
		Clock: &FixedClock{Known: ClockState{BootID: "boot-1", Synchronised: true}},
	}
}

func osFS(t testing.TB) (segment.FS, string) {
	t.Helper()
	dir := t.TempDir()
	d, err := OpenDir(dir, DirOptions{})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { d.Close() })
	return d.FS(), dir
}

func mustOpen(t tester, o Options) *Recorder {
	t.Helper()
	r, err := Open(o)
	if err != nil {
		t.Fatal(err)
	}
	return r
}

func must(t tester, err error) {
	t.Helper()
	if err != nil {
		t.Fatal(err)
	}
}

func indication(gauge string, mm float64, at device.Instant) device.Reading {
	return device.Reading{Kind: device.Indication, Gauge: gauge, MM: mm, Shown: mm, Unit: "mm", At: at}
}

// stored reads back the indications of a run folder, by gauge, in file order.
func stored(t tester, fsys segment.FS) map[string][]segment.Record {
	t.Helper()
	folder, err := segment.OpenFolder(fsys)
	must(t, err)
	r := folder.Read(segment.ReadOptions{})
	defer r.Close()
	got := map[string][]segment.Record{}
	for rec, err := range r.Records() {
		must(t, err)
		if rec.Kind == segment.Indication {
			got[rec.Name] = append(got[rec.Name], rec)
		}
	}
	if d := r.Report().Damage; len(d) > 0 { // of the segments
		t.Fatalf("the folder is damaged: %+v", d)
	}
	return got
}

// events reads back events.lp as "kind gauge detail", and the stamps.
func events(t tester, fsys segment.FS) []string {
	t.Helper()
	folder, err := segment.OpenFolder(fsys)
	must(t, err)
	records, _, err := folder.Log(segment.EventsFile)
	must(t, err)
	var all []string
	for _, r := range records {
		kind, gauge := "", ""
		for _, tag := range r.Point.Tags {
			switch tag.Key {
			case "kind":
				kind = tag.Value
			case "gauge":
				gauge = tag.Value
			}
		}
		all = append(all, strings.TrimSpace(kind+" "+gauge)+": "+fieldsOf(r.Point).text("detail"))
	}
	return all
}

func has(list []string, part string) bool {
	for _, s := range list {
		if strings.Contains(s, part) {
			return true
		}
	}
	return false
}

// ls lists the files under a folder with their contents.
func ls(t testing.TB, dir string) map[string]string {
	t.Helper()
	files := map[string]string{}
	must(t, filepath.WalkDir(dir, func(path string, e fs.DirEntry, err error) error {
		if err != nil || e.IsDir() {
			return err
		}
		text, err := os.ReadFile(path)
		name, _ := filepath.Rel(dir, path)
		files[filepath.ToSlash(name)] = string(text)
		return err
	}))
	return files
}

func TestRecordsAllReadings(t *testing.T) {
	fsys, dir := osFS(t)
	r := mustOpen(t, testOptions(fsys, testRig(2, config.Sampling{All: true})))
	for i := range 100 {
		at := later(testStart, time.Duration(i)*100*time.Millisecond)
		must(t, r.Handle(Seen(indication("g0", float64(i)/1000, at))))
		must(t, r.Handle(Seen(indication("g1", -float64(i)/1000, at))))
	}
	must(t, r.Close(later(testStart, 10*time.Second)))
	got := stored(t, fsys)
	for i := range 100 {
		want := testStart.Wall + int64(i)*int64(100*time.Millisecond)
		if g := got["g0"][i]; g.Time != want || g.MM != float64(i)/1000 {
			t.Fatalf("g0[%d] = %+v, want time %d", i, g, want)
		}
	}
	if len(got["g0"]) != 100 || len(got["g1"]) != 100 {
		t.Fatalf("got %d and %d readings, want 100 each", len(got["g0"]), len(got["g1"]))
	}
	files := ls(t, dir)
	if files["rig.yaml"] != "title: bench\n" {
		t.Errorf("rig.yaml is %q", files["rig.yaml"])
	}
	want := []string{"started: the recording begins", "stopped: the recording ends"}
	if d := cmp.Diff(want, events(t, fsys)); d != "" {
		t.Errorf("events (-want +got):\n%s", d)
	}
	for _, name := range []string{"rig.yaml", "events.lp", "readings/000001.lp"} {
		if !strings.Contains(files["SHA256SUMS"], "  "+name+"\n") {
			t.Errorf("SHA256SUMS lacks %s:\n%s", name, files["SHA256SUMS"])
		}
	}
}

func TestSameEventsGiveTheSameFolder(t *testing.T) {
	run := func() map[string]string {
		fsys, dir := osFS(t)
		rig := testRig(3, config.Sampling{Dense: duration(1), Around: duration(60), PerDecade: number(20), Longest: duration(300), DeadBand: length(0.005)})
		o := testOptions(fsys, rig)
		o.Compress = true
		r := mustOpen(t, o)
		at := testStart
		for i := range 4000 {
			at = later(at, 700*time.Millisecond)
			mm := 0.001 * float64(i/900)
			if i > 2000 {
				mm += 1
			}
			must(t, r.Handle(Seen(indication(fmt.Sprintf("g%d", i%3), mm, at))))
			if i == 2100 {
				_, err := AppendMark(fsys, Mark{Time: at.Wall, Loads: []LoadValue{{Name: "pan", Newton: 98, Shown: "98 N"}}}, at, ClockState{BootID: "boot-1", Synchronised: true})
				must(t, err)
				must(t, r.Handle(Event{Kind: MarkSeen, At: at, Mark: Mark{ID: "m1", Time: at.Wall, Note: "x"}}))
			}
		}
		must(t, r.Close(at))
		return ls(t, dir)
	}
	if d := cmp.Diff(run(), run()); d != "" {
		t.Errorf("two runs differ:\n%s", d)
	}
}

func TestGoesOnInANewSegment(t *testing.T) {
	fsys, _ := osFS(t)
	rig := testRig(1, config.Sampling{All: true})
	o := testOptions(fsys, rig)
	r := mustOpen(t, o)
	must(t, r.Handle(Seen(indication("g0", 1, later(testStart, time.Second)))))
	must(t, r.Close(later(testStart, 2*time.Second)))

	o.Run = "another"
	o.Start = later(testStart, time.Hour)
	r = mustOpen(t, o)
	if r.Run() != "run-1" {
		t.Errorf("the run is now %q", r.Run())
	}
	must(t, r.Handle(Seen(indication("g0", 2, later(o.Start, time.Second)))))
	must(t, r.Close(later(o.Start, 2*time.Second)))
	if got := stored(t, fsys)["g0"]; len(got) != 2 || got[1].MM != 2 {
		t.Errorf("got %+v", got)
	}
	if e := events(t, fsys); !has(e, "gap: nothing was recorded for 59m58s") {
		t.Errorf("no gap among %q", e)
	}

	o.RigBytes = []byte("title: other\n")
	_, err := Open(o)
	var differs *RigDiffersError
	if !errors.As(err, &differs) || !strings.Contains(err.Error(), "- rig.yaml:1: title: bench\n+ rig.yaml:1: title: other") {
		t.Errorf("a changed rig file gives %v", err)
	}
}

func TestOneRecorderAtATime(t *testing.T) {
	dir := t.TempDir()
	d, err := OpenDir(dir, DirOptions{})
	must(t, err)
	defer d.Close()
	o := testOptions(d.FS(), testRig(1, config.Sampling{All: true}))
	o.Lock = d.Lock("gaugelog record (process 42)")
	r := mustOpen(t, o)
	_, err = Open(o)
	var held *HeldError
	if !errors.As(err, &held) || held.Holder != "gaugelog record (process 42)" {
		t.Fatalf("the second recorder got %v", err)
	}
	if who, running, err := d.Holder(); err != nil || !running || who != held.Holder {
		t.Errorf("Holder: %q %v %v", who, running, err)
	}
	must(t, r.Close(testStart))
	if _, running, err := d.Holder(); err != nil || running {
		t.Errorf("after Close: running %v, %v", running, err)
	}
	if lock := ls(t, dir)[runLockName]; lock != "" {
		t.Errorf("the lock file still says %q", lock)
	}
}

func TestSteppedClockKeepsTrueIntervals(t *testing.T) {
	for _, step := range []time.Duration{25 * time.Minute, -time.Hour} {
		fsys, _ := osFS(t)
		r := mustOpen(t, testOptions(fsys, testRig(1, config.Sampling{All: true})))
		for i := range 20 {
			at := later(testStart, time.Duration(i)*time.Second)
			if i >= 10 {
				at.Wall += int64(step)
			}
			must(t, r.Handle(Seen(indication("g0", float64(i), at))))
		}
		must(t, r.Close(later(testStart, 20*time.Second)))
		got := stored(t, fsys)["g0"]
		if len(got) != 20 {
			t.Fatalf("step %s: %d readings, want 20", step, len(got))
		}
		if !has(events(t, fsys), "clock-stepped: the wall clock was stepped by") {
			t.Errorf("step %s: events %q", step, events(t, fsys))
		}
		if d := time.Duration(got[10].Raw - got[9].Raw); d != time.Second+step {
			t.Errorf("step %s: stamps move by %s across it", step, d)
		}
	}
}

// TestWear measures what a day at the default settings writes: eight gauges of
// one reading a second, all stored, synced every ten seconds.
func TestWear(t *testing.T) {
	mem := segmenttest.New()
	rig := testRig(8, config.Sampling{All: true})
	rig.Record.Roll.Size.Value = 250_000
	r := mustOpen(t, testOptions(mem, rig))
	at := testStart
	const seconds = 3600
	for range seconds {
		at = later(at, time.Second)
		for g := range 8 {
			must(t, r.Handle(Seen(indication(fmt.Sprintf("g%d", g), 1.234, at))))
		}
	}
	must(t, r.Close(at))
	bytes := 0
	for _, name := range mem.Names() {
		bytes += len(mem.Bytes(name))
	}
	each := float64(bytes) / (8 * seconds)
	t.Logf("%.1f bytes a reading, %.1f MB a day, 8640 syncs a day", each, each*8*86400/1e6)
	if each > 60 {
		t.Errorf("%.1f bytes a reading; a line has 49, and its share of the checkpoints should be under 11", each)
	}
}

// TestProgramOfAnyName: what names the program must not keep it from recording.
func TestProgramOfAnyName(t *testing.T) {
	mem := segmenttest.New()
	o := testOptions(mem, testRig(1, config.Sampling{All: true}))
	o.Program = "development build"
	r := mustOpen(t, o)
	must(t, r.Close(later(testStart, time.Second)))
	head, _, _ := bytes.Cut(mem.Bytes("readings/000001.lp"), []byte("\n"))
	if !bytes.Contains(head, []byte(" program=development-build ")) {
		t.Errorf("the header says %q", head)
	}
}
