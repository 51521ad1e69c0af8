package steps

import (
	"math"
	"testing"
)

// unmark forgets the marks of the named changes.
func (w *world) unmark(names ...string) *world {
	for i := range w.changes {
		for _, n := range names {
			if w.changes[i].name == n {
				w.changes[i].late = math.NaN()
			}
		}
	}
	return w
}

// sags holds every found step's net initial sag against the world's truth.
func sags(t *testing.T, w *world, f *Findings, tol float64) {
	t.Helper()
	if len(f.Steps) != len(w.changes)+1 {
		t.Fatalf("%d steps, want %d", len(f.Steps), len(w.changes)+1)
	}
	for k, c := range w.changes {
		for _, g := range []int{2, 3, 4} {
			_, net := w.sag(g, c.at+c.ramp+60)
			got := f.Steps[k+1].Gauges[g].Net.Initial
			if got == nil || math.Abs(got.MM-net) > tol {
				t.Errorf("%s g%d: initial %+v, true %.4f", f.Steps[k+1].Name, g+1, got, net)
			}
		}
	}
}

// Nobody marked any change of load: sags still count from the unloaded beam,
// and no load is stated that nobody knows.
func TestNothingMarked(t *testing.T) {
	w := plank().unmark("s1", "s2", "s3", "s4", "bare")
	f := w.find(t)
	if f.Baseline != 0 {
		t.Errorf("baseline is step %d", f.Baseline)
	}
	sags(t, w, f, 0.004)
	for _, s := range f.Steps[1:] {
		if s.LoadsKnown || s.DeltaKnown {
			t.Errorf("%s: loads said to be known", s.Name)
		}
	}
	if n := f.Steps[3].Loads; len(n) != 0 {
		t.Errorf("loads after three unmarked changes: %v", n)
	}
}

// The first of several marks was forgotten.
func TestFirstMarkForgotten(t *testing.T) {
	w := plank().unmark("s1")
	f := w.find(t)
	if f.Baseline != 0 {
		t.Errorf("baseline is step %d", f.Baseline)
	}
	sags(t, w, f, 0.004)
}
