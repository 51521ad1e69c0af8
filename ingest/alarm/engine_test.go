package alarm

import (
	"testing"
	"time"

	"pgregory.net/rapid"

	"gaugelog/config"
	"gaugelog/ingest"
)

var noon = time.Date(2026, 3, 2, 12, 0, 0, 0, time.UTC)

func every(string) bool { return true }

// feed steps an engine once a second with what a function wishes of one cause.
func feed(e *Engine, cause string, from time.Time, seconds int, wish func(s int) Wish) (raised, over, told int) {
	for s := range seconds {
		step := e.Step(from.Add(time.Duration(s)*time.Second), []Fact{{Cause: cause, Subject: "mid", Wish: wish(s), Text: "seen"}})
		for _, h := range step.Happened {
			switch h.Kind {
			case ingest.AlarmRaised:
				raised++
			case ingest.AlarmOver:
				over++
			}
		}
		told += len(step.Message)
	}
	return raised, over, told
}

func TestEveryCauseHasARule(t *testing.T) {
	for _, c := range config.AlarmCauses {
		if rules[c].advice == "" || rules[c].level == Normal {
			t.Errorf("%s has no rule", c)
		}
	}
	if len(rules) != len(config.AlarmCauses) {
		t.Errorf("%d rules for %d causes", len(rules), len(config.AlarmCauses))
	}
}

func TestAnAlarmIsRaisedSeenAndOver(t *testing.T) {
	e := NewEngine(every)
	raised, _, told := feed(e, "silent", noon, 10, func(int) Wish { return Raise })
	if raised != 1 || told != 1 || len(e.Current()) != 1 {
		t.Fatalf("raised %d, told %d, current %v", raised, told, e.Current())
	}
	a := e.Current()[0]
	if a.Level != Abnormal || a.Subject != "mid" || !a.Raised.Equal(noon.Add(2*time.Second)) {
		t.Errorf("the alarm is %+v", a)
	}
	h, fresh, err := e.See(a.ID, "mo", noon.Add(time.Minute))
	if err != nil || !fresh || h.Kind != ingest.AlarmSeen || h.Gauge != "mid" || h.Detail != "silent: seen (seen by mo)" {
		t.Errorf("seeing it: %+v %v %v", h, fresh, err)
	}
	if _, fresh, err := e.See(a.ID, "al", noon); err != nil || fresh {
		t.Errorf("seeing it again: %v %v", fresh, err)
	}
	if _, _, err := e.See(99, "", noon); err == nil {
		t.Error("an alarm that is not there was seen")
	}
	_, over, _ := feed(e, "silent", noon.Add(time.Minute), 40, func(int) Wish { return Over })
	if over != 1 || len(e.Current()) != 0 || len(e.Past()) != 1 || e.Past()[0].SeenBy != "mo" {
		t.Errorf("over %d, current %v, past %v", over, e.Current(), e.Past())
	}
}

func TestHysteresis(t *testing.T) {
	flicker := func(s int) Wish {
		if s%2 == 0 {
			return Raise
		}
		return Over
	}
	e := NewEngine(every)
	if raised, _, _ := feed(e, "travel", noon, 600, flicker); raised != 0 {
		t.Errorf("a flickering fact raised %d alarms", raised)
	}
	feed(e, "travel", noon.Add(time.Hour), 20, func(int) Wish { return Raise })
	if _, over, _ := feed(e, "travel", noon.Add(2*time.Hour), 3600, flicker); over != 0 {
		t.Errorf("a flickering fact ended an alarm %d times", over)
	}
	if _, over, _ := feed(e, "travel", noon.Add(4*time.Hour), 3600, func(int) Wish { return Leave }); over != 0 || len(e.Current()) != 1 {
		t.Error("a value between the thresholds ended an alarm")
	}
}

func TestOneMessageADay(t *testing.T) {
	e := NewEngine(every)
	// On for five minutes, off for five, for three days.
	raised, over, told := feed(e, "silent", noon, 3*86400, func(s int) Wish {
		if s/300%2 == 0 {
			return Raise
		}
		return Over
	})
	if raised != 432 || over != 432 || told != 3 {
		t.Errorf("raised %d, over %d, told %d; want 432, 432, 3", raised, over, told)
	}
	step := e.Step(noon.Add(72*time.Hour+time.Minute), []Fact{{Cause: "clear-area", Wish: Raise, Text: "x"}, {Cause: "knock", Wish: Raise, Text: "y"}})
	if len(step.Message) != 2 || step.Message[0].Cause != "clear-area" {
		t.Errorf("other causes are told with %v", step.Message)
	}
}

func TestWhatIsOffIsNotRaised(t *testing.T) {
	e := NewEngine(func(c string) bool { return c != "knock" })
	if raised, _, told := feed(e, "knock", noon, 100, func(int) Wish { return Raise }); raised+told != 0 {
		t.Errorf("raised %d, told %d", raised, told)
	}
}

// Whatever the facts, alarms are raised and over in turn, never two messages
// of one cause come within a day, and without facts every alarm ends.
func TestAnyFacts(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		e := NewEngine(every)
		now := noon
		up := map[string]bool{}
		told := map[string]time.Time{}
		take := func(s Step) {
			for _, h := range s.Happened {
				k := h.Detail[:4] + h.Gauge
				if h.Kind == ingest.AlarmRaised == up[k] {
					t.Fatalf("%s twice for %s", h.Kind, k)
				}
				up[k] = h.Kind == ingest.AlarmRaised
			}
			for _, a := range s.Message {
				k := a.Cause + a.Subject
				if last, ok := told[k]; ok && now.Sub(last) < messageEvery {
					t.Fatalf("two messages of %s within %s", k, now.Sub(last))
				}
				told[k] = now
			}
		}
		for range rapid.IntRange(1, 60).Draw(t, "steps") {
			now = now.Add(time.Duration(rapid.Int64Range(1, 40_000).Draw(t, "s")) * time.Second)
			var facts []Fact
			for _, c := range []string{"silent", "travel", "sag"} {
				if rapid.Bool().Draw(t, "given") {
					facts = append(facts, Fact{Cause: c, Subject: "mid", Wish: Wish(rapid.IntRange(0, 2).Draw(t, "wish")), Text: "t"})
				}
			}
			take(e.Step(now, facts))
		}
		for range 3 {
			now = now.Add(2 * time.Hour)
			take(e.Step(now, nil))
		}
		if len(e.Current()) != 0 {
			t.Fatalf("without facts %v are still raised", e.Current())
		}
	})
}
