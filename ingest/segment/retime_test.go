package segment_test

import (
	"fmt"
	"math/rand/v2"
	"testing"

	"gaugelog/ingest/segment"
	"gaugelog/ingest/segment/segmenttest"
)

// machine is a small computer without a battery clock: its wall clock starts
// anywhere at each boot and is set later. true time = booted + boot clock.
type machine struct {
	boot   int
	booted int64 // true instant of the boot
	wrong  int64 // wall - true before the clock is set
	setAt  int64 // boot-time clock at which it is set; -1 never
}

func (m machine) clock(trueTime int64) segment.ClockState {
	c := segment.ClockState{Boot: trueTime - m.booted, Wall: trueTime + m.wrong}
	if m.setAt >= 0 && c.Boot >= m.setAt {
		c.Wall, c.Synced = trueTime, true
	}
	return c
}

// Two power cuts, and a clock set 25 minutes after the second boot: everything
// comes out at its true instant and in true order, the originals untouched.
func TestReadingsBeforeTheClockWasSetAreRetimed(t *testing.T) {
	const second = int64(1e9)
	boots := []machine{
		{1, t0, 0, 0},
		{2, t0 + 7200*second, -7000 * second, 1500 * second}, // restarts in the past
		{3, t0 + 14400*second, -1e18, 1500 * second},         // near 1970
	}
	fs := segmenttest.New()
	var want []int64
	for i, m := range boots {
		h := header()
		h.Boot, h.Clock = fmt.Sprintf("boot-%d", m.boot), m.clock(m.booted+20*second)
		w, err := segment.NewWriter(fs, segment.ReadingsDir, i+1, segment.WriterOptions{Header: h})
		if err != nil {
			t.Fatal(err)
		}
		l, err := segment.OpenLog(fs, segment.MarksFile, h)
		if err != nil {
			t.Fatal(err)
		}
		for s := int64(30); s < 3600; s += 10 {
			now := m.booted + s*second
			before := m.clock(now - 1)
			c := m.clock(now)
			if c.Synced && !before.Synced {
				// The clock is stepped: what was stamped before it is closed first.
				if err := w.Checkpoint(before); err != nil {
					t.Fatal(err)
				}
				w.Stamps().Forget()
			}
			if err := w.Indication(&segment.Shown{Gauge: "mid", MM: 1, Time: c.Wall}); err != nil {
				t.Fatal(err)
			}
			want = append(want, now)
			if s%60 == 0 {
				if err := w.Checkpoint(c); err != nil {
					t.Fatal(err)
				}
			}
			if s == 600 {
				e := segment.Entry{Point: &segment.Point{Measurement: "note", Fields: []segment.Field{{Key: "true", Value: now}}}, Time: c.Wall}
				if err := l.Append(c, e); err != nil {
					t.Fatal(err)
				}
			}
		}
		if err := w.Checkpoint(m.clock(m.booted + 3600*second)); err != nil {
			t.Fatal(err)
		}
	}
	got, report := read(t, fs, segment.ReadOptions{})
	if len(got) != len(want) || len(report.Quarantined) > 0 || len(report.Unset) > 0 || len(report.Damage) > 0 {
		t.Fatalf("%d readings of %d; %+v", len(got), len(want), report)
	}
	for i := range got {
		if got[i].time != want[i] {
			t.Fatalf("reading %d at %d, true %d", i, got[i].time, want[i])
		}
	}
	if len(report.Retimed) != 2 || report.Retimed[0].Lines != 147 {
		t.Fatalf("%+v", report.Retimed)
	}
	d, err := segment.OpenFolder(fs)
	if err != nil {
		t.Fatal(err)
	}
	marks, _, err := d.Log(segment.MarksFile)
	if err != nil || len(marks) != 3 {
		t.Fatal(marks, err)
	}
	for _, m := range marks {
		if v, _ := m.Point.Value("true"); v != m.Time {
			t.Fatalf("mark at %d, true %v", m.Time, v)
		}
	}
}

// A boot whose clock was never set keeps its stamps, and that is said; stamps
// of 1970 and far ahead are quarantined, not guessed at.
func TestStampsThatCannotBeRightAreQuarantined(t *testing.T) {
	for _, c := range []struct {
		wall                int64
		unset, quarantined  int64
		ahead               int64
		synced, given       bool
		readings, wholeSpan int
	}{
		{wall: t0, unset: 10, readings: 10},
		{wall: 1e15, quarantined: 10},
		{wall: 5e18, quarantined: 10},
		{wall: 1e15, given: true, readings: 10},
		{wall: t0, synced: true, readings: 10},
		{wall: t0, synced: true, ahead: 25 * 3600e9, quarantined: 10},
	} {
		fs := segmenttest.New()
		clock := segment.ClockState{Boot: 30e9, Wall: c.wall, Synced: c.synced, Given: c.given}
		h := header()
		h.Clock = clock
		w, err := segment.NewWriter(fs, segment.ReadingsDir, 1, segment.WriterOptions{Header: h})
		if err != nil {
			t.Fatal(err)
		}
		for i := range int64(10) {
			if err := w.Indication(&segment.Shown{Gauge: "mid", MM: 1, Time: c.wall + c.ahead - i}); err != nil {
				t.Fatal(err)
			}
			w.Stamps().Forget()
		}
		if err := w.Close(clock); err != nil {
			t.Fatal(err)
		}
		got, report := read(t, fs, segment.ReadOptions{})
		count := func(spans []segment.Span) (n int64) {
			for _, s := range spans {
				n += s.Lines
			}
			return n
		}
		if len(got) != c.readings || count(report.Unset) != c.unset || count(report.Quarantined) != c.quarantined {
			t.Errorf("%+v: %d readings, %+v", c, len(got), report)
		}
	}
}

// A step inside a block, which a careful writer avoids, is still told apart by
// the boot-time clock.
func TestAStepInsideABlockIsUnravelled(t *testing.T) {
	fs := segmenttest.New()
	h := header()
	h.Clock = segment.ClockState{Boot: 100e9, Wall: t0 - 3600e9}
	w, err := segment.NewWriter(fs, segment.ReadingsDir, 1, segment.WriterOptions{Header: h})
	if err != nil {
		t.Fatal(err)
	}
	var want []int64
	for i := range int64(20) {
		at := t0 + i*1e9 // true; the clock is set before the tenth
		stamp := at
		if i < 10 {
			stamp -= 3600e9
		}
		want = append(want, at)
		if err := w.Indication(&segment.Shown{Gauge: "mid", MM: 1, Time: stamp}); err != nil {
			t.Fatal(err)
		}
	}
	if err := w.Close(segment.ClockState{Boot: 120e9, Wall: t0 + 20e9, Synced: true}); err != nil {
		t.Fatal(err)
	}
	got, report := read(t, fs, segment.ReadOptions{})
	for i := range got {
		if got[i].time != want[i] {
			t.Fatalf("reading %d at %d, true %d; %+v", i, got[i].time, want[i], report)
		}
	}
	if len(got) != 20 {
		t.Fatal(len(got))
	}
}

// Stamps of one gauge strictly increase in a segment, whatever the clock does;
// a clock set back by more than a second is refused, not squeezed together.
func TestStampsStrictlyIncrease(t *testing.T) {
	fs := segmenttest.New()
	w, err := segment.NewWriter(fs, segment.ReadingsDir, 1, segment.WriterOptions{Header: header()})
	if err != nil {
		t.Fatal(err)
	}
	rng := rand.New(rand.NewPCG(1, 4))
	now, refused := t0, 0
	for range 5000 {
		now += rng.Int64N(2e9) - 1e9
		if err := w.Indication(&segment.Shown{Gauge: "mid", MM: 1, Time: now}); err != nil {
			refused++
			now += 2e9
		}
	}
	if err := w.Close(synced(now)); err != nil {
		t.Fatal(err)
	}
	got, report := read(t, fs, segment.ReadOptions{})
	if len(got)+refused != 5000 || refused == 0 || len(report.Damage) > 0 {
		t.Fatal(len(got), refused, report)
	}
	for i := 1; i < len(got); i++ {
		if got[i].time <= got[i-1].time {
			t.Fatalf("reading %d at %d, the one before at %d", i, got[i].time, got[i-1].time)
		}
	}
}
