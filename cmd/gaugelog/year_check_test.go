package main

import (
	"bytes"
	"cmp"
	"encoding/json"
	"fmt"
	"math"
	"slices"
	"strings"
	"testing"
	"time"

	"gaugelog/analysis"
	"gaugelog/config"
	"gaugelog/ingest/segment"
	"gaugelog/simulators"
)

// check holds the folder against the simulator's log.
func (y *year) check(t *testing.T) {
	t.Helper()
	v, err := segment.Verify(y.disk)
	if err != nil {
		t.Fatal(err)
	}
	if !v.Whole() {
		t.Fatalf("damage: %v", v.Damage)
	}
	folder, err := segment.OpenFolder(y.disk)
	if err != nil {
		t.Fatal(err)
	}
	dropped := y.checkReadings(t, folder)
	y.checkMarks(t, folder)
	y.checkEvents(t, folder, dropped)
	if yearAnalysed {
		y.checkSteps(t)
	}
}

// expected lists, by gauge, the readings that the rule stores and that no power
// cut took before they were synced.
func (y *year) expected(t *testing.T) (byGauge [][]*takenReading, sampled, lost int) {
	byGauge = make([][]*takenReading, len(y.rig.Gauges))
	marks := y.marks()
	frames := y.frames
	for i, life := range y.lives {
		boot := func(true int64) int64 { return true - life.from }
		lastChange := int64(0) // the start, where nothing was marked yet
		for _, m := range y.marks() {
			if m <= life.from {
				lastChange = boot(m)
			}
		}
		unset := i == len(y.lives)-1 // until y.setAt, which makes that mark look younger
		if unset {
			lastChange -= yearWrong
		}
		l := &ruleLife{rule: y.rule, change: lastChange, gauges: make([]ruleGauge, len(y.rig.Gauges))}
		for len(frames) > 0 && frames[0].true < life.to {
			f := frames[0]
			frames = frames[1:]
			for len(marks) > 0 && marks[0] <= f.true {
				if marks[0] > life.from {
					l.marked(boot(marks[0]), boot(marks[0]))
				}
				marks = marks[1:]
			}
			if unset && f.true >= y.wall(y.setAt) {
				unset = false
				l.change += yearWrong
			}
			l.take(&takenReading{gauge: f.gauge, true: f.true, boot: boot(f.true), mm: f.mm})
		}
		for _, r := range l.history {
			switch {
			case r.stored && r.true <= life.synced:
				byGauge[r.gauge] = append(byGauge[r.gauge], r)
				sampled++
			case r.stored:
				lost++
				if age := life.to - r.true; age > 10e9 {
					t.Errorf("a reading of %.1f s before the cut was not synced; a sync is due every 10 s", float64(age)/1e9)
				}
			}
		}
	}
	return byGauge, sampled, lost
}

// marks are the instants of the marks of the simulator's log.
func (y *year) marks() (at []int64) {
	for _, s := range y.sim.Steps() {
		if s.Marked >= 0 {
			at = append(at, y.wall(s.Marked))
		}
	}
	return at
}

// checkReadings wants what is expected and nothing else, but for what did not
// find room in memory while the disk was full: a stretch of each gauge, which is
// returned for its events to be checked.
func (y *year) checkReadings(t *testing.T, folder *segment.Folder) map[string][]*takenReading {
	t.Helper()
	want, sampled, lost := y.expected(t)
	found := make([][]segment.Record, len(want))
	r := folder.Read(segment.ReadOptions{})
	defer r.Close()
	for rec, err := range r.Records() {
		if err != nil {
			t.Fatal(err)
		}
		g := slices.IndexFunc(y.rig.Gauges, func(g config.Gauge) bool { return g.Name == rec.Name })
		found[g] = append(found[g], rec)
	}
	if rep := r.Report(); len(rep.Damage)+len(rep.Quarantined)+len(rep.Unset) > 0 {
		t.Errorf("the reader reports %+v", rep)
	}
	dropped := map[string][]*takenReading{}
	missing, total := 0, 0
	for g := range want {
		name := y.rig.Gauges[g].Name
		if !y.rule.all { // what memory gave back late stands behind younger ones
			slices.SortFunc(found[g], func(a, b segment.Record) int { return cmp.Compare(a.Time, b.Time) })
		}
		i := 0
		for _, w := range want[g] {
			if i < len(found[g]) && found[g][i].Time == w.true {
				if found[g][i].MM != w.mm {
					t.Fatalf("%s: %g mm stored at %d, it showed %g", name, found[g][i].MM, w.true, w.mm)
				}
				i++
				continue
			}
			dropped[name] = append(dropped[name], w)
			missing++
		}
		if i < len(found[g]) {
			t.Fatalf("%s: the reading at %s is not one the rule stores, or stands in the wrong place or twice",
				name, time.Unix(0, found[g][i].Time).UTC().Format(time.RFC3339Nano))
		}
		total += len(found[g])
	}
	if wantMissing := y.run.mostWaiting > 0; wantMissing != (missing > 0) {
		t.Errorf("%d readings are missing", missing)
		for name, list := range dropped {
			t.Errorf("%s: %d, the first at %s", name, len(list), time.Unix(0, list[0].true).UTC().Format(time.RFC3339Nano))
		}
	}
	t.Logf("%.4g days in %s: %d frames sent, %d of them stored by the rule and %d found, each in its place; %d not yet synced at the two power cuts; %d without room while the disk was full",
		*yearDays, y.took.Round(time.Millisecond), len(y.frames), sampled+lost, total, lost, missing)
	return dropped
}

// checkMarks wants the marks of the simulator's log, each once, with its loads.
func (y *year) checkMarks(t *testing.T, folder *segment.Folder) {
	t.Helper()
	records, _, err := folder.Log(segment.MarksFile)
	if err != nil {
		t.Fatal(err)
	}
	var got, want []string
	for _, r := range records {
		kg, _ := r.Point.Value("kilogram")
		step, _ := r.Point.Value("step")
		got = append(got, fmt.Sprintf("%d %s %v %v kg", r.Time, step, r.Name, kg))
	}
	for i, s := range y.sim.Steps() {
		for _, set := range y.rig.Plan[i].Set {
			want = append(want, fmt.Sprintf("%d %s %s %v kg", y.wall(s.Marked), s.Step, set.Load, set.Weight.Mass.Value))
		}
	}
	slices.Sort(got)
	slices.Sort(want)
	if !slices.Equal(got, want) {
		t.Errorf("marks:\n%s\nwant:\n%s", strings.Join(got, "\n"), strings.Join(want, "\n"))
	}
}

// checkEvents wants one event of each thing that happened, and no other.
func (y *year) checkEvents(t *testing.T, folder *segment.Folder, dropped map[string][]*takenReading) {
	t.Helper()
	records, _, err := folder.Log(segment.EventsFile)
	if err != nil {
		t.Fatal(err)
	}
	count := map[string]int{}
	for _, r := range records {
		detail, _ := r.Point.Value("detail")
		n, _ := r.Point.Value("n")
		from, _ := r.Point.Value("from")
		count[r.Name]++
		switch r.Name {
		case "gap":
			i := count["gap"]
			if i >= len(y.lives) || r.Time != y.lives[i].from || from != y.lives[i-1].synced {
				t.Errorf("a gap from %v to %d: %v", from, r.Time, detail)
			}
		case "clock-stepped":
			if text := detail.(string); !strings.Contains(text, "stepped by +10800.000 s") || !strings.Contains(text, "recorded for 2h0m") {
				t.Errorf("the step of the clock says %q", text)
			}
			if late := r.Time - y.wall(y.setAt); late < 0 || late > 60e9 {
				t.Errorf("the step of the clock was seen %.1f s after it", float64(late)/1e9)
			}
		case "disk-full":
			if late := r.Time - y.wall(y.full.From); late < 0 || late > 16*60e9 { // the longest interval
				t.Errorf("the full disk was told of %.1f s after it", float64(late)/1e9)
			}
		case "dropped":
			list := dropped[r.Point.Tag("gauge")]
			if len(list) == 0 || n != int64(len(list)) || from != list[0].true {
				t.Errorf("%s: %v dropped from %v, %d are missing", r.Point.Tag("gauge"), n, from, len(list))
			}
		}
	}
	want := map[string]int{"started": 3, "stopped": 1, "gap": 2, "clock-stepped": 1, "disk-full": 1, "disk-back": 2, "dropped": len(dropped)}
	if len(dropped) == 0 {
		delete(want, "dropped")
	}
	if fmt.Sprint(count) != fmt.Sprint(want) {
		t.Errorf("events %v, want %v", count, want)
		for _, r := range records {
			detail, _ := r.Point.Value("detail")
			t.Logf("%s %s %s %v", time.Unix(0, r.Time).UTC().Format(time.RFC3339), r.Name, r.Point.Tag("gauge"), detail)
		}
	}
	for name, list := range dropped {
		for _, d := range list {
			if d.true < y.wall(y.full.From) || d.true > y.wall(y.full.To)+70e9 {
				t.Errorf("%s: the reading at %d is missing, and the disk was not full", name, d.true)
			}
		}
	}
}

// checkSteps analyses the folder and wants the steps and loads of the log.
func (y *year) checkSteps(t *testing.T) {
	t.Helper()
	dir := y.folder(t)
	began := time.Now()
	var out, errOut bytes.Buffer
	if code := run([]string{"analyse", dir, "--json"}, strings.NewReader(""), &out, &errOut); code != Done {
		t.Fatalf("analyse ends with %d: %s", code, &errOut)
	}
	var r analysis.Result
	if err := json.Unmarshal(out.Bytes(), &r); err != nil {
		t.Fatal(err)
	}
	t.Logf("analysed in %s", time.Since(began).Round(time.Millisecond))
	truth := y.sim.Steps()
	if len(r.Steps) != len(truth) {
		t.Errorf("%d steps, the log has %d", len(r.Steps), len(truth))
	}
	for i := range min(len(truth), len(r.Steps)) {
		y.checkStep(t, &r.Steps[i], &truth[i])
	}
	y.checkDisturbances(t, r.Disturbances)
}

// checkDisturbances wants nothing but the gaps: nothing else happened.
func (y *year) checkDisturbances(t *testing.T, list []analysis.Disturbance) {
	t.Helper()
	for _, d := range list {
		if d.Kind != "gap" {
			t.Errorf("a %s of %v at %s was reported and never happened", d.Kind, d.Gauges, d.From)
		}
	}
}

func (y *year) checkStep(t *testing.T, got *analysis.Step, want *simulators.StepTruth) {
	t.Helper()
	if got.Step != want.Step {
		t.Errorf("step %s, the log has %s", got.Step, want.Step)
		return
	}
	for _, l := range want.Loads {
		near(t, fmt.Sprintf("step %s: load %s, N", want.Step, l.Name), got.Loads[l.Name], l.Newton, 1e-6*(1+l.Newton))
	}
	if want.Marked < 0 {
		return
	}
	at := func(text *string) float64 {
		if text == nil {
			t.Errorf("step %s lacks an instant", want.Step)
			return math.NaN()
		}
		i, err := time.Parse(time.RFC3339Nano, *text)
		if err != nil {
			t.Fatal(err)
		}
		return float64(i.UnixNano()-y.wall(0)) / 1e9
	}
	near(t, want.Step+" marked, s", at(got.Start.Marked), float64(want.Marked)/1e9, 1e-9)
	near(t, want.Step+" found, s", at(got.Start.Found), float64(want.From)/1e9, 2)
	if got.Response == nil || !*got.Response {
		t.Errorf("step %s: no response", want.Step)
	}
}
