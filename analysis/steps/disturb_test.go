package steps

import (
	"fmt"
	"math"
	"strings"
	"testing"

	"gaugelog/analysis/history"
	"gaugelog/config"
)

// tell lists disturbances as kind, gauges and hours, for messages.
func tell(f *Findings) string {
	var b strings.Builder
	for _, d := range f.Disturbances {
		fmt.Fprintf(&b, "\n  %s %v at %.1f s to %.1f: %s", d.Kind, d.Gauges, seconds(d.From-epoch), seconds(max(d.To-epoch, 0)), d.Evidence)
	}
	return b.String()
}

// only returns the one disturbance a story has.
func only(t *testing.T, f *Findings, kind Kind, at float64, within float64) Disturbance {
	t.Helper()
	if len(f.Disturbances) != 1 {
		t.Fatalf("%d disturbances, want one %s:%s", len(f.Disturbances), kind, tell(f))
	}
	d := f.Disturbances[0]
	if d.Kind != kind || math.Abs(seconds(d.From-epoch)-at) > within {
		t.Fatalf("want %s at %.1f:%s", kind, at, tell(f))
	}
	return d
}

// quiet is the plank with one load step, watched for some hours.
func quiet() *world {
	w := plank()
	w.changes = []wchange{{at: 1800.4, late: 5, newton: []float64{319, 171.8}, name: "s1"}}
	w.length = 6 * 3600
	w.every = 5
	return w
}

// Somebody's finger rests on one gauge for two minutes.
func TestSpikeOfTwoMinutes(t *testing.T) {
	w := quiet()
	w.happenings = []happening{{gauge: 3, from: 10000, to: 10120, by: 0.4}}
	f := w.find(t)
	d := only(t, f, Spike, 10000, 10)
	if d.To-d.From > 140*second || len(d.Gauges) != 1 || d.Gauges[0] != 3 || math.Abs(d.Size.MM-0.4) > 0.01 {
		t.Errorf("%+v", d)
	}
	compare(t, w, f, 0.004)
}

// A single wild reading.
func TestSpikeOfOneReading(t *testing.T) {
	w := quiet()
	w.happenings = []happening{{gauge: 2, from: 12001, to: 12006, by: -0.05}}
	d := only(t, w.find(t), Spike, 12000, 10)
	if len(d.Gauges) != 1 || d.Gauges[0] != 2 {
		t.Errorf("%+v", d)
	}
}

// A trolley hits the bench: every gauge moves, the reference too.
func TestBenchKnock(t *testing.T) {
	w := quiet()
	for g := range w.gauges {
		w.happenings = append(w.happenings, happening{gauge: g, from: 9000, by: 0.05})
	}
	f := w.find(t)
	d := only(t, f, BenchKnock, 9000, 10)
	if len(d.Gauges) != len(w.gauges) {
		t.Errorf("gauges %v", d.Gauges)
	}
	// Net sags at the end are as if it had not happened.
	_, net := w.sag(3, w.length)
	if got := f.Steps[1].Gauges[3].Gross.Final; math.Abs(got.MM-net-w.support(3)) > 0.008 {
		t.Errorf("final %.4f, true %.4f", got.MM, net+w.support(3))
	}
}

// support is what of a gauge's movement at the end is its supports'.
func (w *world) support(g int) float64 {
	gross, net := w.sag(g, w.length)
	return gross - net
}

// One stand is knocked while cleaning.
func TestGaugeKnock(t *testing.T) {
	w := quiet()
	w.happenings = []happening{{gauge: 2, from: 15000, by: 0.062}}
	f := w.find(t)
	d := only(t, f, GaugeKnock, 15000, 10)
	if d.Gauges[0] != 2 || math.Abs(d.Size.MM-0.062) > 0.002 {
		t.Errorf("%+v", d)
	}
	_, net := w.sag(2, w.length)
	if got := f.Steps[1].Gauges[2].Net.Final; math.Abs(got.MM-net) > 0.008 {
		t.Errorf("final %.4f, true %.4f", got.MM, net)
	}
}

// Somebody presses zero on a sagged beam.
func TestZeroPressed(t *testing.T) {
	w := quiet()
	w.happenings = []happening{{gauge: 3, from: 14000, zero: true}}
	d := only(t, w.find(t), ZeroPressed, 14000, 10)
	gross, _ := w.sag(3, 14000)
	if d.Gauges[0] != 3 || math.Abs(d.Size.MM+3+gross) > 0.02 {
		t.Errorf("size %+v, want %.3f", d.Size, -3-gross)
	}
}

// The same marked, on a gauge that shows its preset and not zero.
func TestMarkedActIsBelieved(t *testing.T) {
	w := quiet()
	w.happenings = []happening{{gauge: 3, from: 14000, by: -2}}
	w.marks = []history.Mark{{Kind: "touch", Gauge: "g4", Act: "zeroed", Time: at(14030)}}
	d := only(t, w.find(t), ZeroPressed, 14000, 10)
	if !d.Marked || math.Abs(d.Size.MM+2) > 0.003 {
		t.Errorf("%+v", d)
	}
}

// A disc falls off the hanger in the night, and nobody marks it.
func TestLoadFallsOff(t *testing.T) {
	w := quiet()
	w.changes = append(w.changes, wchange{at: 12000, late: math.NaN(), newton: []float64{280, 171.8}})
	f := w.find(t)
	d := only(t, f, LoadChanged, 12000, 10)
	if d.Load == nil || math.Abs(d.Load.MM+39) > 2 || d.Which != "loada" {
		t.Errorf("load %+v of %s", d.Load, d.Which)
	}
	if len(f.Steps) != 3 || f.Steps[2].Name != "unmarked-1" || !f.Steps[2].Unmarked {
		t.Errorf("steps %d", len(f.Steps))
	}
}

// Somebody leaves a tool on the beam for an hour.
func TestToolOnTheBeam(t *testing.T) {
	w := quiet()
	w.temporaryLoad = [3]float64{15, 12000, 15600}
	f := w.find(t)
	d := only(t, f, LoadChanged, 12000, 10)
	if d.Load == nil || math.Abs(d.Load.MM-15) > 1 || math.Abs(seconds(d.To-epoch)-15600) > 10 || len(f.Steps) != 2 {
		t.Errorf("%+v, %d steps", d, len(f.Steps))
	}
}

// The left support's packing crushes.
func TestSupportShift(t *testing.T) {
	w := quiet()
	w.fallSupport, w.fallAt = 0.08, 13000
	f := w.find(t)
	only(t, f, SupportShift, 13000, 10)
	compare(t, w, f, 0.004)
	if v := f.Supports[0].Value; v == nil || math.Abs(v.MM-0.08-0.25e-3*(319*2/3.0+171.8/3)) > 0.01 {
		t.Errorf("settlement %+v", v)
	}
}

// The unit key is pressed, and pressed back the next hour.
func TestUnitKey(t *testing.T) {
	w := quiet()
	w.happenings = []happening{{gauge: 3, from: 12000, to: 15000, inch: true}}
	f := w.find(t)
	d := only(t, f, UnitKey, 12000, 10)
	if d.Gauges[0] != 3 || math.Abs(seconds(d.To-epoch)-15000) > 10 {
		t.Errorf("%+v", d)
	}
	_, net := w.sag(3, w.length)
	if got := f.Steps[1].Gauges[3].Net.Final; math.Abs(got.MM-net) > 0.008 {
		t.Errorf("final %.4f, true %.4f", got.MM, net)
	}
}

// A gauge's display holds while the beam creeps on.
func TestFrozen(t *testing.T) {
	w := quiet()
	w.happenings = []happening{{gauge: 3, from: 6000, to: 16000, freeze: true}}
	d := only(t, w.find(t), Frozen, 6000, 60)
	if d.Gauges[0] != 3 || math.Abs(seconds(d.To-epoch)-16000) > 60 {
		t.Errorf("%+v", d)
	}
}

// A gauge runs out of travel under the load.
func TestEndOfTravel(t *testing.T) {
	w := quiet()
	gross, _ := w.sag(3, 5000)
	w.travel = [2]float64{-20, math.Round((3+gross)*1000) / 1000}
	f := w.find(t)
	d := only(t, f, EndOfTravel, 5000, 120)
	if d.Gauges[0] != 3 || f.Steps[1].Gauges[3].Net.Initial == nil {
		t.Errorf("%+v", d)
	}
}

// A power cut of forty minutes in which nothing moved is just a gap.
func TestGapAlone(t *testing.T) {
	w := quiet()
	w.silent = [][2]float64{{12000, 14400}}
	d := only(t, w.find(t), GapKind, 12000, 10)
	if math.Abs(seconds(d.To-epoch)-14400) > 10 {
		t.Errorf("%+v", d)
	}
}

// Something moved while nothing was read: it stays undecided, with an offset.
func TestMovedInAGap(t *testing.T) {
	w := quiet()
	w.silent = [][2]float64{{12000, 14400}}
	w.happenings = []happening{{gauge: 2, from: 13000, by: 0.3}}
	f := w.find(t)
	if len(f.Disturbances) != 2 {
		t.Fatal(tell(f))
	}
	var u *Disturbance
	for i := range f.Disturbances {
		if f.Disturbances[i].Kind == Undecided {
			u = &f.Disturbances[i]
		}
	}
	if u == nil || len(u.Candidates) == 0 || u.Candidates[0] != GaugeKnock || len(f.Tracks[2].Offsets) != 1 {
		t.Fatal(tell(f))
	}
	if o := f.Tracks[2].Offsets[0]; math.Abs(o.Value.MM-0.3) > 4*o.Value.U {
		t.Errorf("offset %+v", o)
	}
}

// A mark for nothing keeps its step and says so.
func TestMarkWithoutResponse(t *testing.T) {
	w := quiet()
	w.marks = []history.Mark{{Kind: "load", Load: "loada", Newton: 400, Step: "ghost", Time: at(12000)}}
	f := w.find(t)
	if len(f.Steps) != 3 || f.Steps[2].Response == nil || *f.Steps[2].Response {
		t.Fatalf("steps %+v", f.Steps)
	}
	if len(f.Disturbances) != 0 {
		t.Error(tell(f))
	}
}

// A person says the knock was a load, or nothing at all.
func TestDecisionOverrules(t *testing.T) {
	w := quiet()
	w.happenings = []happening{{gauge: 2, from: 15000, by: 0.062}}
	w.amend = []config.Amendment{{Path: "decisions[disturbance " + stamp(15000) + "].kind", Value: "none", Why: "seen"}}
	f := w.find(t)
	if len(f.Disturbances) != 0 || len(f.Decisions) != 1 || len(f.Tracks[2].Offsets) != 0 {
		t.Error(tell(f), f.Decisions)
	}
	w.amend[0].Value = "zero-pressed"
	f = w.find(t)
	if len(f.Disturbances) != 1 || f.Disturbances[0].Kind != ZeroPressed {
		t.Error(tell(f))
	}
}

// warned says whether a warning of this code was given.
func warned(f *Findings, code string) bool {
	for _, w := range f.Warnings {
		if w.Code == code {
			return true
		}
	}
	return false
}

// Bad input gets a plain message each, and what can be computed is.
func TestBadInput(t *testing.T) {
	short := plank()
	short.every, short.length = 600, 6*3600
	short.changes = []wchange{
		{at: 3610, late: 0, newton: []float64{100, 0}, name: "s1"},
		{at: 3700, late: 0, newton: []float64{200, 0}, name: "s2"},
	}
	twice := quiet()
	twice.marks = []history.Mark{{Kind: "load", Load: "loada", Newton: 12, Time: at(1806)}}
	loaded := quiet()
	loaded.marks = []history.Mark{{Kind: "load", Load: "loada", Newton: 50, Time: at(-100)}}
	still := quiet()
	still.creep, still.ei, still.compliance, still.daily = 0, 1e30, 0, 0
	for i := range still.gauges {
		still.gauges[i].noise = 0
	}
	bare := quiet()
	bare.changes = nil
	stranger := quiet()
	stranger.marks = []history.Mark{{Kind: "load", Load: "bucket", Newton: 50, Time: at(5000)}, {Kind: "touch", Gauge: "g99", Act: "moved", Time: at(5000)}}
	decision := quiet()
	decision.amend = []config.Amendment{{Path: "decisions[whatever]", Value: "x", Why: "y"}}
	for _, c := range []struct {
		code string
		w    *world
	}{
		{"step-shorter-than-sampling", short},
		{"contradictory-marks", twice},
		{"baseline-loaded", loaded},
		{"all-gauges-still", still},
		{"no-loads-marked", bare},
		{"unknown-load", stranger},
		{"unknown-gauge", stranger},
		{"decision-not-understood", decision},
	} {
		f := c.w.find(t)
		if !warned(f, c.code) {
			t.Errorf("%s: not among %v", c.code, f.Warnings)
		}
		if len(f.Tracks[3].Points) == 0 {
			t.Errorf("%s: nothing was computed", c.code)
		}
	}
}
