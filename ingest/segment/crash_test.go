package segment_test

import (
	"errors"
	"fmt"
	"math/rand/v2"
	"slices"
	"testing"

	"gaugelog/ingest/segment"
	"gaugelog/ingest/segment/segmenttest"
)

// recorder is the trivial program the crash and fault tests run: it writes
// readings, goes on in a new segment after an error, rolls and compresses.
type recorder struct {
	fs     *segmenttest.FS
	w      *segment.Writer
	next   int // number of the next reading
	acked  int // all readings before it are promised
	marks  int // marks that were acknowledged
	log    *segment.Log
	errors int
}

func (r *recorder) clock() segment.ClockState { return synced(nth(r.next).time) }

// start begins a new process on the folder: a new segment.
func (r *recorder) start() error {
	number, err := segment.NextNumber(r.fs, segment.ReadingsDir)
	if err != nil {
		return err
	}
	h := header()
	h.Clock = r.clock()
	r.w, err = segment.NewWriter(r.fs, segment.ReadingsDir, number, segment.WriterOptions{Header: h})
	if err != nil {
		r.w = nil
		return err
	}
	r.log, err = segment.OpenLog(r.fs, segment.MarksFile, h)
	return err
}

// append takes n readings into memory.
func (r *recorder) append(t testing.TB, n int) {
	if r.w.Err() != nil && r.goOn() != nil {
		return // no disk: a real recorder would keep them in its own memory
	}
	for range n {
		in := nth(r.next)
		if err := r.w.Indication(&segment.Shown{Gauge: in.gauge, MM: in.mm, Time: in.time}); err != nil {
			t.Fatal(err)
		}
		r.next++
	}
}

// sync makes what was appended durable; after a failure it goes on elsewhere.
func (r *recorder) sync() error {
	if r.w.Err() != nil {
		w, err := segment.Continue(r.w, r.clock())
		if err != nil {
			return err
		}
		r.w = w
	}
	if err := r.w.Checkpoint(r.clock()); err != nil {
		return err
	}
	r.acked = r.next
	return nil
}

func (r *recorder) mark() error {
	e := segment.Entry{Point: &segment.Point{Measurement: "note", Fields: []segment.Field{{Key: "n", Value: int64(r.marks)}}}, Time: nth(r.next).time}
	if err := r.log.Append(r.clock(), e); err != nil {
		return err
	}
	r.marks++
	return nil
}

// roll closes the segment, starts the next and compresses the old one.
func (r *recorder) roll() error {
	old := r.w
	if err := old.Close(r.clock()); err != nil {
		return err
	}
	r.acked = r.next
	h := header()
	h.Clock = r.clock()
	w, err := segment.NewWriter(r.fs, segment.ReadingsDir, old.Number()+1, segment.WriterOptions{Header: h, Stamps: old.Stamps()})
	if err != nil {
		return err
	}
	r.w = w
	if _, err := segment.Compress(r.fs, old.Number()); err != nil {
		return err
	}
	names := []string{old.Name() + ".zst"}
	if r.marks > 0 {
		names = append(names, segment.MarksFile)
	}
	return segment.UpdateSums(r.fs, names...)
}

// check reads the folder back: each promised reading exactly once and in
// order, of the others at most one each, nothing else, no damage.
func (r *recorder) check(t *testing.T, fs segment.FS, what string) {
	t.Helper()
	got, report := read(t, fs, segment.ReadOptions{Workers: 1})
	if len(report.Damage) > 0 {
		t.Fatalf("%s: damage: %v", what, report.Damage)
	}
	if len(got) < r.acked || len(got) > r.next {
		t.Fatalf("%s: %d readings, %d were promised, %d appended", what, len(got), r.acked, r.next)
	}
	if !slices.Equal(got, expect(0, len(got))) {
		t.Fatalf("%s: the readings are not those appended, each once", what)
	}
	d, err := segment.OpenFolder(fs)
	if err != nil {
		t.Fatal(err)
	}
	marks, _, err := d.Log(segment.MarksFile)
	if err != nil {
		t.Fatal(err)
	}
	seen := map[int64]bool{}
	for _, m := range marks {
		v, _ := m.Point.Value("n")
		seen[v.(int64)] = true
	}
	for i := range r.marks {
		if !seen[int64(i)] {
			t.Fatalf("%s: mark %d of %d is lost", what, i, r.marks)
		}
	}
}

// Random operations, a crash now and then, against the model above: what was
// promised is there, each once, after each crash, and the next process goes on.
func TestNothingPromisedIsLostInACrash(t *testing.T) {
	runs := 120
	if campaign {
		runs = 20000
	}
	for seed := range runs {
		rng := rand.New(rand.NewPCG(uint64(seed), 3))
		r := &recorder{fs: segmenttest.New()}
		if err := r.start(); err != nil {
			t.Fatal(err)
		}
		for range 12 {
			var err error
			switch rng.IntN(8) {
			case 0:
				err = r.roll()
			case 1:
				err = r.mark()
			case 2, 3:
				err = r.sync()
			case 4:
				r.crash(t, rng, fmt.Sprintf("seed %d", seed))
			default:
				r.append(t, 1+rng.IntN(40))
			}
			if err != nil {
				t.Fatalf("seed %d: %v", seed, err)
			}
		}
		r.check(t, r.fs, fmt.Sprintf("seed %d, at the end", seed))
	}
}

// crash cuts the power, checks what is left, and starts the next process there.
func (r *recorder) crash(t *testing.T, rng *rand.Rand, what string) {
	t.Helper()
	r.fs = r.fs.Crash(rng, rng.IntN(4) == 0)
	r.check(t, r.fs, what+", after a crash")
	got, _ := read(t, r.fs, segment.ReadOptions{Workers: 1})
	r.next, r.acked = len(got), len(got)
	if err := r.start(); err != nil {
		t.Fatalf("%s: %v", what, err)
	}
}

// scenario is a fixed run of all operations in which any call may fail. It
// tries again what failed, three times, and gives up then.
func (r *recorder) scenario(t *testing.T) {
	again := func(op func() error) {
		for range 3 {
			if err := op(); err == nil {
				return
			}
			r.errors++
		}
	}
	again(r.start)
	if r.w == nil || r.log == nil {
		return
	}
	for round := range 4 {
		r.append(t, 10)
		again(r.sync)
		again(r.mark)
		r.append(t, 5)
		if round == 1 && r.w.Err() == nil {
			if err := r.roll(); err != nil {
				r.errors++
			}
		}
		again(func() error { return r.goOn() })
	}
	again(r.sync)
}

// goOn starts a segment where roll left none.
func (r *recorder) goOn() error {
	if r.w.Err() == nil {
		return nil
	}
	if len(r.w.Unsynced()) > 0 {
		return r.sync()
	}
	return r.start()
}

// Every call fails in turn: once, and from then on; and once more during what
// follows. Nothing promised is lost then, nor after a crash, nor with the disk
// well again.
func TestAnyCallMayFail(t *testing.T) {
	count := &recorder{fs: segmenttest.New()}
	count.fs.Inject(&segmenttest.Failure{})
	count.scenario(t)
	calls := count.fs.Calls()
	if count.errors > 0 || count.acked != count.next {
		t.Fatalf("the scenario fails by itself: %d errors", count.errors)
	}
	t.Logf("%d calls", calls)
	for at := 1; at <= calls; at++ {
		for _, persistent := range []bool{false, true} {
			r := &recorder{fs: segmenttest.New()}
			r.fs.Inject(&segmenttest.Failure{At: at, Persistent: persistent, Err: segmenttest.ErrInjected})
			r.scenario(t)
			what := fmt.Sprintf("call %d of %d failed (persistently %v)", at, calls, persistent)
			r.fs.Inject(nil)
			if !persistent && r.acked != r.next {
				t.Fatalf("%s once: %d readings of %d on disk at the end", what, r.acked, r.next)
			}
			r.check(t, r.fs, what)
			for seed := range 1 {
				rng := rand.New(rand.NewPCG(uint64(at), uint64(seed)))
				r.check(t, r.fs.Crash(rng, false), what+", then a crash")
			}
			r.recoverWithFaults(t, what)
		}
	}
}

// recoverWithFaults crashes and lets each call of the next process's start and
// first sync fail.
func (r *recorder) recoverWithFaults(t *testing.T, what string) {
	most := 1
	if campaign {
		most = 30
	}
	rng := rand.New(rand.NewPCG(7, 8))
	for second := 1; second <= most; second++ {
		n := &recorder{fs: r.fs.Crash(rng, false), marks: r.marks}
		got, _ := read(t, n.fs, segment.ReadOptions{Workers: 1})
		n.next, n.acked = len(got), len(got)
		at := second
		if !campaign {
			at = 1 + rng.IntN(30)
		}
		n.fs.Inject(&segmenttest.Failure{At: at, Err: segmenttest.ErrInjected})
		n.scenario(t)
		n.fs.Inject(nil)
		n.check(t, n.fs, fmt.Sprintf("%s, crash, then call %d failed", what, at))
	}
}

// A Sync that failed once is not tried again on its file: the system reports
// success the second time, and the bytes are gone.
func TestAFailedSyncIsNotTriedAgain(t *testing.T) {
	fs := segmenttest.New()
	w := fill(t, fs, 1, 0, 20, 10, false)
	for i := 20; i < 25; i++ {
		in := nth(i)
		if err := w.Indication(&segment.Shown{Gauge: in.gauge, MM: in.mm, Time: in.time}); err != nil {
			t.Fatal(err)
		}
	}
	fs.Inject(&segmenttest.Failure{At: 1, Only: []string{"sync"}, Err: segmenttest.ErrInjected})
	err := w.Checkpoint(synced(nth(25).time))
	var werr *segment.WriteError
	if !errors.As(err, &werr) || werr.Op != "sync" || !errors.Is(err, segmenttest.ErrInjected) {
		t.Fatalf("%v", err)
	}
	size := len(fs.Bytes(w.Name()))
	if again := w.Checkpoint(synced(nth(25).time)); again != err || len(fs.Bytes(w.Name())) != size {
		t.Fatalf("a second try: %v", again)
	}
	if n := w.UnsyncedLines(); n != 5 {
		t.Fatalf("%d lines kept", n)
	}
	next, err := segment.Continue(w, synced(nth(25).time))
	if err != nil {
		t.Fatal(err)
	}
	if err := next.Close(synced(nth(25).time)); err != nil {
		t.Fatal(err)
	}
	// Before a crash the old file still shows the block that was never synced;
	// behind one it does not. Each reading counts once in both.
	for _, f := range []segment.FS{fs, fs.Crash(rand.New(rand.NewPCG(1, 1)), false)} {
		got, report := read(t, f, segment.ReadOptions{})
		if !slices.Equal(got, expect(0, 25)) || len(report.Damage) > 0 {
			t.Fatalf("%d readings, %v", len(got), report.Damage)
		}
	}
}

// Power cut at any call of Compress: one whole file is always left, and a
// second try finishes.
func TestCompressMayBeCutAnywhere(t *testing.T) {
	for at := 1; ; at++ {
		fs := segmenttest.New()
		fill(t, fs, 1, 0, 50, 10, true)
		fs.Inject(&segmenttest.Failure{At: at, Persistent: true, Err: segmenttest.ErrInjected})
		_, err := segment.Compress(fs, 1)
		done := fs.Calls() < at
		fs.Inject(nil)
		for seed := range 40 {
			c := fs.Crash(rand.New(rand.NewPCG(uint64(at), uint64(seed))), false)
			for range 2 {
				got, report := read(t, c, segment.ReadOptions{Workers: 1})
				if !slices.Equal(got, expect(0, 50)) || len(report.Damage) > 0 {
					t.Fatalf("cut at call %d, seed %d: %d readings, %v, in %v", at, seed, len(got), report.Damage, c.Names())
				}
				if _, err := segment.Compress(c, 1); err != nil && c.Bytes("readings/000001.lp") != nil {
					t.Fatalf("cut at call %d, seed %d: trying again: %v", at, seed, err)
				}
			}
		}
		if done {
			if err != nil {
				t.Fatal(err)
			}
			return
		}
	}
}
