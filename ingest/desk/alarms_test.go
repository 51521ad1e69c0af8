package desk_test

import (
	"os"
	"strings"
	"sync"
	"testing"
	"time"

	"gaugelog/ingest/alarm"
	"gaugelog/ingest/desk"
	"gaugelog/ingest/desk/desktest"
	"gaugelog/ingest/segment"
)

// Alarms reach the page's look, the run's events and the messengers.
func TestAlarmsFromARecording(t *testing.T) {
	t.Parallel()
	told := &teller{}
	outbox := alarm.NewOutbox(discard, told)
	ctx, stop := contextOf(t)
	var running sync.WaitGroup
	running.Go(func() { outbox.Run(ctx) })
	defer func() { stop(); running.Wait() }()
	w := desktest.New(t, desktest.Options{Past: 2 * time.Hour, Outbox: outbox, Outlook: func(*desktest.World) *desk.Outlook {
		size := -0.012
		return &desk.Outlook{At: time.Now().UnixNano(), ClearArea: time.Now().UnixNano(), Caution: time.Now().UnixNano(), Disturbances: []desk.Disturbance{
			{Kind: "gauge-knock", Gauges: []string{"mid"}, From: time.Now().Add(-time.Hour).UnixNano(), Size: &size},
			{Kind: "load-change", From: time.Now().Add(-2 * time.Hour).UnixNano()},
			{Kind: "bench-knock", From: time.Now().Add(-48 * time.Hour).UnixNano()},
		}}
	}})
	s := until(t, w, "the analysis's alarms", func(s *desk.Snapshot) bool {
		return raised(s, "clear-area") && raised(s, "caution") && raised(s, "knock") && raised(s, "load-changed")
	})
	if len(s.Alarms) != 4 || s.Alarms[0].Cause != "clear-area" || s.Alarms[0].Level != alarm.Danger {
		t.Errorf("the alarms are %+v", s.Alarms)
	}
	if raised(s, "clock") {
		t.Error("an alarm that is off was raised")
	}
	w.Hush("seat", true)
	w.Move("mid", 6) // beyond the limits of sag and of travel
	s = until(t, w, "silent, sag and travel", func(s *desk.Snapshot) bool {
		return raised(s, "silent") && raised(s, "sag")
	})
	if !raised(s, "clear-area") || s.Alarms[0].Level != alarm.Danger {
		t.Errorf("the gravest stands not first: %+v", s.Alarms)
	}
	var id int
	for _, a := range s.Alarms {
		if a.Cause == "silent" {
			id = a.ID
		}
	}
	if err := w.Desk.See(t.Context(), id, "mo"); err != nil {
		t.Fatal(err)
	}
	if err := w.Desk.See(t.Context(), 12345, "mo"); err == nil {
		t.Error("an alarm that is not there was seen")
	}
	w.Stop()
	kinds := events(t, w)
	for _, want := range []string{"alarm-raised clear-area", "alarm-raised knock mid", "alarm-raised silent seat", "alarm-raised sag", "alarm-seen silent seat"} {
		if !kinds[want] {
			t.Errorf("events.lp lacks %q; it has %v", want, kinds)
		}
	}
	if text := told.text(); !strings.Contains(text, "DANGER") || !strings.Contains(text, "do not go near to check") || !strings.Contains(text, alarm.Safety) {
		t.Errorf("told was %q", text)
	}
}

// An alarm that was seen is not unseen because the recorder was started again;
// one that is no more is over then.
func TestSeenOverARestart(t *testing.T) {
	t.Parallel()
	w := desktest.New(t, desktest.Options{Past: 2 * time.Hour})
	w.Hush("seat", true)
	w.Move("mid", 6)
	s := until(t, w, "silent and sag", func(s *desk.Snapshot) bool { return raised(s, "silent") && raised(s, "sag") })
	was := map[string]alarm.Alarm{}
	for _, a := range s.Alarms {
		was[a.Cause] = a
	}
	if err := w.Desk.See(t.Context(), was["sag"].ID, "mo"); err != nil {
		t.Fatal(err)
	}
	w.Hush("seat", false)
	w.Restart(t)
	s = until(t, w, "the sag's alarm goes on", func(s *desk.Snapshot) bool { return raised(s, "sag") })
	for _, a := range s.Alarms {
		if a.Cause == "sag" && (a.SeenBy != "mo" || a.Seen.IsZero() || a.Raised.Sub(was["sag"].Raised).Abs() > time.Second || a.ID <= was["sag"].ID) {
			t.Errorf("after the restart it is %+v, was %+v", a, was["sag"])
		}
		if a.Cause == "silent" {
			t.Error("a gauge that speaks again is still silent")
		}
	}
	if err := w.Desk.See(t.Context(), was["silent"].ID, "mo"); err == nil {
		t.Error("a number of before the restart names an alarm of after it")
	}
	w.Stop()
	if kinds := events(t, w); !kinds["alarm-seen sag"] {
		t.Errorf("events.lp lacks that the alarm was seen; it has %v", kinds)
	}
}

// events lists "kind cause gauge" of events.lp.
func events(t *testing.T, w *desktest.World) map[string]bool {
	t.Helper()
	root, err := os.OpenRoot(w.Run)
	if err != nil {
		t.Fatal(err)
	}
	defer root.Close()
	folder, err := segment.OpenFolder(segment.OSFS(root, segment.OSOptions{}))
	if err != nil {
		t.Fatal(err)
	}
	records, _, err := folder.Log(segment.EventsFile)
	if err != nil {
		t.Fatal(err)
	}
	out := map[string]bool{}
	for _, r := range records {
		if r.Point == nil {
			continue
		}
		detail, _ := r.Point.Value("detail")
		cause, _, _ := strings.Cut(detail.(string), ":")
		out[strings.TrimSpace(r.Name+" "+cause+" "+r.Point.Tag("gauge"))] = true
	}
	return out
}
