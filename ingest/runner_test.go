package ingest

import (
	"context"
	"fmt"
	"io/fs"
	"sync"
	"testing"
	"time"

	"go.uber.org/goleak"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/ingest/segment"
	"gaugelog/ingest/segment/segmenttest"
)

func TestMain(m *testing.M) { goleak.VerifyTestMain(m) }

// liveOptions records in real time with the machine's own clock.
func liveOptions(fsys segment.FS, rig *config.Rig) Options {
	o := testOptions(fsys, rig)
	o.Clock, o.Start, o.Live = SystemClock{}, SystemClock{}.Now(), true
	return o
}

func TestRunnerKeepsWhatComesBeforeTheEnd(t *testing.T) {
	var recorders []*Recorder
	var disks []*segmenttest.FS
	for range 2 {
		disk := segmenttest.New()
		o := liveOptions(disk, testRig(2, config.Sampling{All: true}))
		o.Compress = true
		disks = append(disks, disk)
		recorders = append(recorders, mustOpen(t, o))
	}
	tried, ready := make(chan struct{}), make(chan struct{})
	r, err := NewRunner(RunnerOptions{Recorders: recorders, Clock: SystemClock{}, PortsTried: tried, Ready: func() { close(ready) }})
	must(t, err)
	ctx, cancel := context.WithCancel(t.Context())
	ended := make(chan error, 1)
	go func() { ended <- r.Run(ctx) }()
	close(tried)
	<-ready
	const each = 1000
	var ports sync.WaitGroup
	for p := range 4 {
		ports.Go(func() {
			for i := range each {
				d := indication(fmt.Sprintf("g%d", p%2), float64(i)/1000, device.RealClock{}.Now())
				d.Rig = p / 2
				r.Take(d)
			}
		})
	}
	ports.Wait()
	cancel()
	must(t, <-ended)
	for i, disk := range disks {
		for g, records := range stored(t, disk) {
			if len(records) != each {
				t.Errorf("rig %d gauge %s: %d readings on disk, %d were sent", i, g, len(records), each)
			}
			for j := 1; j < len(records); j++ {
				if records[j].Time <= records[j-1].Time {
					t.Fatalf("rig %d gauge %s: stamps do not increase", i, g)
				}
			}
		}
		if s := recorders[i].Status(); !s.Closed || s.Stored != 2*each || s.Dropped != 0 || s.Waiting != 0 {
			t.Errorf("rig %d: status %+v", i, s)
		}
	}
}

func TestRunnerSeesAMarkOfAnotherProcess(t *testing.T) {
	d, err := OpenDir(t.TempDir(), DirOptions{})
	must(t, err)
	defer d.Close()
	rig := testRig(1, config.Sampling{Dense: duration(3600), Around: duration(60), Longest: duration(7200)})
	o := liveOptions(d.FS(), rig)
	o.Lock, o.DiskFree, o.LeastFree = d.Lock("a test"), d.DiskFree, 1
	rec := mustOpen(t, o)
	r, err := NewRunner(RunnerOptions{Recorders: []*Recorder{rec}, Clock: SystemClock{}})
	must(t, err)
	ctx, cancel := context.WithCancel(t.Context())
	ended := make(chan error, 1)
	go func() { ended <- r.Run(ctx) }()
	for i := range 20 {
		r.Take(indication("g0", float64(i)/1000, device.RealClock{}.Now()))
	}
	// Only the first reading is stored, until the mark calls the others back.
	_, err = d.AppendMark(Mark{Note: "the load went on half a minute ago"}, SystemClock{})
	must(t, err)
	entered := time.Now()
	for rec.Status().Stored < 20 {
		if time.Since(entered) > 5*time.Second {
			t.Fatalf("the mark was not seen within 5 s: %+v", rec.Status())
		}
		time.Sleep(10 * time.Millisecond)
	}
	t.Logf("seen after %s", time.Since(entered).Round(time.Millisecond))
	cancel()
	must(t, <-ended)
	if n := len(stored(t, d.FS())["g0"]); n != 20 {
		t.Errorf("%d readings stored", n)
	}
}

// slowDisk holds up every sync until it is let go.
type slowDisk struct {
	segment.FS
	gate chan struct{}
}

type slowFile struct {
	segment.File
	gate chan struct{}
}

func (d slowDisk) Create(name string) (segment.File, error) {
	f, err := d.FS.Create(name)
	return slowFile{f, d.gate}, err
}

func (f slowFile) Sync() error {
	<-f.gate
	return f.File.Sync()
}

func (d slowDisk) ReadDir(dir string) ([]fs.DirEntry, error) { return d.FS.ReadDir(dir) }

// TestReadingDoesNotWaitForTheDisk holds the disk for a minute of recording:
// Handle returns, what finds no room is counted, and all is recorded.
func TestReadingDoesNotWaitForTheDisk(t *testing.T) {
	mem := segmenttest.New()
	gate := make(chan struct{})
	o := testOptions(slowDisk{mem, gate}, testRig(1, config.Sampling{All: true}))
	clock := clockAt(testStart)
	o.Clock, o.Live, o.MostWaiting = clock, true, 50
	letGo := make(chan struct{})
	go func() { // the disk works while the run is opened
		for {
			select {
			case gate <- struct{}{}:
			case <-letGo:
				return
			}
		}
	}()
	r := mustOpen(t, o)
	letGo <- struct{}{}
	at := testStart
	for i := range 60 {
		at = later(at, time.Second)
		clock.At = at
		must(t, r.Handle(Seen(indication("g0", float64(i)/1000, at))))
	}
	if s := r.Status(); s.Fault != "the disk is slow" || s.Waiting != 50 || s.Dropped != 10 {
		t.Errorf("status while the disk is held: %+v", s)
	}
	close(gate)
	for r.Status().Fault != "" {
		at = later(at, time.Second)
		clock.At = at
		must(t, r.Handle(TickAt(at)))
		time.Sleep(time.Millisecond)
	}
	must(t, r.Close(at))
	if n := len(stored(t, mem)["g0"]); n != 50 {
		t.Errorf("%d readings stored, want 50", n)
	}
	e := events(t, mem)
	for _, want := range []string{"disk-slow:", "disk-back: a sync ended after", "dropped g0:"} {
		if !has(e, want) {
			t.Errorf("no event %q among %q", want, e)
		}
	}
}

func TestTakeNeverBlocks(t *testing.T) {
	mem := segmenttest.New()
	rec := mustOpen(t, liveOptions(mem, testRig(1, config.Sampling{All: true})))
	r, err := NewRunner(RunnerOptions{Recorders: []*Recorder{rec}, Clock: SystemClock{}, Queue: 10})
	must(t, err)
	for i := range 25 { // nobody takes them out yet
		r.Take(indication("g0", float64(i), device.RealClock{}.Now()))
	}
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	must(t, r.Run(ctx))
	if n := len(stored(t, mem)["g0"]); n != 10 {
		t.Errorf("%d readings stored, the queue holds 10", n)
	}
	if e := events(t, mem); !has(e, "dropped: readings dropped: they came faster") {
		t.Errorf("the 15 dropped ones are not among %q", e)
	}
}
