package ingest

import (
	"fmt"
	"math"
	"slices"
	"testing"
	"time"

	"pgregory.net/rapid"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/ingest/segment"
	"gaugelog/ingest/segment/segmenttest"
)

// play records a signal of one gauge at an interval and returns what was
// stored, by time.
func play(t testing.TB, s config.Sampling, interval, length time.Duration, mm func(time.Duration) float64, marks map[time.Duration]time.Duration) []segment.Record {
	t.Helper()
	mem := segmenttest.New()
	r := mustOpen(t, testOptions(mem, testRig(1, s)))
	for d := time.Duration(0); d < length; d += interval {
		at := later(testStart, d)
		must(t, r.Handle(Seen(indication("g0", mm(d), at))))
		if of, ok := marks[d]; ok {
			must(t, r.Handle(Event{Kind: MarkSeen, At: at, Mark: Mark{ID: "m1", Time: later(testStart, of).Wall, Note: "a mark"}}))
		}
	}
	must(t, r.Close(later(testStart, length)))
	got := stored(t, mem)["g0"]
	slices.SortFunc(got, func(a, b segment.Record) int { return int(a.Time - b.Time) })
	for i := 1; i < len(got); i++ {
		if got[i].Time == got[i-1].Time {
			t.Fatalf("the reading at %d is stored twice", got[i].Time)
		}
	}
	for _, g := range got {
		if d := time.Duration(g.Time - testStart.Wall); g.MM != mm(d) || d%interval != 0 {
			t.Fatalf("at %s %g mm was stored, which is no reading", d, g.MM)
		}
	}
	return got
}

// between counts the stored readings in [from, to].
func between(got []segment.Record, from, to time.Duration) int {
	n := 0
	for _, g := range got {
		if d := time.Duration(g.Time - testStart.Wall); d >= from && d <= to {
			n++
		}
	}
	return n
}

func flat(time.Duration) float64 { return 1.25 }

func TestEveryPicksTheNearestReadings(t *testing.T) {
	for _, c := range []struct{ interval, every, length time.Duration }{
		{time.Second, time.Second, time.Hour},
		{100 * time.Millisecond, time.Second, 10 * time.Minute},
		{400 * time.Millisecond, time.Second, 10 * time.Minute},
		{300 * time.Millisecond, 7 * time.Second, 10 * time.Minute},
		{2 * time.Second, time.Second, time.Hour}, // slower than asked for: all
	} {
		got := play(t, config.Sampling{Every: duration(c.every.Seconds())}, c.interval, c.length, flat, nil)
		want := int(c.length / max(c.every, c.interval))
		if d := len(got) - want; d < -1 || d > 1 {
			t.Errorf("readings each %s, every %s: %d stored in %s, want %d", c.interval, c.every, len(got), c.length, want)
		}
		for i := 1; i < len(got); i++ {
			gap := time.Duration(got[i].Time - got[i-1].Time)
			if off := gap - max(c.every, c.interval); off < -c.interval || off > c.interval {
				t.Fatalf("readings each %s, every %s: an interval of %s", c.interval, c.every, gap)
			}
		}
	}
}

func TestDenseThenLogSpaced(t *testing.T) {
	s := config.Sampling{Dense: duration(1), Around: duration(600), PerDecade: number(50), Longest: duration(900), DeadBand: length(0.005)}
	jump := func(d time.Duration) float64 {
		if d >= 10*time.Hour {
			return 3
		}
		return 1
	}
	got := play(t, s, 500*time.Millisecond, 40*time.Hour, jump, nil)
	const at = 10 * time.Hour
	if n := between(got, at-10*time.Minute, at-time.Millisecond); n != 1200 {
		t.Errorf("%d readings in the ten minutes before the jump, all 1200 wanted", n)
	}
	if n := between(got, at, at+10*time.Minute); n < 600 || n > 602 {
		t.Errorf("%d readings in the ten minutes after the jump, want one a second", n)
	}
	// Behind, at a time u after the jump, the spacing is u(10^(1/50)-1), at most 15 min.
	share := math.Pow(10, 1.0/50) - 1
	last := time.Duration(0)
	for _, g := range got {
		d := time.Duration(g.Time-testStart.Wall) - at
		if d > 11*time.Minute {
			want := min(time.Duration(share*float64(last)), 15*time.Minute)
			if off := (d - last) - want; off < -time.Second || off > time.Second {
				t.Fatalf("%s after the jump the interval is %s, want %s", last, d-last, want)
			}
		}
		last = d
	}
	if n := between(got, at+30*time.Minute, 40*time.Hour); n > 220 {
		t.Errorf("%d readings in the last 29.5 h are too many", n)
	}
}

func TestALateMarkLosesNothing(t *testing.T) {
	s := config.Sampling{Every: duration(60), Dense: duration(1), Around: duration(120), Longest: duration(60)}
	// The mark comes four minutes after the moment it speaks of.
	seen, of := 64*time.Minute, 60*time.Minute
	got := play(t, s, 500*time.Millisecond, 2*time.Hour, flat, map[time.Duration]time.Duration{seen: of})
	if n := between(got, of-2*time.Minute, seen); n != 6*60*2+1 {
		t.Errorf("%d readings from two minutes before the mark's moment until it was seen, all %d wanted", n, 6*60*2+1)
	}
	if n := between(got, 10*time.Minute, 50*time.Minute); n > 60 {
		t.Errorf("%d readings in 40 quiet minutes", n)
	}
}

func TestEveryWithAroundKeepsFullRateAtAJump(t *testing.T) {
	s := config.Sampling{Every: duration(1), Around: duration(30)}
	const at = 10 * time.Minute
	got := play(t, s, 100*time.Millisecond, 20*time.Minute, func(d time.Duration) float64 {
		if d >= at {
			return 2
		}
		return 1
	}, nil)
	if n := between(got, at-30*time.Second, at+30*time.Second); n != 601 {
		t.Errorf("%d readings within 30 s of the jump, all 601 wanted", n)
	}
	if n := between(got, at+time.Minute, 20*time.Minute); n < 539 || n > 542 {
		t.Errorf("%d readings in the 540 s behind, want one a second", n)
	}
}

func TestCreepIsNoJump(t *testing.T) {
	c := channel{jump: 0.005}
	c.memory.span = jumpWithin
	for i := range 10_000 {
		s := sample{boot: int64(i) * int64(time.Second), mm: 0.0004 * float64(i)}
		if c.remember(s) {
			t.Fatalf("creep of 0.4 micrometres a second is called a jump at reading %d", i)
		}
	}
	// A load lowered over eight seconds is one jump.
	jumps := 0
	for i := range 60 {
		s := sample{boot: int64(10_000+i) * int64(time.Second), mm: 4 + min(float64(i), 8)*0.1}
		if c.remember(s) {
			jumps++
		}
	}
	if jumps != 1 {
		t.Errorf("a load lowered over eight seconds is %d jumps", jumps)
	}
}

// TestSamplingProperties holds any policy on any signal to what it promises.
func TestSamplingProperties(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		s := config.Sampling{}
		if rapid.Bool().Draw(t, "every") {
			s.Every = duration(float64(rapid.IntRange(1, 100).Draw(t, "every s")))
		}
		if rapid.Bool().Draw(t, "dense") || s.Every == nil {
			s.Dense = duration(float64(rapid.IntRange(1, 10).Draw(t, "dense s")))
			s.Around = duration(float64(rapid.IntRange(0, 60).Draw(t, "around s")))
			if rapid.Bool().Draw(t, "per decade") {
				s.PerDecade = number(float64(rapid.IntRange(5, 100).Draw(t, "a decade")))
			}
			s.Longest = duration(float64(rapid.IntRange(20, 300).Draw(t, "longest s")))
		}
		if rapid.Bool().Draw(t, "dead band") {
			s.DeadBand = length(0.001 * float64(rapid.IntRange(1, 50).Draw(t, "micrometres")))
		}
		mem := segmenttest.New()
		r := mustOpen(t, testOptions(mem, testRig(1, s)))
		var sent []device.Reading
		at, mm := testStart, 1.0
		slowest := int64(0)
		for range rapid.IntRange(50, 400).Draw(t, "readings") {
			step := time.Duration(rapid.IntRange(1, 3000).Draw(t, "ms")) * time.Millisecond
			slowest = max(slowest, int64(step))
			at = later(at, step)
			mm += 0.001 * float64(rapid.IntRange(-3, 3).Draw(t, "move"))
			sent = append(sent, indication("g0", mm, at))
			must(t, r.Handle(Seen(sent[len(sent)-1])))
		}
		must(t, r.Close(at))
		got := stored(t, mem)["g0"]
		slices.SortFunc(got, func(a, b segment.Record) int { return int(a.Time - b.Time) })
		next := 0
		for i, g := range got {
			for next < len(sent) && sent[next].At.Wall != g.Time {
				next++
			}
			if next == len(sent) || math.Abs(sent[next].MM-g.MM) > 1e-6 {
				t.Fatalf("stored reading %d (%d, %g mm) was never sent, or is stored twice", i, g.Time, g.MM)
			}
			next++
		}
		if len(got) == 0 || got[0].Time != sent[0].At.Wall {
			t.Fatalf("the first reading is not stored")
		}
		limit := int64(math.MaxInt64)
		if s.Every != nil {
			limit = nanoseconds(s.Every)
		}
		if s.Longest != nil {
			limit = min(limit, max(nanoseconds(s.Longest), nanoseconds(s.Dense)))
		}
		for i := 1; i < len(got); i++ {
			if gap := got[i].Time - got[i-1].Time; gap > limit+2*slowest {
				t.Fatalf("an interval of %s is longer than asked for (%s)", time.Duration(gap), time.Duration(limit))
			}
		}
		checkDeadBand(t, s, sent, got)
	})
}

// checkDeadBand finds readings left out although they differ from the last one
// stored before them by more than the dead band.
func checkDeadBand(t *rapid.T, s config.Sampling, sent []device.Reading, got []segment.Record) {
	if s.DeadBand == nil {
		return
	}
	i := 0
	for _, d := range sent {
		if i+1 < len(got) && got[i+1].Time <= d.At.Wall {
			i++
		}
		if math.Abs(d.MM-got[i].MM) > s.DeadBand.Value+1e-6 {
			t.Fatalf("%g mm at %d was left out behind %g mm", d.MM, d.At.Wall, got[i].MM)
		}
	}
}

func TestSteadyStateAllocatesNothing(t *testing.T) {
	for _, s := range []config.Sampling{
		{All: true},
		{Every: duration(1)},
		{Dense: duration(1), Around: duration(60), PerDecade: number(50), Longest: duration(900), DeadBand: length(0.005)},
	} {
		d, err := OpenDir(t.TempDir(), DirOptions{Virtual: true})
		must(t, err)
		r := mustOpen(t, testOptions(d.FS(), testRig(4, s)))
		at, names := testStart, []string{"g0", "g1", "g2", "g3"}
		n := 0
		read := func() {
			at = later(at, 10*time.Millisecond)
			n++
			if err := r.Handle(Seen(indication(names[n%4], 1.25, at))); err != nil {
				t.Fatal(err)
			}
		}
		for range 60_000 {
			read()
		}
		if a := testing.AllocsPerRun(20_000, read); a != 0 {
			t.Errorf("%+v: %g allocations a reading, syncs included", s, a)
		}
		must(t, r.Close(at))
		must(t, d.Close())
	}
}

func BenchmarkHandle(b *testing.B) {
	for name, s := range map[string]config.Sampling{
		"all":   {All: true},
		"dense": {Dense: duration(1), Around: duration(60), PerDecade: number(50), Longest: duration(900), DeadBand: length(0.005)},
	} {
		b.Run(name, func(b *testing.B) {
			d, err := OpenDir(b.TempDir(), DirOptions{Virtual: true})
			must(b, err)
			defer d.Close()
			r := mustOpen(b, testOptions(d.FS(), testRig(8, s)))
			var names []string
			for i := range 8 {
				names = append(names, fmt.Sprintf("g%d", i))
			}
			at := testStart
			b.ReportAllocs()
			for i := 0; b.Loop(); i++ {
				at = later(at, 10*time.Millisecond)
				if err := r.Handle(Seen(indication(names[i%8], 1.25, at))); err != nil {
					b.Fatal(err)
				}
			}
			b.StopTimer()
			must(b, r.Close(at))
		})
	}
}
