package alarm

import (
	"testing"
	"time"

	"pgregory.net/rapid"

	"gaugelog/ingest"
)

// after makes an engine as a recorder does that begins after those events.
func after(events ...ingest.Happening) *Engine {
	var l Ledger
	for i, h := range events {
		l.Take(h.Kind, h.Gauge, h.Detail, noon.Add(time.Duration(i-len(events))*time.Minute))
	}
	e := NewEngine(every)
	e.Restore(&l)
	return e
}

var (
	began  = ingest.Happening{Kind: ingest.Started}
	raised = ingest.Happening{Kind: ingest.AlarmRaised, Gauge: "mid", Detail: "silent: nothing has come"}
	seen   = ingest.Happening{Kind: ingest.AlarmSeen, Gauge: "mid", Detail: "silent: nothing has come (seen by mo)"}
	over   = ingest.Happening{Kind: ingest.AlarmOver, Gauge: "mid", Detail: "silent: nothing has come"}
)

// What was seen stays seen over a restart, and over a second one, and is not
// told again; its number is a new one, so that a page of before cannot mean it.
func TestSeenStaysSeenOverARestart(t *testing.T) {
	for name, events := range map[string][]ingest.Happening{
		"one restart":            {began, raised, seen},
		"started is on record":   {began, raised, seen, began},
		"two restarts":           {began, raised, seen, began, raised, began},
		"two before it is again": {began, raised, seen, began, began},
	} {
		e := after(events...)
		r, _, told := feed(e, "silent", noon, 10, func(int) Wish { return Raise })
		all := e.Current()
		if r != 1 || told != 0 || len(all) != 1 {
			t.Fatalf("%s: raised %d, told %d, current %v", name, r, told, all)
		}
		first := noon.Add(time.Duration(1-len(events)) * time.Minute)
		if a := all[0]; a.SeenBy != "mo" || !a.Seen.Equal(first.Add(time.Minute)) || !a.Raised.Equal(first) || a.Text != "seen" || a.Advice == "" || a.ID < 2 {
			t.Errorf("%s: it goes on as %+v", name, a)
		}
	}
}

func TestNotSeenStaysNotSeen(t *testing.T) {
	e := after(began, raised, seen, over, raised)
	feed(e, "silent", noon, 10, func(int) Wish { return Raise })
	if all := e.Current(); len(all) != 1 || !all[0].Seen.IsZero() || all[0].SeenBy != "" || all[0].ID != 3 {
		t.Errorf("an alarm raised after one that was seen is %+v", all)
	}
	if past := e.Past(); len(past) != 1 || past[0].SeenBy != "mo" || past[0].Over.IsZero() {
		t.Errorf("what has ended is %+v", past)
	}
}

// What was so before the restart and is not any more is over, and told of as
// such; after that an alarm of the same cause is a new one.
func TestWhatIsNoMoreIsOver(t *testing.T) {
	e := after(began, raised, seen)
	if _, n, _ := feed(e, "silent", noon, 100, func(int) Wish { return Over }); n != 1 {
		t.Fatalf("over %d times", n)
	}
	if past := e.Past(); len(past) != 1 || past[0].SeenBy != "mo" {
		t.Errorf("what has ended is %+v", past)
	}
	feed(e, "silent", noon.Add(time.Hour), 10, func(int) Wish { return Raise })
	if all := e.Current(); len(all) != 1 || !all[0].Seen.IsZero() {
		t.Errorf("the new alarm is %+v", all)
	}
	// While nothing can be said of a cause it is held.
	e = after(began, raised, seen)
	for s := range 100 {
		if step := e.Step(noon.Add(time.Duration(s)*time.Second), e.Waiting("silent", "knock")); len(step.Happened) > 0 {
			t.Fatalf("an alarm that waits changed: %+v", step.Happened)
		}
	}
	if got := e.Waiting("knock"); got != nil {
		t.Errorf("another cause waits: %v", got)
	}
}

// Events that are none of an alarm, or of one not known, change nothing.
func TestLedgerOfAnything(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		var l Ledger
		kinds := []string{ingest.Started, ingest.Stopped, ingest.AlarmRaised, ingest.AlarmSeen, ingest.AlarmOver, ingest.Gap}
		details := []string{"", "silent", "silent:", "silent: x", "no such cause: x", "sag: a (seen by b) (seen by mo)", "sag: x (seen by "}
		for i := range rapid.IntRange(0, 80).Draw(t, "n") {
			l.Take(rapid.SampledFrom(kinds).Draw(t, "kind"), rapid.SampledFrom([]string{"", "mid"}).Draw(t, "gauge"),
				rapid.SampledFrom(details).Draw(t, "detail"), noon.Add(time.Duration(i)*time.Second))
		}
		if len(l.ended) > mostPast {
			t.Fatalf("%d ended", len(l.ended))
		}
		up := map[string]bool{}
		for _, a := range append(l.left, l.raised...) {
			if k := key(a.Cause, a.Subject); up[k] || a.Level == Normal || a.Raised.IsZero() || !a.Over.IsZero() {
				t.Fatalf("%+v among the raised", a)
			} else {
				up[k] = true
			}
		}
		e := NewEngine(every)
		e.Restore(&l)
		e.Step(noon.Add(time.Hour), nil)
		e.Step(noon.Add(9*time.Hour), nil)
		if len(e.Current()) != 0 || len(e.Past()) > mostPast {
			t.Fatalf("without facts %v stay", e.Current())
		}
	})
}

func TestOfflineCausesAreLeftAlone(t *testing.T) {
	var l Ledger
	l.Take(ingest.AlarmRaised, "mid", "silent: x", noon)
	e := NewEngine(func(string) bool { return false })
	e.Restore(&l)
	if step := e.Step(noon.Add(24*time.Hour), nil); len(step.Happened) != 0 {
		t.Errorf("a cause that is switched off is told of: %+v", step.Happened)
	}
}
