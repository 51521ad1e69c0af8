package steps

import (
	"math"
	"testing"

	"gaugelog/analysis/history"
)

func touched(gauge, act string, s float64) history.Mark {
	return history.Mark{Kind: "touch", Gauge: gauge, Act: act, Time: at(s)}
}

// A gauge is zeroed a minute before the load is hung, or said to have been
// moved while it was: the load's jump is no offset.
func TestActBesideLoadTakesNoneOfIt(t *testing.T) {
	for _, s := range []float64{1740, 1801, 1830} {
		w := quiet()
		w.marks = []history.Mark{touched("g4", "zeroed", s)}
		f := w.find(t)
		if len(f.Tracks[3].Offsets) != 0 || len(f.Disturbances) != 0 || !warned(f, "act-without-response") {
			t.Errorf("marked at %.0f s: offsets %v, warnings %v%s", s, f.Tracks[3].Offsets, f.Warnings, tell(f))
		}
		compare(t, w, f, 0.004)
	}
}

// The same where the rig has one gauge: the nearer mark has the jump.
func TestActBesideLoadOfOneGauge(t *testing.T) {
	for _, s := range []float64{1740, 1830} {
		w := quiet()
		w.gauges = w.gauges[3:4]
		w.compliance = 0
		w.marks = []history.Mark{touched("g1", "zeroed", s)}
		f := w.find(t)
		if len(f.Tracks[0].Offsets) != 0 || f.Steps[1].Response == nil || !*f.Steps[1].Response {
			t.Errorf("marked at %.0f s: offsets %v, response %v", s, f.Tracks[0].Offsets, f.Steps[1].Response)
		}
	}
}

// A gauge is moved while the load is being hung: what it went beyond its part
// is the offset, and its increment is known no better than that part.
func TestMovedWithTheLoad(t *testing.T) {
	w := quiet()
	w.happenings = []happening{{gauge: 3, from: 1806, by: 3}}
	w.marks = []history.Mark{touched("g4", "moved", 1815)}
	f := w.find(t)
	if len(f.Tracks[3].Offsets) != 1 {
		t.Fatal(tell(f))
	}
	o := f.Tracks[3].Offsets[0].Value
	if math.Abs(o.MM-3) > 2*o.U || o.U < 0.01 {
		t.Errorf("offset %.3f, u %.3f", o.MM, o.U)
	}
	inc, other := f.Steps[1].Gauges[3].Gross.Increment, f.Steps[1].Gauges[2].Gross.Increment
	if inc.U < o.U || other.U > 0.01 {
		t.Errorf("increments' u: %.4f of the moved gauge, %.4f of another", inc.U, other.U)
	}
	if net := f.Steps[1].Gauges[3].Net.Increment; net.U < o.U {
		t.Errorf("net increment's u: %.4f", net.U)
	}
}

// While a gauge is off the beam it reads nothing of it: those readings are left
// out, and what it went in all is taken off.
func TestLiftedAndSetDown(t *testing.T) {
	w := quiet()
	w.happenings = []happening{{gauge: 3, from: 9000, to: 9600, by: -1.2}, {gauge: 3, from: 9600, by: 0.1}}
	w.marks = []history.Mark{touched("g4", "lifted", 9010), touched("g4", "set-down", 9620)}
	f := w.find(t)
	if o := f.Tracks[3].Offsets; len(o) != 2 || math.Abs(o[0].Value.MM+o[1].Value.MM-0.1) > 0.003 {
		t.Errorf("offsets %v", o)
	}
	for _, p := range f.Tracks[3].Points {
		if p.Time > at(9005) && p.Time < at(9595) {
			t.Fatalf("a point at %.0f s", seconds(p.Time-epoch))
		}
	}
}
