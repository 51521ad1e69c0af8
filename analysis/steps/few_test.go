package steps

import (
	"fmt"
	"math"
	"testing"
)

// A person reads the gauges by hand, a few times in each step: the change lies
// between the two readings beside it, however the former steps creep.
func TestFewReadingsAStep(t *testing.T) {
	for _, every := range []float64{600, 3600} {
		for _, n := range []float64{3, 4, 5, 6, 8, 12, 20} {
			t.Run(fmt.Sprintf("%g readings, %g s apart", n, every), func(t *testing.T) {
				w := plank()
				w.every, w.daily, w.length, w.seed = every, 0.002, every*(4*n-1), uint64(n)
				w.changes = []wchange{
					{at: every * (n - 0.4), late: 20, newton: []float64{100, 0}, name: "s1"},
					{at: every * (2*n - 0.5), late: -15, newton: []float64{200, 100}, name: "s2"},
					{at: every * (3*n - 0.3), late: 30, newton: []float64{0, 0}, name: "bare"},
				}
				f := w.find(t)
				if len(f.Disturbances) > 0 || len(f.Steps) != 4 {
					t.Fatalf("%d steps%s", len(f.Steps), tell(f))
				}
				for k, c := range w.changes {
					s := f.Steps[k+1]
					if d := seconds(s.Found - at(c.at)); s.Response == nil || !*s.Response || math.Abs(d) > 1.96*s.StartU || s.StartU > every {
						t.Errorf("%s: found %.2f intervals off, u %.2f, response %v", s.Name, d/every, s.StartU/every, s.Response)
					}
				}
			})
		}
	}
}

// The same with one load that hung for some readings, of gauges that are read
// one after another: that is no spike.
func TestFewReadingsOfOneLoad(t *testing.T) {
	for n := 4.0; n <= 8; n++ {
		w := plank()
		w.every, w.daily, w.length, w.seed = 600, 0.002, 600*(3*n-1), uint64(n)
		w.jitter = 600
		w.changes = []wchange{
			{at: 600 * (n - 0.4), late: 20, newton: []float64{200, 100}, name: "s1"},
			{at: 600 * (2*n - 0.5), late: -15, newton: []float64{0, 0}, name: "bare"},
		}
		f := w.find(t)
		if len(f.Disturbances) > 0 || len(f.Steps) != 3 {
			t.Fatalf("%g readings a step: %d steps%s", n, len(f.Steps), tell(f))
		}
		for k, c := range w.changes {
			s := f.Steps[k+1]
			if d := seconds(s.Found - at(c.at)); s.Response == nil || !*s.Response || math.Abs(d) > 1.96*s.StartU || s.StartU > 600 {
				t.Errorf("%g readings a step, %s: found %.0f s off, u %.0f s, response %v", n, s.Name, d, s.StartU, s.Response)
			}
		}
	}
}

// Where the gauges are first read long after the load is on there is no
// initial sag, and a word says why and what to do.
func TestFirstReadingLate(t *testing.T) {
	w := plank()
	w.every, w.length = 600, 36000
	w.changes = []wchange{{at: 12130, late: 20, newton: []float64{200, 100}, name: "s1"}}
	if f := w.find(t); !warned(f, "first-reading-late") || f.Steps[1].Gauges[3].Net.Initial != nil {
		t.Errorf("%v", f.Warnings)
	}
	w.every, w.length = 5, 20000
	if f := w.find(t); warned(f, "first-reading-late") {
		t.Errorf("%v", f.Warnings)
	}
}
