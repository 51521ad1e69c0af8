package desk_test

import (
	"math"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"

	"go.uber.org/goleak"

	"gaugelog/config"
	"gaugelog/ingest"
	"gaugelog/ingest/desk"
	"gaugelog/ingest/desk/desktest"
)

func TestMain(m *testing.M) { goleak.VerifyTestMain(m) }

// until waits for a look that fits.
func until(t *testing.T, w *desktest.World, what string, fits func(*desk.Snapshot) bool) *desk.Snapshot {
	t.Helper()
	for deadline := time.Now().Add(12 * time.Second); ; time.Sleep(50 * time.Millisecond) {
		s := w.Desk.Snapshot()
		if fits(s) {
			return s
		}
		if time.Now().After(deadline) {
			t.Fatalf("never: %s", what)
		}
	}
}

func gauge(s *desk.Snapshot, name string) *desk.Gauge {
	for i := range s.Gauges {
		if s.Gauges[i].Name == name {
			return &s.Gauges[i]
		}
	}
	return nil
}

func raised(s *desk.Snapshot, cause string) bool {
	for _, a := range s.Alarms {
		if a.Cause == cause {
			return true
		}
	}
	return false
}

// After a restart the page knows yesterday, the baseline, the load and the
// travel from what is on disk.
func TestWhatIsKnownAfterARestart(t *testing.T) {
	t.Parallel()
	w := desktest.New(t, desktest.Options{Past: 6 * 24 * time.Hour, Every: 2 * time.Minute})
	s := until(t, w, "yesterday and the baseline are known", func(s *desk.Snapshot) bool {
		g := gauge(s, "mid")
		return g != nil && g.Day != nil && g.Sag != nil && *g.Sag > 1 && !s.Rebuilding && len(s.Curves.Series[0].Since) > 20
	})
	age := time.Since(w.Loaded).Seconds()
	want := 3.2 * (1 + 0.11*math.Log10(1+age/20))
	if g := gauge(s, "mid"); math.Abs(*g.Sag-want) > 0.02 {
		t.Errorf("the sag at mid is %.3f mm, want %.3f", *g.Sag, want)
	}
	if g := gauge(s, "quarter"); math.Abs(*g.Sag-0.69*want) > 0.02 {
		t.Errorf("the sag at quarter, whose sense is up, is %.3f mm, want %.3f", *g.Sag, 0.69*want)
	}
	day := want - 3.2*(1+0.11*math.Log10(1+(age-86400)/20))
	if g := gauge(s, "mid"); math.Abs(*g.Day-day) > 0.004 {
		t.Errorf("in a day %.4f mm, want %.4f", *g.Day, day)
	}
	if g := gauge(s, "mid"); g.TravelLeft == nil || math.Abs(*g.TravelLeft-(12.7-g.MM)) > 1e-9 {
		t.Errorf("travel left %v of %g", g.TravelLeft, g.MM)
	}
	if g := gauge(s, "quarter"); g.TravelLeft == nil || math.Abs(*g.TravelLeft-g.MM) > 1e-9 {
		t.Errorf("travel left of a gauge whose sense is up: %v of %g", g.TravelLeft, g.MM)
	}
	if l := s.Loads; l.Step != "l1" || l.Planned != 1 || len(l.Now) != 1 || !l.Since.Equal(w.Loaded) || !l.First.Equal(w.Loaded) {
		t.Errorf("the loads are %+v", l)
	}
}

// After a restart the bins come from the summaries of closed segments, which can
// be made again: with them, without them and with one damaged they are the same.
func TestBinsOverARestart(t *testing.T) {
	t.Parallel()
	w := desktest.New(t, desktest.Options{Past: 24 * time.Hour})
	until(t, w, "the past is read", func(s *desk.Snapshot) bool { return !s.Rebuilding && len(s.Curves.Series[0].Whole) > 50 })
	w.Stop()
	summary := filepath.Join(w.Run, "report", "live-bins", "000001.gob.zst")
	if _, err := os.Stat(summary); err != nil {
		t.Fatal(err)
	}
	kept := binned(t, w)
	if err := os.WriteFile(summary, []byte("garbage"), 0o644); err != nil {
		t.Fatal(err)
	}
	damaged := binned(t, w)
	if b, err := os.ReadFile(summary); err != nil || string(b) == "garbage" {
		t.Errorf("the damaged summary was not made anew: %v", err)
	}
	if err := os.RemoveAll(filepath.Join(w.Run, "report")); err != nil {
		t.Fatal(err)
	}
	if read := binned(t, w); kept != read || damaged != read || read < 1440 {
		t.Errorf("%d readings with summaries, %d with one damaged, %d without", kept, damaged, read)
	}
}

// binned starts a desk on the world's folder and counts the readings in its bins.
func binned(t *testing.T, w *desktest.World) int64 {
	t.Helper()
	dir, err := ingest.OpenDir(w.Run, ingest.DirOptions{})
	if err != nil {
		t.Fatal(err)
	}
	defer dir.Close()
	status := &ingest.Status{Run: "run-3"}
	d, err := desk.New(desk.Options{Name: "x", Rig: w.Rig, FS: dir.FS(), Start: ingest.SystemClock{}.Now(),
		Status: func() *ingest.Status { return status }, Happen: func(ingest.Happening) bool { return true }})
	if err != nil {
		t.Fatal(err)
	}
	ctx, stop := contextOf(t)
	var running sync.WaitGroup
	running.Go(func() { d.Run(ctx) })
	defer func() { stop(); running.Wait() }()
	for deadline := time.Now().Add(10 * time.Second); ; time.Sleep(20 * time.Millisecond) {
		if s := d.Snapshot(); !s.Rebuilding && len(s.Curves.Series[0].Whole) > 0 {
			n := int64(0)
			for _, b := range s.Curves.Series[0].Whole {
				n += b.N
			}
			return n
		}
		if time.Now().After(deadline) {
			t.Fatal("the bins never came back")
		}
	}
}

// A panic in the analysis ends neither the desk nor the recording.
func TestAnalysisThatPanics(t *testing.T) {
	t.Parallel()
	w := desktest.New(t, desktest.Options{Outlook: func(*desktest.World) *desk.Outlook { panic("boom") }})
	s := until(t, w, "the failure is shown", func(s *desk.Snapshot) bool { return s.OutlookError != "" })
	if !strings.Contains(s.OutlookError, "boom") {
		t.Errorf("the error is %q", s.OutlookError)
	}
	at := s.Status.Stored
	until(t, w, "the recording goes on", func(s *desk.Snapshot) bool { return s.Status.Stored > at })
}

// A mark from the page is on disk, changes the load, and the log-time bins
// begin anew; a withdrawal takes all that back.
func TestMarksFromTheDesk(t *testing.T) {
	t.Parallel()
	w := desktest.New(t, desktest.Options{Past: 2 * time.Hour})
	kg := 0.0
	id, err := w.Desk.Mark(t.Context(), ingest.Mark{Step: "bare", Loads: []ingest.LoadValue{{Name: "pan", Kilogram: &kg, Shown: "0 kg"}}})
	if err != nil || id != "m2" {
		t.Fatal(id, err)
	}
	if l := w.Desk.Snapshot().Loads; l.Step != "bare" || l.Newton != 0 || l.Planned != 2 {
		t.Errorf("after the mark the loads are %+v", l)
	}
	if _, err := w.Desk.Mark(t.Context(), ingest.Mark{Withdraw: "m2", Why: "not yet"}); err != nil {
		t.Fatal(err)
	}
	if l := w.Desk.Snapshot().Loads; l.Step != "l1" || !l.Since.Equal(w.Loaded) {
		t.Errorf("after the withdrawal the loads are %+v", l)
	}
	if _, err := w.Desk.Mark(t.Context(), ingest.Mark{Withdraw: "m9", Why: "x"}); err == nil {
		t.Error("a mark that is not there was withdrawn")
	}
	until(t, w, "the bins since the load are whole again", func(s *desk.Snapshot) bool { return len(s.Curves.Series[0].Since) > 20 })
}

// Nobody waits for a desk that does not run.
func TestTakeNeverWaits(t *testing.T) {
	t.Parallel()
	dir, err := ingest.OpenDir(t.TempDir(), ingest.DirOptions{Create: true})
	if err != nil {
		t.Fatal(err)
	}
	defer dir.Close()
	rig, err := config.Parse("rig.yaml", []byte(strings.Replace(desktest.RigText, "%TITLE%", "x", 1)))
	if err != nil {
		t.Fatal(err)
	}
	d, err := desk.New(desk.Options{Name: "x", Rig: rig, FS: dir.FS(), Status: func() *ingest.Status { return nil }})
	if err != nil {
		t.Fatal(err)
	}
	done := make(chan struct{})
	go func() {
		for range 100_000 {
			d.Take(reading)
		}
		close(done)
	}()
	select {
	case <-done:
	case <-time.After(10 * time.Second):
		t.Fatal("Take waits")
	}
	if s := d.Snapshot(); s == nil || s.Status == nil {
		t.Error("there is no look before Run")
	}
}
