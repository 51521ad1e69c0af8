package ingest

import (
	"fmt"
	"math/rand/v2"
	"strings"
	"testing"
	"time"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/ingest/segment"
	"gaugelog/ingest/segment/segmenttest"
)

// smallComputer has no battery clock: after each start its wall clock is wrong
// until it is set. Instants are told by true time, in ns since 1970 UTC.
type smallComputer struct {
	booted int64 // true time of the start
	wrong  int64 // wall clock less true time until it is set
	setAt  int64 // true time of the setting
	now    int64
	name   string
}

func (c *smallComputer) Now() device.Instant {
	at := device.Instant{Wall: c.now, Boot: c.now - c.booted}
	if c.now < c.setAt {
		at.Wall += c.wrong
	}
	return at
}

func (c *smallComputer) State() ClockState {
	return ClockState{BootID: c.name, Synchronised: c.now >= c.setAt}
}

// TestTwoPowerCutsAndAClockSetLate records through two power cuts. Behind the
// first the clock restarts an hour in the past, behind the second in 1970, and
// it is set 25 minutes later each time, in the same instant in which the system
// begins to say that it is. Everything comes out at its true time and in true
// order, marks as well, the files untouched, and each gap is stated.
func TestTwoPowerCutsAndAClockSetLate(t *testing.T) {
	const second, late = int64(time.Second), int64(25 * time.Minute)
	t0 := testStart.Wall
	lives := []*smallComputer{
		{booted: t0 - 90*second, setAt: t0 - 30*second, name: "first"},
		{booted: t0 + 2*3600*second, wrong: -2 * 3600 * second, name: "second"},
		{booted: t0 + 5*3600*second, wrong: -t0 - 5*3600*second, name: "third"},
	}
	for _, live := range []bool{false, true} {
		t.Run(fmt.Sprintf("live %v", live), func(t *testing.T) {
			rng := rand.New(rand.NewPCG(5, 6))
			disk := segmenttest.New()
			want := map[float64]int64{} // true time of each reading, by its value
			var gapless []int64
			n := 0.0
			for i, c := range lives {
				c.now = c.booted + 90*second
				if i > 0 {
					c.setAt = c.now + late
				}
				o := testOptions(disk, testRig(1, config.Sampling{All: true}))
				o.Clock, o.Start, o.Live = c, c.Now(), live
				r := mustOpen(t, o)
				gapless = append(gapless, c.now)
				for end := c.now + 3600*second; c.now < end; c.now += 7 * second {
					n++
					want[n/1000] = c.now
					must(t, r.Handle(Seen(indication("g0", n/1000, c.Now()))))
					if int(n)%200 == 0 {
						state := c.State()
						_, err := AppendMark(disk, Mark{Note: fmt.Sprint(c.now)}, c.Now(), state)
						must(t, err)
					}
				}
				if r.writer != nil {
					r.settle(r.writer.stop())
				}
				must(t, r.flushSync())
				must(t, r.sealer.finish())
				if i < len(lives)-1 {
					disk = disk.Crash(rng, false)
				}
			}
			folder, err := segment.OpenFolder(disk)
			must(t, err)
			reader := folder.Read(segment.ReadOptions{})
			defer reader.Close()
			last, got := int64(0), 0
			for rec, err := range reader.Records() {
				must(t, err)
				if rec.Time != want[rec.MM] || rec.Time <= last {
					t.Fatalf("reading %g stands at %d, true %d, behind %d", rec.MM, rec.Time, want[rec.MM], last)
				}
				last = rec.Time
				got++
			}
			if got != len(want) {
				t.Errorf("%d readings of %d", got, len(want))
			}
			if rep := reader.Report(); len(rep.Damage)+len(rep.Quarantined)+len(rep.Unset) > 0 {
				t.Errorf("%+v", rep)
			}
			notes, _, err := folder.Log(segment.MarksFile)
			must(t, err)
			for _, m := range notes {
				if text := fieldsOf(m.Point).text("text"); text != fmt.Sprint(m.Time) {
					t.Errorf("the mark of %s stands at %d", text, m.Time)
				}
			}
			checkGaps(t, folder, gapless[1:])
		})
	}
}

// checkGaps wants one gap of the run to end at each of the instants, and its
// length to be stated once it could be known.
func checkGaps(t *testing.T, folder *segment.Folder, ends []int64) {
	t.Helper()
	records, _, err := folder.Log(segment.EventsFile)
	must(t, err)
	var gaps []int64
	var lengths []string
	for _, r := range records {
		f := fieldsOf(r.Point)
		switch r.Name {
		case Gap:
			gaps = append(gaps, r.Time)
			if !strings.Contains(f.text("detail"), "not known yet") {
				t.Errorf("a clock that was not set knew a length: %q", f.text("detail"))
			}
		case ClockStepped:
			_, length, _ := strings.Cut(f.text("detail"), "recorded for ")
			length, _, _ = strings.Cut(length, " ")
			lengths = append(lengths, length)
		}
	}
	if fmt.Sprint(gaps) != fmt.Sprint(ends) {
		t.Errorf("gaps end at %v, want %v", gaps, ends)
	}
	// From the last reading of one life, 3598 s behind its start, to the next start.
	if fmt.Sprint(lengths) != "[1h1m32s 2h0m2s]" {
		t.Errorf("lengths of the gaps: %v", lengths)
	}
}
