package ingest

import (
	"context"
	"runtime"
	"testing"
	"time"

	"gaugelog/config"
	"gaugelog/device"
)

// From the port's hand-over on, through the queue, the recorder's memory and
// sampling, to the segments that its writer syncs: a reading allocates nothing
// once the buffers have grown. What syncs and ticks allocate is spread over the
// readings between them and is less than one each.
func TestLiveRecordingAllocatesNothing(t *testing.T) {
	fsys, _ := osFS(t)
	rig := testRig(4, config.Sampling{All: true})
	rig.Record.Sync = *duration(0.05)
	o := liveOptions(fsys, rig)
	o.MostWaiting = 10_000_000
	rec := mustOpen(t, o)
	r, err := NewRunner(RunnerOptions{Recorders: []*Recorder{rec}, Clock: SystemClock{}})
	must(t, err)
	ctx, cancel := context.WithCancel(t.Context())
	ended := make(chan error, 1)
	go func() { ended <- r.Run(ctx) }()
	var clock device.RealClock
	names := []string{"g0", "g1", "g2", "g3"}
	n := 0
	some := func() {
		for range 1000 {
			n++
			r.Take(indication(names[n%4], 1.25, clock.Now()))
		}
		for r.Queued() > 0 {
			runtime.Gosched()
		}
	}
	for range 30 {
		some()
	}
	// Buffers go round between the recorder and its writer; each has grown to
	// what a sync holds once it was filled so far.
	for began := time.Now(); time.Since(began) < time.Second; time.Sleep(10 * time.Millisecond) {
		some()
	}
	const rounds = 100
	if a := testing.AllocsPerRun(rounds, some) / 1000; a > 0.01 {
		t.Errorf("%.4f allocations a reading", a)
	} else {
		t.Logf("%.4f allocations a reading", a)
	}
	cancel()
	must(t, <-ended)
	if s := rec.Status(); s.Stored != int64(n) || s.Dropped != 0 {
		t.Errorf("%d readings stored, %d dropped, of %d", s.Stored, s.Dropped, n)
	}
}
