package live

import (
	"context"
	"flag"
	"fmt"
	"io"
	"math"
	"net/http"
	"os"
	"path/filepath"
	"runtime"
	"slices"
	"strings"
	"sync"
	"syscall"
	"testing"
	"time"

	"gaugelog/config"
	"gaugelog/ingest"
	"gaugelog/ingest/desk"
	"gaugelog/ingest/desk/desktest"
	"gaugelog/ingest/segment"
)

// The benchmark's run has two million readings unless another number is asked
// for:
//
//	go test ./ingest/live -run '^$' -bench Opening -benchtime 20x -readings 100000000
//
// With -keep FOLDER the run is laid there, and used again where it lies already.
var (
	readings = flag.Int("readings", 2_000_000, "readings of the run whose page is opened")
	keep     = flag.String("keep", "", "folder to lay the run in, or to use it again from")
)

// longRun lays a run of n readings that ends now: three gauges every quarter of
// a second, in compressed segments, with a load hung on after ten minutes.
func longRun(b *testing.B, n int) (string, *config.Rig) {
	b.Helper()
	text := []byte(strings.Replace(desktest.RigText, "%TITLE%", "Long run", 1))
	rig, err := config.Parse("rig.yaml", text)
	if err != nil {
		b.Fatal(err)
	}
	run := *keep
	if run == "" {
		run = filepath.Join(b.TempDir(), "run")
	}
	if _, err := os.Stat(filepath.Join(run, "rig.yaml")); err == nil {
		return run, rig
	}
	dir, err := ingest.OpenDir(run, ingest.DirOptions{Create: true, Virtual: true})
	if err != nil {
		b.Fatal(err)
	}
	defer dir.Close()
	const every = int64(time.Second / 4)
	instants := n / len(rig.Gauges)
	start := time.Now().UnixNano() - int64(instants)*every
	if err := layReadings(dir.FS(), rig, start, instants, every); err != nil {
		b.Fatal(err)
	}
	mark := fmt.Sprintf("load,name=pan kilogram=12.4,newton=121.6,shown=\"12.40 kg\",step=\"l1\" %d\n", start+600e9)
	for name, bytes := range map[string][]byte{"rig.yaml": text, "marks.lp": []byte(mark)} {
		if err := os.WriteFile(filepath.Join(run, name), bytes, 0o644); err != nil {
			b.Fatal(err)
		}
	}
	return run, rig
}

func layReadings(fsys segment.FS, rig *config.Rig, start int64, instants int, every int64) error {
	header := segment.Header{Run: "run-3", Boot: "past"}
	stamps := new(segment.Stamps)
	var w *segment.Writer
	var closed []string
	seal := func(at int64) error {
		if err := w.Close(segment.ClockState{Wall: at, Boot: at - start, Synced: true}); err != nil {
			return err
		}
		packed, err := segment.Compress(fsys, w.Number())
		w, closed = nil, append(closed, packed.Name)
		return err
	}
	number := 0
	for i := range instants {
		at := start + int64(i)*every
		clock := segment.ClockState{Wall: at, Boot: at - start, Synced: true}
		if w == nil {
			number++
			header.Clock = clock
			var err error
			if w, err = segment.NewWriter(fsys, segment.ReadingsDir, number, segment.WriterOptions{Header: header, Stamps: stamps}); err != nil {
				return err
			}
		}
		sag := 0.0
		if t := float64(at-start)/1e9 - 600; t > 0 {
			sag = 3.2 * (1 + 0.07*math.Log10(1+t/20))
		}
		for k := range rig.Gauges {
			mm := math.Round((1.5+sag/float64(k+1)+0.001*float64(i%3))*1000) / 1000
			if err := w.Indication(&segment.Shown{Gauge: rig.Gauges[k].Name, MM: mm, Time: at}); err != nil {
				return err
			}
		}
		if i%40 == 39 {
			if err := w.Checkpoint(clock); err != nil {
				return err
			}
		}
		if w.Size() >= 16e6 {
			if err := seal(at); err != nil {
				return err
			}
		}
	}
	if err := seal(start + int64(instants)*every); err != nil {
		return err
	}
	return segment.UpdateSums(fsys, closed...)
}

// opened is a desk and a page of the run, as after a restart.
func opened(b *testing.B, run string, rig *config.Rig) (d *desk.Desk, s *Server, closing func()) {
	b.Helper()
	dir, err := ingest.OpenDir(run, ingest.DirOptions{})
	if err != nil {
		b.Fatal(err)
	}
	now := ingest.SystemClock{}.Now()
	status := &ingest.Status{At: now, Run: "run-3", Closed: true, Last: make([]ingest.Last, len(rig.Gauges)+len(rig.Probes))}
	for i := range rig.Gauges {
		status.Last[i] = ingest.Last{Name: rig.Gauges[i].Name, Seen: true, Wall: now.Wall, MM: 5}
	}
	status.Last[len(rig.Gauges)] = ingest.Last{Name: "air", Probe: true}
	d, err = desk.New(desk.Options{Name: "slat-3", Rig: rig, FS: dir.FS(), Status: func() *ingest.Status { return status },
		Happen: func(ingest.Happening) bool { return true }, Start: now})
	if err != nil {
		b.Fatal(err)
	}
	if s, err = Listen(Options{Desks: []*desk.Desk{d}, Address: "127.0.0.1:0", Token: testToken}); err != nil {
		b.Fatal(err)
	}
	ctx, stop := context.WithCancel(context.Background())
	var running sync.WaitGroup
	running.Go(func() { d.Run(ctx) })
	running.Go(func() {
		if err := s.Run(ctx); err != nil {
			b.Error(err)
		}
	})
	return d, s, func() {
		stop()
		running.Wait()
		if err := dir.Close(); err != nil {
			b.Error(err)
		}
	}
}

// get fetches the page whole and says how long that took.
func get(b *testing.B, s *Server) (time.Duration, int) {
	b.Helper()
	began := time.Now()
	r, err := http.Get(s.URL())
	if err != nil {
		b.Fatal(err)
	}
	defer r.Body.Close()
	body, err := io.ReadAll(r.Body)
	if err != nil || r.StatusCode != http.StatusOK {
		b.Fatal(r.Status, err)
	}
	return time.Since(began), len(body)
}

func waitWhole(b *testing.B, d *desk.Desk) {
	b.Helper()
	began := time.Now()
	for !d.Snapshot().Whole {
		if time.Since(began) > time.Hour {
			b.Fatal("the bins never come")
		}
		time.Sleep(5 * time.Millisecond)
	}
}

// processor is the processor time that this process has used, s.
func processor(b *testing.B) float64 {
	b.Helper()
	var u syscall.Rusage
	if err := syscall.Getrusage(syscall.RUSAGE_SELF, &u); err != nil {
		b.Skip("processor time cannot be told here")
	}
	return time.Duration(u.Utime.Nano() + u.Stime.Nano()).Seconds()
}

// BenchmarkOpening opens the page of a long run, again and again. Beside the time
// of an opening it tells, from one start without summaries and one with them:
// how long it takes until everything is on the page and how much processor time, the slowest opening while
// the run is still being read, and the memory then.
func BenchmarkOpening(b *testing.B) {
	run, rig := longRun(b, *readings)
	if err := os.RemoveAll(filepath.Join(run, "report")); err != nil {
		b.Fatal(err)
	}
	began, used := time.Now(), processor(b)
	d, s, closing := opened(b, run, rig)
	var during []time.Duration
	for !d.Snapshot().Whole {
		took, _ := get(b, s)
		during = append(during, took)
		time.Sleep(20 * time.Millisecond)
	}
	anew, anewUsed := time.Since(began), processor(b)-used
	closing()
	began, used = time.Now(), processor(b)
	d, s, closing = opened(b, run, rig)
	defer closing()
	waitWhole(b, d)
	again, againUsed := time.Since(began), processor(b)-used
	runtime.GC()
	var memory runtime.MemStats
	runtime.ReadMemStats(&memory)
	size := 0
	used = processor(b)
	var all []time.Duration
	for b.Loop() {
		var took time.Duration
		took, size = get(b, s)
		all = append(all, took)
	}
	b.ReportMetric(1000*(processor(b)-used)/float64(len(all)), "cpu-ms/opening")
	b.ReportMetric(anewUsed, "cpu-s-anew")
	b.ReportMetric(againUsed, "cpu-s-again")
	slices.Sort(all)
	b.ReportMetric(float64(all[len(all)-1].Microseconds())/1000, "ms-slowest")
	b.ReportMetric(anew.Seconds(), "s-anew")
	b.ReportMetric(again.Seconds(), "s-again")
	if len(during) > 0 {
		b.ReportMetric(float64(slices.Max(during).Microseconds())/1000, "ms-slowest-while-reading")
	}
	b.ReportMetric(float64(size), "page-bytes")
	b.ReportMetric(float64(memory.HeapAlloc)/1e6, "heap-MB")
}
