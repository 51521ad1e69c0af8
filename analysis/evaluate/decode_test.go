package evaluate

import (
	"errors"
	"fmt"
	"os"
	"strings"
	"testing"
	"testing/fstest"

	"gaugelog/config"
)

// sound is a whole rule; the tests below break one line of it each.
const sound = `rule: own
title: A rule of our own
standard: XX 1
edition: "2020"
numbers:
  - {name: day, value: 24 h, source: ours, confidence: choice}
  - {name: most, value: 75 %, source: "XX 1 clause 5", confidence: confirmed}
  - {name: tenth, value: 10 %, source: ours, confidence: choice}
  - {name: wanted, detail: wanted_load, unit: N, source: operator, confidence: choice}
readings: {times: [day], tolerance: tenth, source: ours, confidence: choice}
clauses:
  - clause: gain
    part: criterion
    measure: (sag(day) - initial_sag) / initial_sag
    unit: "%"
    at_most: most
    source: "XX 1 clause 5"
    confidence: confirmed
`

func TestSoundRule(t *testing.T) {
	r, err := Parse("own.yaml", []byte(sound))
	if err != nil {
		t.Fatal(err)
	}
	f := full()
	f.Sag = append(f.Sag, Reading{AfterS: 86400, Quantity: Quantity{Value: 3, U: 0.01}})
	for i := range f.Sag {
		if f.Sag[i].AfterS == 86400 {
			f.Sag[i].Quantity = Quantity{Value: 3, U: 0.01}
		}
	}
	f.InitialSag, f.ReadAt = Measured(2, 0.01), []float64{90000}
	o := Run([]*Rule{r}, f)
	near(t, "gain", only(o, "gain").Measured.Value, 50, 1e-9)
	if say(only(o, "gain").Pass) != "yes" || say(only(o, "reading-times").Pass) != "yes" {
		t.Errorf("%+v", o)
	}
	if why := only(o, "gain").Why; !strings.Contains(why, "XX 1, 2020 (own.yaml)") || strings.Contains(why, "from memory") {
		t.Errorf("why: %s", why)
	}
	if got := fmt.Sprint(Moments([]*Rule{r})); got != "[{86400 8640}]" {
		t.Errorf("moments %s", got)
	}
}

func TestMalformed(t *testing.T) {
	cases := []struct {
		name, from, to string
		at             string // LINE:COL or LINE
		what, mend     string
	}{
		{"unknown key", "title: A rule of our own", "titel: A rule of our own", "2:1", `unknown key "titel"`, "title"},
		{"wrongly cased key", "title: A rule of our own", "Title: A rule of our own", "2:1", `unknown key "Title"`, "title"},
		{"repeated key", `edition: "2020"`, "title: again", "4:1", `"title" stands here and in line 2`, "take one"},
		{"missing key", "standard: XX 1\n", "", "1:1", `no "standard"`, "RULES.md"},
		{"bad name", "rule: own", "rule: Own Rule", "1:7", `"Own Rule" is no name`, "small letters"},
		{"no source", "{name: day, value: 24 h, source: ours, confidence: choice}", "{name: day, value: 24 h, confidence: choice}", "6:5", `no "source"`, "RULES.md"},
		{"unknown confidence", "confidence: confirmed}", "confidence: certain}", "7:68", `"certain" is not known`, "memory-low"},
		{"bare time", "value: 24 h", "value: 24 m", "10:20", "is no time", "24 h"},
		{"no number", "value: 75 %", "value: many", "7:25", `"many" is no number`, "90 d"},
		{"value and detail", "detail: wanted_load, unit: N", "value: 3 N, detail: wanted_load, unit: N", "9:5", "a number has a value, or a detail", "design_load"},
		{"unknown unit of a detail", "unit: N,", "unit: stone,", "9:47", `unknown unit "stone"`, "kN"},
		{"number named like a figure", "name: tenth", "name: span", "8:5", `"span" is a name of the run's own figures`, "another name"},
		{"two numbers of a name", "name: tenth", "name: most", "8:5", "two numbers", "another name"},
		{"tolerance is no share", "tolerance: tenth", "tolerance: day", "10:37", `"day" is no share`, "5 %"},
		{"time is no time", "times: [day]", "times: [most]", "10:20", `"most" is no time`, "24 h"},
		{"unknown part", "part: criterion", "part: wish", "13:11", `"wish" is not known`, "figure"},
		{"unknown name in a formula", "- initial_sag) /", "- initial_sog) /", "14:26", `unknown name "initial_sog"`, "initial_sag"},
		{"unknown function", "(sag(day)", "(sink(day)", "14:15", `unknown function "sink"`, "recovered, sag"},
		{"function of no time", "(sag(day)", "(sag(most)", "14:15", `"most" in sag is no time`, "24 h"},
		{"bare time in a function", "(sag(day)", "(sag(24)", "14:19", "takes the name of a time", "sag(day)"},
		{"open bracket", "initial_sag) / initial_sag", "initial_sag / initial_sag", "14:51", `")" is missing`, "bracket"},
		{"two names in a row", ") / initial_sag", ") initial_sag", "14:39", "is not expected here", "operator"},
		{"formula ends early", ") / initial_sag", ") /", "14:40", "ends too early", "complete"},
		{"bad exponent", ") / initial_sag", ") / initial_sag^x", "14:53", "one digit", "depth^3"},
		{"dimension of the unit", `unit: "%"`, "unit: mm", "14:14", "a plain number, and mm is mm", "correct the formula"},
		{"sum of unlike things", "- initial_sag)", "- load)", "14:24", "mm and N cannot be added", "one dimension"},
		{"limit of another dimension", "at_most: most", "at_most: day", "16:14", "the formula gives s", "correct"},
		{"limit without a source", "at_most: most", "at_most: 0.75", "16:14", "a limit's number 0.75 has no source", "under numbers"},
		{"criterion without limit", "    at_most: most\n", "", "12:5", "requires nothing", "at_least"},
		{"figure with limit", "part: criterion", "part: figure", "12:5", "a figure requires nothing", "criterion"},
		{"determination with criterion", `edition: "2020"`, "edition: \"2020\"\ndetermination: true", "13:5", "has no criteria", "figure"},
		{"not yes or no", `edition: "2020"`, "edition: \"2020\"\ndetermination: perhaps", "5:16", "neither true nor false", "true or false"},
		{"each is no list", "part: criterion", "part: criterion\n    each: day", "14:11", "a list is wanted", "list"},
		{"t without each", "(sag(day)", "(sag(t)", "14:15", `"t" in sag is no time`, "numbers"},
		{"no mapping", sound, "just words\n", "1:1", "must be a mapping", "keys"},
		{"no YAML", "title: A rule of our own", "title: [A rule", "", "no YAML", "correct the line"},
		{"two documents", "clauses:", "clauses:\n---\n", "", "one document", "file of its own"},
		{"empty", sound, "", "1", "empty", "RULES.md"},
		{"long formula", "initial_sag) / initial_sag", "initial_sag) / initial_sag" + strings.Repeat(" * 1", 130), "14:14", "longer than", "split"},
	}
	for _, c := range cases {
		t.Run(c.name, func(t *testing.T) {
			text := strings.Replace(sound, c.from, c.to, 1)
			if text == sound {
				t.Fatal("the case changes nothing")
			}
			_, err := Parse("own.yaml", []byte(text))
			var list config.Problems
			if !errors.As(err, &list) || len(list) == 0 {
				t.Fatalf("not refused: %v", err)
			}
			for _, p := range list {
				if strings.HasPrefix(p.Where(), "own.yaml:"+c.at) && strings.Contains(p.What, c.what) && strings.Contains(p.Fix, c.mend) {
					return
				}
			}
			for _, p := range list {
				t.Errorf("%s: %s; mend: %s", p.Where(), p.What, p.Fix)
			}
			t.Errorf("wanted %s with %q and the mend %q", c.at, c.what, c.mend)
		})
	}
}

func TestOwnRulesGoFirst(t *testing.T) {
	text, err := os.ReadFile("rules/astm-d7032.yaml")
	if err != nil {
		t.Fatal(err)
	}
	confirmed := strings.ReplaceAll(string(text), "memory-low", "confirmed")
	own, err := LoadFolder(fstest.MapFS{"deck.yaml": {Data: []byte(confirmed)}, "notes.txt": {Data: []byte("no rule")}, "._x.yaml": {Data: []byte("no rule")}})
	if err != nil || len(own) != 1 {
		t.Fatalf("%d rules, %v", len(own), err)
	}
	rules, unknown := Pick([]string{"astm-d7032", "en-1156", "astm-d7032", "none-such"}, own)
	if len(rules) != 2 || rules[0] != own[0] || fmt.Sprint(unknown) != "[none-such]" {
		t.Fatalf("%d rules, unknown %v", len(rules), unknown)
	}
	f := full()
	f.Duration = Exactly(24 * 3600)
	o := Run(rules[:1], f)
	for _, clause := range []string{"load-level", "hold", "recovery"} {
		if c := only(o, clause); say(c.Pass) != "yes" || !strings.Contains(c.Why, "deck.yaml") {
			t.Errorf("%s: %s: %s", clause, say(c.Pass), c.Why)
		}
	}
}

func TestFolder(t *testing.T) {
	if own, err := LoadFolder(os.DirFS(t.TempDir() + "/none")); err != nil || own != nil {
		t.Errorf("a folder that is not there: %v, %v", own, err)
	}
	_, err := LoadFolder(fstest.MapFS{"a.yaml": {Data: []byte(sound)}, "b.yaml": {Data: []byte(sound)}, "c.yaml": {Data: []byte("x: 1")}})
	if err == nil || !strings.Contains(err.Error(), `b.yaml:1: a.yaml has a rule called "own" too`) || !strings.Contains(err.Error(), "c.yaml:1:1") {
		t.Errorf("%v", err)
	}
}

// FuzzParse: whatever the bytes, there is a rule or a list of problems, and a
// rule decides nothing without facts.
func FuzzParse(f *testing.F) {
	f.Add([]byte(sound))
	for _, r := range []string{"astm-d6815", "iso-899-2", "shelf"} {
		text, err := os.ReadFile("rules/" + r + ".yaml")
		if err != nil {
			f.Fatal(err)
		}
		f.Add(text)
	}
	f.Add([]byte("rule: &a x\nnumbers: [*a, {<<: *a}]\n"))
	f.Fuzz(func(t *testing.T, text []byte) {
		r, err := Parse("x.yaml", text)
		if (r == nil) == (err == nil) {
			t.Fatalf("rule %v and error %v", r, err)
		}
		if r == nil {
			return
		}
		for _, o := range Run([]*Rule{r}, &Facts{}) {
			if o.Pass != nil && len(drawsOf(r, o.Clause)) > 0 {
				t.Fatalf("decided without facts: %+v", o)
			}
		}
		Run([]*Rule{r}, full())
		Moments([]*Rule{r})
	})
}

// drawsOf lists what a clause draws from the run: a clause of numbers alone may
// be decided without a run.
func drawsOf(r *Rule, clause string) []string {
	for i := range r.Clauses {
		if r.Clauses[i].Clause == clause && len(r.Clauses[i].Each) == 0 {
			return r.Clauses[i].Inputs(r, "")
		}
	}
	return nil
}
