package steps

import (
	"math"
	"testing"
)

// compare holds every figure against the world's own truth.
func compare(t *testing.T, w *world, f *Findings, tol float64) {
	t.Helper()
	if len(f.Steps) != len(w.changes)+1 {
		for _, s := range f.Steps {
			t.Logf("step %s from %.1f", s.Name, seconds(s.From-epoch))
		}
		t.Fatalf("%d steps, want %d", len(f.Steps), len(w.changes)+1)
	}
	for k, c := range w.changes {
		s := f.Steps[k+1]
		if s.Response == nil || !*s.Response {
			t.Errorf("%s: no response", s.Name)
		}
		if d := math.Abs(seconds(s.Found - at(c.at))); d > 2*s.StartU+0.001 {
			t.Errorf("%s: found %.2f s off, u %.2f", s.Name, d, s.StartU)
		}
		if d := math.Abs(seconds(s.Full - at(c.at+c.ramp))); d > max(w.every, 2)+0.2*c.ramp {
			t.Errorf("%s: full load %.2f s off", s.Name, d)
		}
		for g := range w.gauges {
			_, net := w.sag(g, c.at+c.ramp+60)
			got := s.Gauges[g].Net.Initial
			if got == nil {
				t.Errorf("%s g%d: no initial", s.Name, g+1)
				continue
			}
			if g == f.Chord.Left || g == f.Chord.Right {
				net = 0
			}
			if math.Abs(got.MM-net) > tol {
				t.Errorf("%s g%d: initial %.4f, true %.4f (u %.4f)", s.Name, g+1, got.MM, net, got.U)
			}
		}
	}
}

func TestPlank(t *testing.T) {
	w := plank()
	f := w.find(t)
	for _, d := range f.Disturbances {
		t.Errorf("false alarm: %s %v at %.1f: %s", d.Kind, d.Gauges, seconds(d.From-epoch), d.Evidence)
	}
	for _, v := range f.Warnings {
		t.Log(v.Code, v.Text)
	}
	for g, tr := range f.Tracks {
		t.Log(g, len(tr.Points), tr.Baseline, tr.Noise)
	}
	compare(t, w, f, 0.003)
}
