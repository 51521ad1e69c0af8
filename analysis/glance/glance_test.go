package glance

import (
	"fmt"
	"math"
	"os"
	"strings"
	"testing"
	"time"

	"gaugelog/analysis/history/historytest"
	"gaugelog/config"
	"gaugelog/ingest/segment"
)

const rigText = `specimen:
  name: strip
  section: {shape: rectangle, width: 20 mm, depth: 5 mm}
  length: 500 mm
supports: [{name: l, at: 0 mm}, {name: r, at: 500 mm}]
gauges: [{name: mid, at: 250 mm, sense: up, resolution: 0.01 mm}]
loads: [{name: pan, at: 250 mm}]
plan: [{step: zero, hold: 1 h}, {step: l1, set: {pan: 1 kg}, hold: 4 d}]
limits: {sag: 6 mm}
`

const t0 = int64(1790000000000000000)

// TestLook holds the figures to a run whose truth is its own formula: 2 mm at
// once when the load comes after an hour, then 0.1 mm a day, the gauge's sense up.
func TestLook(t *testing.T) {
	dir := t.TempDir()
	root, err := os.OpenRoot(dir)
	if err != nil {
		t.Fatal(err)
	}
	defer root.Close()
	var text strings.Builder
	for s := int64(0); s <= 3*86400; s += 60 {
		mm := 5.0
		if s >= 3600 {
			mm -= 2 + 0.1*float64(s-3600)/86400
		}
		fmt.Fprintf(&text, "indication,gauge=mid mm=%.6f %d\n", mm, t0+s*1e9)
	}
	for name, content := range map[string]string{
		"rig.yaml": rigText, "readings/000001.lp": text.String(),
		"marks.lp": fmt.Sprintf("load,name=pan id=\"m1\",newton=9.8,step=\"l1\" %d\n", t0+3600e9),
		"events.lp": fmt.Sprintf("event,kind=started detail=\"\",n=1i %d\nevent,gauge=mid,kind=alarm-raised detail=\"sag: too much\",n=1i %d\n"+
			"event,gauge=mid,kind=alarm-raised detail=\"knock: a jump\",n=1i %d\nevent,gauge=mid,kind=alarm-over detail=\"knock: a jump\",n=1i %d\n",
			t0, t0+7200e9, t0+7300e9, t0+7400e9),
	} {
		if err := os.MkdirAll(dir+"/readings", 0o755); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(dir+"/"+name, []byte(content), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	parsed := 0
	look := func() *Summary {
		s, err := LookAgain(segment.OSFS(root, segment.OSOptions{}), func(b, more []byte) (*config.Rig, error) {
			parsed++
			return Rig("rig.yaml", b, more)
		})
		if err != nil {
			t.Fatal(err)
		}
		return s
	}
	s := look()
	near := func(what string, got *float64, want, within float64) {
		t.Helper()
		if got == nil || math.Abs(*got-want) > within {
			t.Errorf("%s %v, want %g", what, got, want)
		}
	}
	near("sag", s.SagMM, 2+0.1*(3*86400-3600-300)/86400, 1e-3)
	near("rate", s.RateMMPerDay, 0.1, 1e-3)
	near("days to go", s.DaysToGo, 4-3+1.0/24, 1e-9)
	if s.Step != "l1" || s.Ended || len(s.Alarms) != 1 || s.Alarms[0] != "sag: too much" || *s.SagLimitMM != 6 {
		t.Errorf("%+v", s)
	}
	if again := look(); fmt.Sprint(*again.SagMM, again.Alarms, again.Last) != fmt.Sprint(*s.SagMM, s.Alarms, s.Last) || parsed != 1 {
		t.Errorf("the second look: %+v, parsed %d times", again, parsed)
	}
	// A reading more, and it is looked at anew.
	f, err := os.OpenFile(dir+"/readings/000001.lp", os.O_APPEND|os.O_WRONLY, 0)
	if err != nil {
		t.Fatal(err)
	}
	fmt.Fprintf(f, "indication,gauge=mid mm=2 %d\n", t0+3*86400e9+60e9)
	if err := f.Close(); err != nil {
		t.Fatal(err)
	}
	if third := look(); third.Last != t0+3*86400e9+60e9 || parsed != 2 {
		t.Errorf("after growing: %+v", third)
	}
}

func TestEmpty(t *testing.T) {
	root, err := os.OpenRoot(t.TempDir())
	if err != nil {
		t.Fatal(err)
	}
	defer root.Close()
	rig, err := config.Parse("rig.yaml", []byte(rigText))
	if err != nil {
		t.Fatal(err)
	}
	s, err := Look(segment.OSFS(root, segment.OSOptions{}), rig)
	if err != nil || s.Last != 0 || s.SagMM != nil || s.RateMMPerDay != nil || s.DaysToGo != nil {
		t.Errorf("%+v, %v", s, err)
	}
}

// TestManySegments: a run in many segments shows what it shows in one, wherever
// its first load and the day before its end lie.
func TestManySegments(t *testing.T) {
	var all [2]*Summary
	for i, roll := range []int64{50_000, 50_000_000} {
		root, err := os.OpenRoot(t.TempDir())
		if err != nil {
			t.Fatal(err)
		}
		defer root.Close()
		fsys := segment.OSFS(root, segment.OSOptions{SyncOnCloseOnly: true})
		run := historytest.Run{Gauges: 3, Readings: 30_000, Duration: 10 * 24 * time.Hour, Steps: 2, Compress: true, Roll: roll}
		if err := run.Write(fsys); err != nil {
			t.Fatal(err)
		}
		rig, err := config.Parse("rig.yaml", []byte(run.Rig()))
		if err != nil {
			t.Fatal(err)
		}
		names, err := segmentsOf(fsys)
		if err != nil || i == 0 && len(names) < 20 {
			t.Fatalf("%d segments, %v", len(names), err)
		}
		if all[i], err = Look(fsys, rig); err != nil {
			t.Fatal(err)
		}
	}
	many, one := all[0], all[1]
	if one.SagMM == nil || one.RateMMPerDay == nil || many.SagMM == nil || many.RateMMPerDay == nil {
		t.Fatalf("%+v\n%+v", many, one)
	}
	if *many.SagMM != *one.SagMM || *many.RateMMPerDay != *one.RateMMPerDay || many.Last != one.Last {
		t.Errorf("sag %g and %g, rate %g and %g", *many.SagMM, *one.SagMM, *many.RateMMPerDay, *one.RateMMPerDay)
	}
}

// TestRateAfterUnloading: the rate is never taken across a change of loads.
func TestRateAfterUnloading(t *testing.T) {
	dir := t.TempDir()
	root, err := os.OpenRoot(dir)
	if err != nil {
		t.Fatal(err)
	}
	defer root.Close()
	var text strings.Builder
	for s := int64(0); s <= 2*86400; s += 60 {
		mm := 5.0
		if s >= 3600 && s < 86400+7200 {
			mm -= 2
		}
		fmt.Fprintf(&text, "indication,gauge=mid mm=%.6f %d\n", mm, t0+s*1e9)
	}
	if err := os.Mkdir(dir+"/readings", 0o755); err != nil {
		t.Fatal(err)
	}
	for name, content := range map[string]string{"readings/000001.lp": text.String(),
		"marks.lp": fmt.Sprintf("load,name=pan newton=9.8 %d\nload,name=pan newton=0 %d\n", t0+3600e9, t0+(86400+7200)*1e9)} {
		if err := os.WriteFile(dir+"/"+name, []byte(content), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	rig, err := config.Parse("rig.yaml", []byte(rigText))
	if err != nil {
		t.Fatal(err)
	}
	s, err := Look(segment.OSFS(root, segment.OSOptions{}), rig)
	if err != nil || s.RateMMPerDay == nil || math.Abs(*s.RateMMPerDay) > 1e-9 || s.SagMM == nil || math.Abs(*s.SagMM) > 1e-9 {
		t.Errorf("%+v, %v", s, err)
	}
}

// TestAmended: what was learned after the start counts at a glance too.
func TestAmended(t *testing.T) {
	rig, err := Rig("rig.yaml", []byte(rigText), []byte(`- {path: limits.sag, value: 4 mm, why: new catcher, by: x, entered: 2026-10-01T08:00:00Z}
- {path: "plan[l1].hold", value: 9 d, since: 2026-10-02T08:00:00Z, why: goes on, by: x, entered: 2026-10-02T08:00:00Z}
`))
	if err != nil {
		t.Fatal(err)
	}
	if rig.Limits.Sag.Value != 4 || rig.Plan[1].Hold.Value != 9*86400 {
		t.Errorf("%v, %+v", rig.Limits.Sag, rig.Plan)
	}
	if _, err := Rig("rig.yaml", []byte(rigText), []byte("- {path: nowhere, value: 1}\n")); err == nil {
		t.Error("a wrong amendment is passed over")
	}
}
