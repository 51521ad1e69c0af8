package onlook_test

import (
	"context"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"

	"go.uber.org/goleak"

	"gaugelog/config"
	"gaugelog/ingest/answer"
	"gaugelog/ingest/desk"
	"gaugelog/ingest/desk/desktest"
	"gaugelog/ingest/onlook"
)

func TestMain(m *testing.M) { goleak.VerifyTestMain(m) }

// onlook follows a run until the test ends or stop is called.
func follow(t *testing.T, run string, rig *config.Rig, analyse desk.Analyse) (w *onlook.Onlooker, stop func()) {
	t.Helper()
	w, err := onlook.Open(run, onlook.Options{Rig: rig, Gravity: 9.81, Analyse: analyse})
	if err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithCancel(context.Background())
	var running sync.WaitGroup
	running.Go(func() { w.Run(ctx) })
	stop = sync.OnceFunc(func() {
		cancel()
		running.Wait()
		if err := w.Close(); err != nil {
			t.Error(err)
		}
	})
	t.Cleanup(stop)
	return w, stop
}

func until(t *testing.T, w *onlook.Onlooker, what string, fits func(*desk.Snapshot, answer.View) bool) answer.View {
	t.Helper()
	for deadline := time.Now().Add(30 * time.Second); ; time.Sleep(50 * time.Millisecond) {
		s := w.Desk().Snapshot()
		v := answer.Of(w.Desk(), s)
		if fits(s, v) {
			return v
		}
		if time.Now().After(deadline) {
			t.Fatalf("never: %s; %+v", what, v)
		}
	}
}

// files lists a folder's files with their sizes.
func files(t *testing.T, dir string) map[string]int64 {
	t.Helper()
	out := map[string]int64{}
	err := filepath.WalkDir(dir, func(path string, e os.DirEntry, err error) error {
		if err != nil || e.IsDir() {
			return err
		}
		info, err := e.Info()
		if err == nil {
			out[path] = info.Size()
		}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return out
}

// Whoever has only the folder sees what the recorder's own desk sees, as far as
// it is on disk: values that move, marks, alarms, silence, and the end.
func TestBesideARecording(t *testing.T) {
	t.Parallel()
	rec := desktest.New(t, desktest.Options{Past: 5 * 24 * time.Hour, Every: 2 * time.Minute})
	w, _ := follow(t, rec.Run, rec.Rig, nil)
	v := until(t, w, "yesterday is known", func(s *desk.Snapshot, v answer.View) bool {
		return s.Gauges[0].Day != nil && !s.Rebuilding && strings.HasPrefix(v.Alive.Short, "Yes: 4 of 4")
	})
	if !strings.Contains(v.Alive.More[0], "on disk") {
		t.Errorf("it does not say that it knows the disk alone: %q", v.Alive.More)
	}
	if v.Load.Headline != "Step l1: pan 12.40 kg" {
		t.Errorf("under load: %q", v.Load.Headline)
	}
	before := *w.Desk().Snapshot().Gauges[0].Sag
	rec.Move("mid", 6)
	rec.Hush("seat", true)
	until(t, w, "the gauge moved and its limit is passed", func(s *desk.Snapshot, v answer.View) bool {
		return *s.Gauges[0].Sag > before+5.9 && v.Banner.Tone == answer.Danger
	})
	v = until(t, w, "a gauge is silent", func(s *desk.Snapshot, v answer.View) bool {
		return v.Gauges[2].Tone.Word == "silent" && len(v.Alarms) >= 2
	})
	for _, a := range rec.Desk.Snapshot().Alarms {
		if err := rec.Desk.See(t.Context(), a.ID, "mo"); err != nil {
			t.Fatal(err)
		}
	}
	until(t, w, "the alarms were seen", func(_ *desk.Snapshot, v answer.View) bool {
		return len(v.Alarms) > 0 && strings.HasSuffix(v.Alarms[0].Seen, "by mo")
	})
	rec.Hush("seat", false)
	until(t, w, "the gauge is back", func(_ *desk.Snapshot, v answer.View) bool { return v.Gauges[2].Tone.Word == "answers" })
	rec.Stop()
	until(t, w, "the end", func(_ *desk.Snapshot, v answer.View) bool {
		return v.Alive.Short == "No: the recording has ended" && len(v.Alarms) == 0
	})
}

// A finished run can be looked at; nothing in its folder is changed, and the
// analysis is not asked again while nothing is written.
func TestAFinishedRun(t *testing.T) {
	t.Parallel()
	rec := desktest.New(t, desktest.Options{Past: 26 * time.Hour})
	time.Sleep(300 * time.Millisecond) // some readings of the second process
	rec.Stop()
	was := files(t, rec.Run)
	asked := 0
	w, stop := follow(t, rec.Run, rec.Rig, func(context.Context) (*desk.Outlook, error) {
		asked++
		return &desk.Outlook{At: time.Now().UnixNano()}, nil
	})
	v := until(t, w, "the sag's change in a day", func(s *desk.Snapshot, v answer.View) bool {
		return !s.Rebuilding && s.Outlook != nil && s.Gauges[0].Day != nil
	})
	if v.Alive.Short != "No: the recording has ended" || !strings.Contains(v.Knocked.Short, "in the last day of the recording") {
		t.Errorf("the answers are %q, %q", v.Alive.Short, v.Knocked.Short)
	}
	for _, f := range v.Machine {
		if f.Name == "Disk" || f.Name == "Clock" {
			t.Errorf("the %s of a recording that has ended is shown", f.Name)
		}
	}
	stop()
	if asked != 1 {
		t.Errorf("the analysis was asked %d times", asked)
	}
	if is := files(t, rec.Run); len(is) != len(was) {
		t.Errorf("the folder holds %d files, before %d", len(is), len(was))
	} else {
		for name, size := range was {
			if is[name] != size {
				t.Errorf("%s has %d bytes, had %d", name, is[name], size)
			}
		}
	}
}

// A folder made elsewhere, without events or a recorder's files, is looked at too.
func TestAFolderMadeElsewhere(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	if err := os.MkdirAll(filepath.Join(dir, "readings"), 0o755); err != nil {
		t.Fatal(err)
	}
	text := strings.Replace(desktest.RigText, "%TITLE%", "x", 1)
	lines := "indication,gauge=mid mm=1.5 1780000000000000000\nindication,gauge=mid mm=1.75 1780000060000000000\n" +
		"ambient,probe=air celsius=20.5,humidity_percent=48.2 1780000061000000000\n"
	for name, b := range map[string]string{"rig.yaml": text, "readings/x.lp": lines} {
		if err := os.WriteFile(filepath.Join(dir, name), []byte(b), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	rig, err := config.Parse("rig.yaml", []byte(text))
	if err != nil {
		t.Fatal(err)
	}
	w, _ := follow(t, dir, rig, nil)
	v := until(t, w, "what is there", func(s *desk.Snapshot, v answer.View) bool { return !s.Rebuilding && v.Gauges[0].Sag == "+0.250" })
	if v.Alive.Short != "No: the recording has ended" || v.Gauges[0].Reading != "1.750" || len(v.Room) != 1 || !strings.Contains(v.Room[0], "20.5 °C") {
		t.Errorf("the view is %+v", v)
	}
	if _, err := os.Stat(filepath.Join(dir, ".recorder.lock")); err == nil {
		t.Error("a lock file was made")
	}
}

func TestNoRun(t *testing.T) {
	t.Parallel()
	if _, err := onlook.Open(filepath.Join(t.TempDir(), "nowhere"), onlook.Options{Rig: &config.Rig{}}); err == nil {
		t.Error("a folder that is not there was opened")
	}
}
