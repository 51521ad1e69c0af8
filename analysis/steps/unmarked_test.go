package steps

import (
	"math"
	"slices"
	"strings"
	"testing"

	"gaugelog/analysis/history"
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

// A mark in the middle was forgotten, and the next is one of the same load: its
// delta is false, and must poison neither the estimate nor what stiffness uses.
func TestMiddleMarkForgotten(t *testing.T) {
	for _, given := range []bool{true, false} {
		w := plank().unmark("s2")
		w.noInfluence, w.sparse = !given, true
		f := w.find(t)
		sags(t, w, f, 0.004)
		known := map[string][2]bool{ // loads, delta
			"zero": {true, true}, "s1": {true, true}, "unmarked-1": {false, false}, "s3": {false, true}, "s4": {true, false}, "bare": {true, true},
		}
		for _, s := range f.Steps {
			if got := [2]bool{s.LoadsKnown, s.DeltaKnown}; got != known[s.Name] {
				t.Errorf("influence %v, %s: loads and delta known %v, want %v", given, s.Name, got, known[s.Name])
			}
		}
		var d Disturbance
		for _, v := range f.Disturbances {
			if v.Kind == LoadChanged {
				d = v
			}
		}
		if d.Load == nil || math.Abs(d.Load.MM-147.3) > 2*d.Load.U || d.Load.U > 4 {
			t.Fatalf("influence %v: estimate %+v, want 147.3:%s", given, d.Load, tell(f))
		}
		for k, want := range []float64{171.8, 171.8} {
			if got := f.Steps[2+k].Loads["loada"]; math.Abs(got-want) > 2*d.Load.U {
				t.Errorf("influence %v, %s: load a %.2f N, want %.1f", given, f.Steps[2+k].Name, got, want)
			}
		}
		for _, c := range f.Loads {
			if c.Step == 4 && math.Abs(c.Delta[0]-147.2) > 2*d.Load.U {
				t.Errorf("influence %v: s4 changed load a by %.2f N, want 147.2", given, c.Delta[0])
			}
		}
	}
}

// The unloading was forgotten: all that hung came off at once.
func TestUnloadingForgotten(t *testing.T) {
	for _, given := range []bool{true, false} {
		w := plank().unmark("bare")
		w.noInfluence = !given
		f := w.find(t)
		sags(t, w, f, 0.004)
		last := f.Steps[len(f.Steps)-1]
		if !last.Unmarked || last.LoadsKnown || last.DeltaKnown || len(last.Loads) != 2 || last.Loads["loada"] != 0 || last.Loads["loadb"] != 0 {
			t.Errorf("influence %v: %s %v", given, last.Name, last.Loads)
		}
		if w := f.Warnings[slices.IndexFunc(f.Warnings, func(w Warning) bool { return w.Code == "unmarked-step" })]; !strings.Contains(w.Text, "all that hung") {
			t.Errorf("influence %v: %s", given, w.Text)
		}
		c := f.Loads[len(f.Loads)-1]
		if math.Abs(c.Delta[0]+319) > 1e-9 || math.Abs(c.Delta[1]+171.8) > 1e-9 {
			t.Errorf("influence %v: changes %v, want -319 and -171.8", given, c.Delta)
		}
	}
}

// A third of all that hung came off unmarked: the loads shrink in proportion.
func TestPartUnloadedUnmarked(t *testing.T) {
	w := plank()
	w.changes[4].newton = []float64{319 * 2 / 3., 171.8 * 2 / 3.}
	w.unmark("bare")
	f := w.find(t)
	last := f.Steps[len(f.Steps)-1]
	if a, b := last.Loads["loada"], last.Loads["loadb"]; math.Abs(a-212.7) > 8 || math.Abs(b-114.5) > 5 {
		t.Errorf("loads %v, want 212.7 and 114.5:%s", last.Loads, tell(f))
	}
}

// A run that begins loaded and ends bare ends below its baseline.
func TestBeginsLoaded(t *testing.T) {
	w := plank()
	w.marks = append(w.marks, markedBefore("loada", 50), markedBefore("loadb", 50))
	w.changes = []wchange{
		{at: -1e6, late: math.NaN(), newton: []float64{50, 50}},
		{at: 1800.4, late: 5, newton: []float64{319, 171.8}, name: "s1"},
		{at: 9000.6, late: 4, newton: []float64{0, 0}, name: "bare"},
	}
	f := w.find(t)
	if f.Baseline != 0 || f.BelowBaseline() != 2 || !warned(f, "unloaded-below-baseline") {
		t.Errorf("baseline %d, below %d: %v", f.Baseline, f.BelowBaseline(), f.Warnings)
	}
	w.changes[2].newton = []float64{50, 50}
	if f := w.find(t); f.BelowBaseline() != -1 || warned(f, "unloaded-below-baseline") {
		t.Errorf("unloaded to the baseline: %v", f.Warnings)
	}
}

func markedBefore(load string, n float64) history.Mark {
	return history.Mark{Kind: "load", Load: load, Newton: n, Time: at(-100)}
}
