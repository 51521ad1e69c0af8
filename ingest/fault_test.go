package ingest

import (
	"errors"
	"flag"
	"fmt"
	"math/rand/v2"
	"syscall"
	"testing"
	"time"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/ingest/segment"
	"gaugelog/ingest/segment/segmenttest"
)

// bench drives one recorder with readings whose values tell them apart.
type bench struct {
	t    testing.TB
	r    *Recorder
	rng  *rand.Rand
	at   device.Instant
	sent map[string][]int64 // stamps by gauge; the n-th reading has the value n/1000
	// acked is how many readings of each gauge are on disk by the recorder's word.
	acked map[string]int
}

func newBench(t testing.TB, seed uint64) *bench {
	return &bench{t: t, rng: rand.New(rand.NewPCG(seed, 1)), at: testStart,
		sent: map[string][]int64{}, acked: map[string]int{}}
}

func (b *bench) step() {
	b.at = later(b.at, time.Duration(1+b.rng.IntN(1500))*time.Millisecond)
	gauge := fmt.Sprintf("g%d", b.rng.IntN(2))
	n := len(b.sent[gauge])
	b.sent[gauge] = append(b.sent[gauge], b.at.Wall)
	must(b.t, b.r.Handle(Seen(indication(gauge, float64(n)/1000, b.at))))
	b.note()
}

func (b *bench) note() {
	synced := b.r.lastSynced - testStart.Boot + testStart.Wall
	for g, stamps := range b.sent {
		for b.acked[g] < len(stamps) && stamps[b.acked[g]] <= synced {
			b.acked[g]++
		}
	}
}

// check reads the folder: nothing in it but what was sent, each at most once
// and in order, and all that was acknowledged. It returns how many there are.
func (b *bench) check(what string, fsys segment.FS) int {
	b.t.Helper()
	v, err := segment.Verify(fsys)
	must(b.t, err)
	if !v.Whole() {
		b.t.Fatalf("%s: damage: %v", what, v.Damage)
	}
	got := stored(b.t, fsys)
	total := 0
	for g, records := range got {
		stamps := b.sent[g]
		last := -1
		for _, rec := range records {
			n := int(rec.MM*1000 + 0.5)
			if n <= last || n >= len(stamps) || stamps[n] != rec.Time {
				b.t.Fatalf("%s: gauge %s: reading %d at %d behind reading %d", what, g, n, rec.Time, last)
			}
			last = n
		}
		if len(records) < b.acked[g] {
			b.t.Fatalf("%s: gauge %s: %d readings on disk, %d were acknowledged", what, g, len(records), b.acked[g])
		}
		for n := range b.acked[g] {
			if records[n].Time != stamps[n] {
				b.t.Fatalf("%s: gauge %s: acknowledged reading %d is missing", what, g, n)
			}
		}
		total += len(records)
	}
	for g, n := range b.acked {
		if n > 0 && len(got[g]) == 0 {
			b.t.Fatalf("%s: gauge %s: all %d acknowledged readings are missing", what, g, n)
		}
	}
	return total
}

func faultRig() *config.Rig {
	rig := testRig(2, config.Sampling{All: true})
	rig.Record.Sync = *duration(3)
	rig.Record.Roll.Age = *duration(20)
	return rig
}

const faultSteps = 40

// stride chooses which calls the sweeps meet: `go test ./ingest -run
// 'Crash|OneFault' -stride 1` meets all of them.
var stride = flag.Int("stride", 6, "meet only each n-th call in the fault sweeps")

// compressEach is how rarely the fault tests compress: it takes most of their
// time. An odd number, so that all parts of a run meet both.
const compressEach = 7

// TestCrashAtEveryCall cuts the power at each call to the file system in turn:
// every acknowledged reading is there exactly once, the folder is whole, and
// the run goes on in it.
func TestCrashAtEveryCall(t *testing.T) {
	calls := countCalls(t, testOptions(nil, faultRig()))
	for cut := 1; cut <= calls; cut += *stride {
		mem := segmenttest.New()
		b := newBench(t, 7)
		o := testOptions(mem, faultRig())
		o.Compress = cut%compressEach == 0
		mem.Inject(&segmenttest.Failure{At: cut, Persistent: true, Err: errors.New("power cut")})
		r, err := Open(o)
		if err == nil {
			b.r = r
			for range faultSteps {
				b.step()
			}
			_ = r.Close(b.at) // the power is off
			b.note()
		}
		for seed := range uint64(2) {
			rng := rand.New(rand.NewPCG(seed, uint64(cut)))
			after := mem.Crash(rng, seed == 0)
			what := fmt.Sprintf("cut at call %d, crash %d", cut, seed)
			before := 0
			if b.r != nil {
				before = b.check(what, after)
			}
			goOn(t, what, o, after, before)
		}
	}
	t.Logf("each %d. of %d calls cut, 2 crashes each", *stride, calls)
}

// goOn records 10 more readings into what a crash left.
func goOn(t *testing.T, what string, o Options, fsys segment.FS, before int) {
	t.Helper()
	o.FS, o.Start = fsys, later(testStart, time.Hour)
	r, err := Open(o)
	if err != nil {
		t.Fatalf("%s: going on: %v", what, err)
	}
	for i := range 10 {
		must(t, r.Handle(Seen(indication("g0", 9, later(o.Start, time.Duration(i)*time.Second)))))
	}
	if err := r.Close(later(o.Start, time.Minute)); err != nil {
		t.Fatalf("%s: closing: %v", what, err)
	}
	total := 0
	for _, records := range stored(t, fsys) {
		total += len(records)
	}
	if total != before+10 {
		t.Fatalf("%s: %d readings after going on, want %d+10", what, total, before)
	}
	v, err := segment.Verify(fsys)
	must(t, err)
	if !v.Whole() {
		t.Fatalf("%s: damage after going on: %v", what, v.Damage)
	}
}

func countCalls(t *testing.T, o Options) int {
	most := 0
	for _, compress := range []bool{false, true} {
		mem := segmenttest.New()
		o.FS, o.Compress = mem, compress
		mem.Inject(&segmenttest.Failure{})
		b := newBench(t, 7)
		b.r = mustOpen(t, o)
		for range faultSteps {
			b.step()
		}
		must(t, b.r.Close(b.at))
		most = max(most, mem.Calls())
	}
	return most
}

// TestOneFaultAtEveryCall lets each call fail once in turn. Whatever fails,
// nothing is lost, because memory still has it: not even in the last sync.
func TestOneFaultAtEveryCall(t *testing.T) {
	for _, fault := range []error{syscall.EIO, syscall.ENOSPC} {
		calls := countCalls(t, testOptions(nil, faultRig()))
		refused := 0
		for at := 1; at <= calls; at += *stride {
			mem := segmenttest.New()
			b := newBench(t, 7)
			o := testOptions(mem, faultRig())
			o.Compress = at%compressEach == 0
			mem.Inject(&segmenttest.Failure{At: at, Err: fault})
			r, err := Open(o)
			if err != nil {
				refused++ // a recording does not begin on a disk that fails
				continue
			}
			b.r = r
			for range faultSteps {
				b.step()
			}
			err = r.Close(b.at)
			mem.Inject(nil)
			what := fmt.Sprintf("%v at call %d", fault, at)
			if total := b.check(what, mem); total != faultSteps {
				t.Fatalf("%s: %d of %d readings, Close says %v", what, total, faultSteps, err)
			}
		}
		t.Logf("%v: each %d. of %d calls, %d refused at the start, no reading lost in the others", fault, *stride, calls, refused)
	}
}

// TestEveryCallFailsForGood lets every call fail from one in turn on, cuts the
// power, and lets one more call fail while the next recorder begins and records.
// What was acknowledged before either is there once, and a third recorder, on a
// disk that is well again, goes on.
func TestEveryCallFailsForGood(t *testing.T) {
	for _, fault := range []error{syscall.EIO, syscall.ENOSPC} {
		calls := countCalls(t, testOptions(nil, faultRig()))
		again, refused := 0, 0
		for at := 1; at <= calls; at += *stride {
			mem := segmenttest.New()
			b := newBench(t, 11)
			o := testOptions(mem, faultRig())
			o.Compress = at%compressEach == 0
			mem.Inject(&segmenttest.Failure{At: at, Persistent: true, Err: fault})
			if r, err := Open(o); err == nil {
				b.r = r
				for range faultSteps {
					b.step()
				}
				if err := r.Close(b.at); err == nil && b.acked["g0"]+b.acked["g1"] < faultSteps {
					t.Fatalf("%v from call %d on: Close says nothing of what it could not save", fault, at)
				}
			}
			rng := rand.New(rand.NewPCG(3, uint64(at)))
			for range max(1, secondFaults/(*stride)) {
				second := 1 + rng.IntN(calls)
				again++
				if !b.recovers(o, mem.Crash(rng, rng.IntN(2) == 0), fault, second, fmt.Sprintf("%v from call %d on, then call %d", fault, at, second)) {
					refused++
				}
			}
		}
		t.Logf("%v: from each %d. of %d calls on; one more fault in %d recoveries, %d of which refused to begin", fault, *stride, calls, again, refused)
	}
}

// secondFaults is in how many recoveries of each folder one more call fails
// where none is left out.
const secondFaults = 3

// recovers begins a second recorder whose call of that number fails, and a
// third one behind it; false where the second did not begin.
func (b *bench) recovers(o Options, disk *segmenttest.FS, fault error, call int, what string) bool {
	b.t.Helper()
	before := 0
	if b.r != nil { // there is a run
		before = b.check(what, disk)
	}
	o.FS, o.Start = disk, later(testStart, time.Hour)
	disk.Inject(&segmenttest.Failure{At: call, Err: fault})
	r, err := Open(o)
	began := err == nil
	if began {
		now := o.Start
		for i := range 20 {
			now = later(now, time.Second)
			must(b.t, r.Handle(Seen(indication("g1", 100+float64(i), now))))
		}
		_ = r.Close(now) // one fault is mended, or is of something without readings
	}
	disk.Inject(nil)
	o.Start = later(testStart, 2*time.Hour)
	r = mustOpen(b.t, o)
	must(b.t, r.Handle(Seen(indication("g1", 200, later(o.Start, time.Second)))))
	if err := r.Close(later(o.Start, time.Minute)); err != nil {
		b.t.Fatalf("%s: the third recorder: %v", what, err)
	}
	v, err := segment.Verify(disk)
	must(b.t, err)
	if !v.Whole() {
		b.t.Fatalf("%s: damage: %v", what, v.Damage)
	}
	total := 0
	for _, records := range stored(b.t, disk) {
		total += len(records)
	}
	want := before + 1
	if began {
		want += 20
	}
	if total != want {
		b.t.Fatalf("%s: %d readings in the end, want %d", what, total, want)
	}
	return began
}

// TestFullDisk fills the disk for ten minutes: nothing is lost while memory
// holds, what did not fit is counted, and the recording goes on by itself.
func TestFullDisk(t *testing.T) {
	mem := segmenttest.New()
	o := testOptions(mem, testRig(1, config.Sampling{All: true}))
	o.MostWaiting = 100
	r := mustOpen(t, o)
	at := testStart
	read := func(from, to int) {
		for i := from; i < to; i++ {
			at = later(at, time.Second)
			must(t, r.Handle(Seen(indication("g0", float64(i)/1000, at))))
		}
	}
	read(0, 60)
	mem.Inject(&segmenttest.Failure{At: 1, Persistent: true, Only: []string{"write", "create", "append"}, Err: syscall.ENOSPC})
	read(60, 660)
	mem.Inject(nil)
	read(660, 800)
	must(t, r.Close(at))
	got := stored(t, mem)["g0"]
	dropped := int(r.lost)
	if dropped == 0 || len(got)+dropped != 800 {
		t.Errorf("%d readings stored and %d dropped, 800 were sent", len(got), dropped)
	}
	e := events(t, mem)
	for _, want := range []string{"disk-full: the disk is full", "disk-back: the disk takes readings again", "dropped g0:"} {
		if !has(e, want) {
			t.Errorf("no event %q among %q", want, e)
		}
	}
	if n := len(mem.Names()); n > 8 {
		t.Errorf("a full disk left %d files: %v", n, mem.Names())
	}
}
