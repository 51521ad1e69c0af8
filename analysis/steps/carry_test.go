package steps

import (
	"math"
	"testing"
)

// The increment of a step holds none of what the older loads went on to creep.
func TestIncrementLeavesOlderCreepOut(t *testing.T) {
	w := plank()
	w.creep = 0.3
	f := w.find(t)
	for k := 1; k < len(w.changes); k++ {
		c := w.changes[k]
		old := *w
		old.changes = w.changes[:k]
		for _, g := range []int{2, 3, 4} {
			_, now := w.sag(g, c.at+60)
			_, then := old.sag(g, c.at+60)
			got := f.Steps[k+1].Gauges[g].Net.Increment
			if got == nil || math.Abs(got.MM-(now-then)) > 0.006 {
				t.Errorf("%s g%d: increment %+v, true %.4f", c.name, g+1, got, now-then)
			}
		}
	}
}

// No baseline holds a loaded reading, no step's points lie in another step,
// however late or early the marks are.
func TestNothingStraddlesAChange(t *testing.T) {
	for _, late := range []float64{-100, -30, 0, 30, 100} {
		w := plank()
		w.changes = w.changes[:4]
		w.length = 4000
		w.changes[0].late = late
		f := w.find(t)
		if len(f.Steps) != 5 {
			t.Fatalf("%d steps", len(f.Steps))
		}
		if first := at(w.changes[0].at); f.BaselineTo > first || f.BaselineFrom > f.BaselineTo || first-f.BaselineTo > 30*second {
			t.Errorf("mark %g s late: baseline ends %.1f s before the load", late, seconds(first-f.BaselineTo))
		}
		for _, tr := range f.Tracks {
			for _, p := range tr.Points {
				if s := f.Steps[p.Step]; p.Time < s.From || p.Time > s.To || p.Step > 0 && p.Time < s.Full {
					t.Fatalf("a point of step %s lies outside it", s.Name)
				}
			}
		}
	}
}

// A load too small for any gauge to show by itself is shown by all together.
func TestLoadTooSmallForOneGauge(t *testing.T) {
	w := quiet()
	w.creep, w.daily, w.every = 0, 0, 1
	w.loads = w.loads[:1]
	w.changes[0].newton = []float64{0.0017 / w.sagPer(1000, 700)}
	w.compliance = 0
	f := w.find(t)
	if s := f.Steps[1]; s.Response == nil || !*s.Response {
		t.Errorf("response %v", s.Response)
	}
}

// Every gauge moved as a load would move it, but the block that no load
// touches moved too: it was the bench.
func TestReferenceRulesALoadOut(t *testing.T) {
	w := quiet()
	for g, v := range w.influence() {
		by := 40 * v[0]
		if w.gauges[g].sees == "reference" {
			by = 0.05
		}
		w.happenings = append(w.happenings, happening{gauge: g, from: 9000, by: by})
	}
	f := w.find(t)
	for _, d := range f.Disturbances {
		if d.Kind == LoadChanged || d.Kind == SupportShift {
			t.Error(tell(f))
		}
	}
	if len(f.Disturbances) == 0 || len(f.Steps) != 2 {
		t.Errorf("%d steps%s", len(f.Steps), tell(f))
	}
}
