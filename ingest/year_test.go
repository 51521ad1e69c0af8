package ingest

import (
	"flag"
	"fmt"
	"math/rand/v2"
	"slices"
	"syscall"
	"testing"
	"time"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/ingest/segment"
	"gaugelog/ingest/segment/segmenttest"
)

// yearEvery is the interval of the readings in TestAYear: an hour makes 70,000
// of them, `go test ./ingest -run AYear -year-every 60s` four million.
var yearEvery = flag.Duration("year-every", time.Hour, "the interval of the readings of a simulated year")

// TestAYear records eight gauges for a year in virtual time: twelve load
// changes, two power cuts, a full disk and a clock set back by an hour and seven seconds. All
// that was acknowledged is there once, and what is missing is told.
func TestAYear(t *testing.T) {
	began := time.Now()
	rig := testRig(8, config.Sampling{All: true})
	rig.Record.Roll.Age, rig.Record.Roll.Size.Value = *duration(30 * 86400), 50_000
	disk := segmenttest.New()
	o := testOptions(disk, rig)
	r := mustOpen(t, o)
	rng := rand.New(rand.NewPCG(1, 2))
	at, ready, readings := testStart, o.Start.Boot, 0
	sent := map[int64]bool{} // stamps of g0, by the clock of their time
	var names []string
	for g := range 8 {
		names = append(names, fmt.Sprintf("g%d", g))
	}
	total := int(365 * 24 * time.Hour / *yearEvery)
	acked := 0
	ackedNow := func() int { return int((r.lastSynced - ready) / int64(*yearEvery)) }
	base := 0 // readings of g0 sent before the present recorder
	here := 0 // readings of g0 sent to it
	var lost int
	for i := range total {
		at = later(at, *yearEvery)
		switch i {
		case total / 3, total / 2: // the power fails and comes back ten minutes later
			acked += ackedNow()
			lost += here - ackedNow()
			disk = disk.Crash(rng, false)
			at = later(at, 10*time.Minute)
			o.FS, o.Start = disk, at
			o.Clock = &FixedClock{Known: ClockState{BootID: fmt.Sprint("boot-", i), Synchronised: true}}
			r, ready, base, here = mustOpen(t, o), at.Boot, base+here, 0
		case total * 2 / 3:
			disk.Inject(&segmenttest.Failure{At: 1, Persistent: true, Only: []string{"write", "create"}, Err: syscall.ENOSPC})
		case total*2/3 + 30:
			disk.Inject(nil)
		case total * 3 / 4:
			at.Wall -= int64(time.Hour + 7*time.Second)
		}
		for _, name := range names {
			must(t, r.Handle(Seen(indication(name, float64(i%1000)/1000, at))))
			readings++
		}
		sent[at.Wall] = true
		here++
		if i%(total/12) == total/24 {
			_, err := AppendMark(disk, Mark{Loads: []LoadValue{{Name: "pan", Newton: float64(i), Shown: "x"}}}, at, ClockState{Synchronised: true})
			if err != nil {
				t.Fatal(err)
			}
			must(t, r.Handle(Event{Kind: MarkSeen, At: at, Mark: Mark{ID: "m1", Time: at.Wall}}))
		}
		must(t, r.Handle(TickAt(device.Instant{Wall: at.Wall + int64(time.Minute), Boot: at.Boot + int64(time.Minute)})))
	}
	must(t, r.Close(later(at, time.Minute)))
	acked += here
	v, err := segment.Verify(disk)
	must(t, err)
	if !v.Whole() {
		t.Fatalf("damage: %v", v.Damage)
	}
	got := stored(t, disk)["g0"]
	slices.SortFunc(got, func(a, b segment.Record) int { return int(a.Raw - b.Raw) })
	for i, rec := range got {
		if !sent[rec.Raw] || i > 0 && got[i-1].Raw == rec.Raw {
			t.Fatalf("%d was never sent, or is stored twice", rec.Raw)
		}
	}
	if len(got) < acked || len(got) > total {
		t.Errorf("%d readings of g0 stored, %d acknowledged, %d sent", len(got), acked, total)
	}
	marks, err := ListMarks(disk)
	must(t, err)
	if len(marks) != 12 {
		t.Errorf("%d marks, want 12", len(marks))
	}
	e := events(t, disk)
	for _, want := range []string{"gap: nothing was recorded", "disk-full: the disk is full", "disk-back", "clock-stepped: the wall clock was stepped by -3607.000 s"} {
		if !has(e, want) {
			t.Errorf("no event %q", want)
		}
	}
	t.Logf("%d readings in %s; %d of g0 stored of %d sent, at most %d lost to two power cuts; %d segments", readings,
		time.Since(began).Round(time.Millisecond), len(got), total, lost, v.Files)
}
