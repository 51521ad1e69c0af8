package steps

import (
	"math"
	"strings"
	"testing"

	"gaugelog/analysis/history"
)

// The unit key is pressed while nothing is read: the ratio tells all the same,
// as near as the others' creep meanwhile lets it.
func TestUnitKeyAcrossGap(t *testing.T) {
	w := quiet()
	w.silent = [][2]float64{{12000, 14400}}
	w.happenings = []happening{{gauge: 3, from: 13000, inch: true}}
	f := w.find(t)
	found := false
	for _, d := range f.Disturbances {
		switch d.Kind {
		case UnitKey:
			found = d.Gauges[0] == 3
		case GapKind:
		default:
			t.Error(tell(f))
		}
	}
	if !found {
		t.Error("no unit key:", tell(f))
	}
}

// The recorder saw the unit change and converted every reading: it is believed.
func TestUnitKeyOfTheEventLog(t *testing.T) {
	w := quiet()
	h := w.history(t)
	h.Events = []history.Event{
		{Kind: "unit-key", Gauge: "g4", Time: at(12000), Detail: "the gauge now shows in"},
		{Kind: "unit-key", Gauge: "g4", Time: at(15000), Detail: "the gauge now shows mm"},
	}
	f, err := Find(h, Options{Influence: w.influence()})
	if err != nil {
		t.Fatal(err)
	}
	d := only(t, f, UnitKey, 12000, 1)
	if d.To != at(15000) || len(f.Tracks[3].Offsets) != 0 || !strings.Contains(d.Evidence, "shows in") {
		t.Errorf("%+v", d)
	}
}

// A gauge is moved by a hair while nothing is read, less than its own lines
// beside the gap could tell: the others, which all went the same way, do.
func TestMovedALittleInAGap(t *testing.T) {
	w := quiet()
	w.every, w.length = 30, 20*3600
	w.daily = 0.02
	w.silent = [][2]float64{{30000, 36000}}
	w.happenings = []happening{{gauge: 3, from: 33000, by: 0.03}}
	f := w.find(t)
	found := false
	for _, d := range f.Disturbances {
		found = found || d.Kind == Undecided && len(d.Gauges) == 1 && d.Gauges[0] == 3 && math.Abs(d.Size.MM-0.03) < 2*d.Size.U+0.005
	}
	if !found || len(f.Disturbances) != 2 {
		t.Error(tell(f))
	}
}

// A support sinks into its packing over two hours: no reading jumps.
func TestSupportSettlesSlowly(t *testing.T) {
	m := drawMonth(41, 12)
	m.settles = settling{from: 5 * 86400, to: 5*86400 + 20000, mm: 3 * m.least}
	f := m.find(t)
	d := only(t, f, SupportShift, 5*86400, 30000)
	if d.To == 0 || math.Abs(d.Size.MM-3*m.least) > 0.3*3*m.least || d.Gauges[0] != 0 {
		t.Errorf("%+v, want %.4f mm", d, 3*m.least)
	}
}

// A gauge entered the wrong way round still answers its loads, so that the fit
// can say which it is.
func TestOneSenseReversedIsMatched(t *testing.T) {
	w := plank()
	h := w.history(t)
	h.Rig.Gauges[4].Sense = "up"
	f, err := Find(h, Options{Influence: w.influence()})
	if err != nil {
		t.Fatal(err)
	}
	if len(f.Steps) != len(w.changes)+1 || len(f.Disturbances) != 0 {
		t.Fatalf("%d steps%s", len(f.Steps), tell(f))
	}
	for _, s := range f.Steps[1:] {
		if s.Response == nil || !*s.Response {
			t.Errorf("%s: no response", s.Name)
		}
	}
}

// One roller without a gauge: half is corrected, the rest widens.
func TestOneSidedChordIsWidened(t *testing.T) {
	w := quiet()
	w.compliance = 5e-4
	both := w.find(t)
	w.gauges[5].sees, w.gauges[5].at = "", 1900 // no longer over the right support
	one := w.find(t)
	if one.Chord.How != "one-sided" || !warned(one, "one-sided-support-gauge") {
		t.Fatalf("%+v", one.Chord)
	}
	a, b := both.Steps[1].Gauges[3].Net.Final, one.Steps[1].Gauges[3].Net.Final
	if b.U < 3*a.U || math.Abs(a.MM-b.MM) > 2*b.U {
		t.Errorf("both supports %+v, one %+v", a, b)
	}
}
