package steps

import (
	"math"
	"strings"
	"testing"

	"gaugelog/analysis/history"
	"gaugelog/config"
)

// ruled is what Find says once a person has decided something.
func (w *world) ruled(t *testing.T, path, value string) *Findings {
	t.Helper()
	w.amend = []config.Amendment{{Path: path, Value: value, Why: "seen"}}
	f := w.find(t)
	if len(f.Decisions) != 1 || warned(f, "decision-without-object") || warned(f, "decision-not-understood") {
		t.Fatalf("%s: decisions %v, warnings %v", path, f.Decisions, f.Warnings)
	}
	return f
}

func on(s float64) string { return "decisions[disturbance " + stamp(s) + "].kind" }

// A gauge said to be frozen was not: its readings stand, and its jump at the
// end is no knock.
func TestFrozenOverruled(t *testing.T) {
	w := quiet()
	w.happenings = []happening{{gauge: 3, from: 6000, to: 16000, freeze: true}}
	f := w.ruled(t, on(6000), "none")
	if len(f.Disturbances) != 0 || len(f.Excluded) != 0 || len(f.Tracks[3].Offsets) != 0 {
		t.Errorf("excluded %v, offsets %v%s", f.Excluded, f.Tracks[3].Offsets, tell(f))
	}
	f = w.ruled(t, "decisions[disturbance "+stamp(6000)+" g4].kind", "end-of-travel")
	if d := only(t, f, EndOfTravel, 6000, 60); !strings.Contains(d.Evidence, "decided by a person") {
		t.Error(d.Evidence)
	}
}

// What looked like one gauge's knock was a load: it stands, as a step.
func TestKnockOverruledAsLoad(t *testing.T) {
	w := quiet()
	w.happenings = []happening{{gauge: 2, from: 15000, by: 0.062}}
	f := w.ruled(t, on(15000), "load-change")
	if len(f.Steps) != 3 || f.Steps[2].Name != "unmarked-1" || f.Steps[2].LoadsKnown || len(f.Tracks[2].Offsets) != 0 {
		t.Errorf("%d steps, offsets %v%s", len(f.Steps), f.Tracks[2].Offsets, tell(f))
	}
}

// What went down along one support's line was a load: its estimate is not the
// support's millimetres.
func TestSupportOverruledAsLoad(t *testing.T) {
	w := quiet()
	w.fallSupport, w.fallAt = 0.08, 13000
	f := w.ruled(t, on(13000), "load-change")
	if d := f.Disturbances[0]; d.Kind != LoadChanged || d.Load != nil && math.Abs(d.Load.MM) < 1 {
		t.Errorf("%+v", d)
	}
}

// "None" covers a happening from its beginning to its end.
func TestTemporaryOverruled(t *testing.T) {
	tool := quiet()
	tool.temporaryLoad = [3]float64{15, 12000, 15600}
	touch := quiet()
	touch.happenings = []happening{{gauge: 3, from: 12000, to: 12600, by: 0.4}}
	for _, w := range []*world{tool, touch} {
		if f := w.ruled(t, on(12000), "none"); len(f.Disturbances) != 0 || len(f.Excluded) != 0 || len(f.Steps) != 2 {
			t.Errorf("%d steps, excluded %v%s", len(f.Steps), f.Excluded, tell(f))
		}
	}
	f := tool.ruled(t, on(12000), "spike")
	only(t, f, Spike, 12000, 10)
}

// A decision that names a gauge is about that gauge's part alone.
func TestOneGaugesPartOverruled(t *testing.T) {
	w := quiet()
	for g := range w.gauges {
		w.happenings = append(w.happenings, happening{gauge: g, from: 9000, by: 0.05})
	}
	f := w.ruled(t, "decisions[disturbance "+stamp(9000)+" g3].kind", "none")
	if d := only(t, f, BenchKnock, 9000, 10); len(d.Gauges) != len(w.gauges)-1 || len(f.Tracks[2].Offsets) != 0 || len(f.Tracks[3].Offsets) != 1 {
		t.Errorf("gauges %v", d.Gauges)
	}
	f = w.ruled(t, "decisions[disturbance "+stamp(9000)+" g3].kind", "gauge-knock")
	if len(f.Disturbances) != 2 || len(f.Tracks[2].Offsets) != 1 || len(f.Tracks[3].Offsets) != 1 {
		t.Error(tell(f))
	}
}

// A person knows better when a load went on, and whether it did.
func TestStepOverruled(t *testing.T) {
	w := quiet()
	if s := w.ruled(t, "decisions[step s1].found", stamp(1795)).Steps[1]; s.Found != at(1795) || s.From != s.Found || s.StartU != 0 {
		t.Errorf("found %.1f, u %g", seconds(s.Found-epoch), s.StartU)
	}
	if s := w.ruled(t, "decisions[step s1].full", stamp(1830)).Steps[1]; s.Full != at(1830) || math.Abs(s.RampS-29.6) > 3 {
		t.Errorf("full load %.1f, ramp %.1f s", seconds(s.Full-epoch), s.RampS)
	}
	w.marks = []history.Mark{{Kind: "load", Load: "loada", Newton: 400, Step: "ghost", Time: at(12000)}}
	if s := w.ruled(t, "decisions[step ghost].response", "true").Steps[2]; !*s.Response {
		t.Error("no response")
	}
	w = quiet()
	w.changes = append(w.changes, wchange{at: 12000, late: math.NaN(), newton: []float64{280, 171.8}})
	if s := w.ruled(t, "decisions[step unmarked-1].full", stamp(12060)).Steps[2]; s.Full != at(12060) {
		t.Errorf("full load %.1f", seconds(s.Full-epoch))
	}
}

// A person leaves an hour of one gauge out.
func TestHourLeftOut(t *testing.T) {
	w := quiet()
	f := w.ruled(t, "decisions[exclude g4 "+stamp(9000)+" "+stamp(12600)+"]", "true")
	for _, p := range f.Tracks[3].Points {
		if p.Time > at(9060) && p.Time < at(12540) {
			t.Fatalf("a point at %.0f s", seconds(p.Time-epoch))
		}
	}
	if len(f.Tracks[2].Points) <= len(f.Tracks[3].Points) {
		t.Error("other gauges lost points too")
	}
}
