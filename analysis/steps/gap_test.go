package steps

import (
	"math"
	"strings"
	"testing"
)

// A damaged block lies across a change of load: readings go on sparsely hours
// later, in the midst of creep. That is no swing and no spike.
func TestLoadedWithinGap(t *testing.T) {
	w := plank()
	w.length = 60000
	w.changes = w.changes[:4]
	w.creep = 0.3
	// Dense to the gap, sparse behind.
	w.silent = [][2]float64{{2700, 9000}}
	for s := 9000.0; s < w.length; s += 400 {
		w.silent = append(w.silent, [2]float64{s + 0.5, s + 399.5})
	}
	f := w.find(t)
	for _, d := range f.Disturbances {
		if d.Kind != GapKind {
			t.Errorf("false alarm:%s", tell(f))
			break
		}
	}
	if len(f.Steps) != 5 {
		t.Fatalf("%d steps", len(f.Steps))
	}
	s := f.Steps[4]
	if s.RingingS != 0 || s.RampS != 0 || math.Abs(seconds(s.Full-at(2880.2))) > 10 {
		t.Errorf("s4: ringing %.1f s, ramp %.1f s, full load %.1f s off", s.RingingS, s.RampS, seconds(s.Full-at(2880.2)))
	}
	for _, v := range f.Warnings {
		if v.Code == "ringing" || strings.Contains(v.Text, "e+0") {
			t.Error(v.Text)
		}
	}
}

// Two changes within one gap: the marks tell when, and the later step has the
// readings behind.
func TestTwoLoadsWithinGap(t *testing.T) {
	w := plank()
	w.changes = w.changes[:4]
	w.silent = [][2]float64{{2400, 5000}}
	f := w.find(t)
	if len(f.Steps) != 5 {
		t.Fatalf("%d steps", len(f.Steps))
	}
	for k := 3; k < 5; k++ {
		s := f.Steps[k]
		if d := seconds(s.From - s.Marked); math.Abs(d) > 1 || s.RingingS != 0 {
			t.Errorf("%s begins %.1f s off its mark, swings %.1f s", s.Name, d, s.RingingS)
		}
	}
	if f.Steps[3].Full > f.Steps[4].From {
		t.Errorf("s3 is complete after s4 began")
	}
}

// Fast creep over an unread hour is neither a load nor a support.
func TestCreepWithinGap(t *testing.T) {
	for seed := range uint64(5) {
		w := plank()
		w.seed = seed
		w.length = 30000
		w.changes = w.changes[:4]
		w.silent = [][2]float64{{3900, 8300}}
		for s := 8300.0; s < w.length; s += 150 {
			w.silent = append(w.silent, [2]float64{s + 0.5, s + 149.5})
		}
		for s := 3300.0; s < 3900; s += 10 {
			w.silent = append(w.silent, [2]float64{s + 0.5, s + 9.5})
		}
		f := w.find(t)
		for _, d := range f.Disturbances {
			if d.Kind != GapKind {
				t.Errorf("seed %d: false alarm:%s", seed, tell(f))
				break
			}
		}
		if len(f.Steps) != 5 {
			t.Errorf("seed %d: %d steps", seed, len(f.Steps))
		}
	}
}
