package steps

import (
	"flag"
	"fmt"
	"math"
	"testing"

	"pgregory.net/rapid"
)

// anyBeam is a beam of any size with one to three loads hung in turn, each mark
// up to a minute off, every step at least twenty-five times the noise of the
// gauge that sees most of it.
func anyBeam(t *rapid.T) *world {
	w := plank()
	w.span = rapid.Float64Range(600, 4000).Draw(t, "span, mm")
	w.creep = rapid.Float64Range(0, 0.15).Draw(t, "creep in an hour")
	w.power = rapid.Float64Range(0.15, 0.4).Draw(t, "creep exponent")
	w.every = rapid.SampledFrom([]float64{1, 2, 5}).Draw(t, "interval, s")
	w.daily = rapid.Float64Range(0, 0.02).Draw(t, "daily, mm")
	w.seed = rapid.Uint64().Draw(t, "seed")
	res := rapid.SampledFrom([]float64{0.001, 0.002, 0.005, 0.01}).Draw(t, "resolution, mm")
	noise := res * rapid.Float64Range(0.2, 1).Draw(t, "noise, counts")
	middle := rapid.IntRange(2, 4).Draw(t, "gauges in the span")
	w.gauges = []wgauge{{at: 0, res: res, noise: noise}, {at: w.span, res: res, noise: noise}, {at: w.span / 2, sees: "reference", res: res, noise: noise}}
	for i := range middle {
		w.gauges = append(w.gauges, wgauge{at: w.span * float64(i+1) / float64(middle+1), res: res, noise: noise})
	}
	w.loads = []float64{w.span * rapid.Float64Range(0.3, 0.7).Draw(t, "load's place")}
	size := res * rapid.Float64Range(25, 3000).Draw(t, "sag of a step, counts")
	newton := rapid.Float64Range(5, 500).Draw(t, "load, N")
	w.ei = 1
	w.ei = w.sagPer(w.span/2, w.loads[0]) * newton / size
	w.compliance = rapid.Float64Range(0, 0.02).Draw(t, "support's share") * size / newton
	w.changes = nil
	steps := rapid.IntRange(1, 3).Draw(t, "steps")
	for i := range steps {
		w.changes = append(w.changes, wchange{at: 600 + 400*float64(i) + rapid.Float64Range(0, w.every).Draw(t, "phase, s"),
			late: rapid.Float64Range(-60, 60).Draw(t, "mark late, s"), newton: []float64{newton * float64(i+1)}, name: fmt.Sprint("s", i+1)})
	}
	w.length = 600 + 400*float64(steps) + 200
	return w
}

// Whatever the beam, the loads, the sampling and the marks: the steps are those
// that were, each begins when it did, and nothing else happened; gauges that
// count upwards tell the same, and other lateness of the marks moves no start.
func TestStepsAreThoseThatWere(t *testing.T) {
	// The same draws each time, unless -rapid.seed asks for others.
	if f := flag.Lookup("rapid.seed"); f.Value.String() == f.DefValue {
		if err := f.Value.Set("4"); err != nil {
			t.Fatal(err)
		}
	}
	rapid.Check(t, func(t *rapid.T) {
		w := anyBeam(t)
		f := w.find(t)
		wantSteps(t, w, f)
		switch rapid.SampledFrom([]string{"nothing", "senses", "marks"}).Draw(t, "what is done otherwise") {
		case "senses":
			for i := range w.gauges {
				w.gauges[i].sense = "up"
			}
			wantSame(t, f, w.find(t))
		case "marks":
			for i := range w.changes {
				w.changes[i].late = rapid.Float64Range(-60, 60).Draw(t, "late the second time, s")
			}
			again := w.find(t)
			wantSteps(t, w, again)
			for i := range f.Steps {
				if d := seconds(f.Steps[i].Found - again.Steps[i].Found); math.Abs(d) > w.every {
					t.Errorf("step %d begins %.2f s away for another mark, readings every %g s", i, d, w.every)
				}
			}
		}
	})
}

func wantSteps(t *rapid.T, w *world, f *Findings) {
	if len(f.Steps) != len(w.changes)+1 || len(f.Disturbances) != 0 {
		t.Fatalf("want %d steps and no disturbance: %s", len(w.changes)+1, tell(f))
	}
	for i, c := range w.changes {
		s := f.Steps[i+1]
		if s.Response == nil || !*s.Response || s.Unmarked || s.Name != c.name {
			t.Fatalf("step %s: %+v", c.name, s)
		}
		if off := seconds(s.Found - at(c.at)); math.Abs(off) > 3*w.every+4*s.StartU {
			t.Errorf("step %s found %.2f s off, u %.2f s, readings every %g s", c.name, off, s.StartU, w.every)
		}
		if want := seconds(s.Marked - s.Found); math.Abs(s.OffsetS-want) > 1e-6 {
			t.Errorf("step %s: offset %g s, mark less start is %g s", c.name, s.OffsetS, want)
		}
	}
}

func wantSame(t *rapid.T, down, up *Findings) {
	if len(down.Steps) != len(up.Steps) || len(down.Disturbances) != len(up.Disturbances) {
		t.Fatalf("counting down: %s\ncounting up: %s", tell(down), tell(up))
	}
	for i := range down.Steps {
		a, b := down.Steps[i], up.Steps[i]
		if a.Found != b.Found || a.Full != b.Full {
			t.Fatalf("step %d begins at %d and at %d", i, a.Found, b.Found)
		}
		for g := range a.Gauges {
			x, y := a.Gauges[g].Gross.Final, b.Gauges[g].Gross.Final
			if (x == nil) != (y == nil) || x != nil && math.Abs(x.MM-y.MM) > 1e-9 {
				t.Fatalf("step %d, gauge %d: the last sag is %v and %v", i, g, x, y)
			}
		}
	}
}
