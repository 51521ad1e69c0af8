package steps

import (
	"fmt"
	"math"
	"math/rand/v2"
	"sort"
	"testing"
)

// The same job from 100 readings a second to one an hour.
func TestStepsAtEverySampling(t *testing.T) {
	for _, every := range []float64{0.01, 0.1, 1, 30, 600, 3600} {
		t.Run(fmt.Sprintf("every %g s", every), func(t *testing.T) {
			w := plank()
			w.every = every
			unit := max(1, every/3)
			w.length = 1200 * unit
			w.changes = []wchange{
				{at: 301.37 * unit, late: 0.3 * every, newton: []float64{100, 0}, name: "s1"},
				{at: 603.71 * unit, late: -0.3 * every, newton: []float64{200, 100}, name: "s2"},
				{at: 902.23 * unit, late: 2 * every, newton: []float64{0, 0}, name: "bare"},
			}
			if every < 0.1 {
				w.gauges = w.gauges[2:5]
				w.length = 400
				w.changes = w.changes[:1]
				w.changes[0].at = 201.377
			}
			f := w.find(t)
			if len(f.Disturbances) > 0 {
				t.Error("false alarm", tell(f))
			}
			if len(f.Steps) != len(w.changes)+1 {
				t.Fatalf("%d steps", len(f.Steps))
			}
			for k, c := range w.changes {
				s := f.Steps[k+1]
				d := seconds(s.Found - at(c.at))
				if math.Abs(d) > 2*s.StartU || s.StartU > every {
					t.Errorf("%s found %.3f s off, u %.3f", s.Name, d, s.StartU)
				}
				if s.Response == nil || !*s.Response {
					t.Errorf("%s: no response", s.Name)
				}
			}
		})
	}
}

// Marks up to 35 s late or early move nothing, at one reading a second.
func TestLateAndEarlyMarks(t *testing.T) {
	for _, late := range []float64{-110, -35, 0, 35, 110} {
		w := plank()
		w.changes = w.changes[:4]
		w.length = 4000
		w.changes[2].late = late
		f := w.find(t)
		s := f.Steps[3]
		if d := seconds(s.Found - at(w.changes[2].at)); math.Abs(d) > 2 || math.Abs(s.OffsetS-late) > 2 {
			t.Errorf("mark %g s late: found %.2f s off, offset %.2f", late, d, s.OffsetS)
		}
	}
}

// A load lowered over half a minute has a ramp, and counts from its end.
func TestRamp(t *testing.T) {
	w := plank()
	w.changes = []wchange{{at: 1800.4, late: 12, newton: []float64{319, 171.8}, ramp: 30, name: "s1"}}
	f := w.find(t)
	s := f.Steps[1]
	if d := seconds(s.Found - at(1800.4)); math.Abs(d) > 2 {
		t.Errorf("start %.2f s off", d)
	}
	if d := seconds(s.Full - at(1830.4)); math.Abs(d) > 2.5 || math.Abs(s.RampS-30) > 3 {
		t.Errorf("full load %.2f s off, ramp %.1f", d, s.RampS)
	}
	if len(f.Disturbances) > 0 {
		t.Error(tell(f))
	}
}

// Two loads put on within 20 s of each other are one change.
func TestTwoMarksOneChange(t *testing.T) {
	w := plank()
	w.changes = []wchange{
		{at: 1800.4, late: 1, newton: []float64{100, 0}, name: "s1"},
		{at: 1812.4, late: 1, newton: []float64{100, 100}, name: "s1"},
	}
	f := w.find(t)
	if len(f.Steps) != 2 || f.Steps[1].Loads["loada"] != 100 || f.Steps[1].Loads["loadb"] != 100 {
		t.Fatalf("steps %+v", f.Steps)
	}
	if d := seconds(f.Steps[1].Full - at(1812.4)); math.Abs(d) > 2 {
		t.Errorf("full load %.2f s off", d)
	}
	if len(f.Disturbances) > 0 {
		t.Error(tell(f))
	}
}

// drawn is a random test with one marked step over twenty times the noise.
func drawn(seed uint64) (*world, float64) {
	rng := rand.New(rand.NewPCG(seed, 5))
	w := plank()
	w.seed = seed
	w.every = []float64{0.1, 0.5, 1, 2, 10, 30, 120}[rng.IntN(7)]
	w.jitter = 0.2 * w.every * rng.Float64()
	res := []float64{0.0005, 0.001, 0.002, 0.01}[rng.IntN(4)]
	noise := res * (0.2 + 2*rng.Float64())
	n := 1 + rng.IntN(4)
	w.gauges = nil
	for i := range n {
		x := 300 + 1500*rng.Float64()
		w.gauges = append(w.gauges, wgauge{at: x, res: res, noise: noise})
		_ = i
	}
	best := 0.0
	for _, g := range w.gauges {
		best = max(best, w.sagPer(g.at, w.loads[0]))
	}
	size := max(noise, res/math.Sqrt(12)) * (20 + 500*rng.Float64()*rng.Float64())
	w.loads = w.loads[:1]
	begin := w.every * (100 + 50*rng.Float64())
	w.length = begin + w.every*150
	w.changes = []wchange{{at: begin, late: w.every * 8 * (rng.Float64() - 0.5), newton: []float64{size / best}, name: "s1"}}
	w.creep = 0.1 * rng.Float64()
	w.compliance = 0
	w.daily = res * 3
	return w, begin
}

// coverage runs n drawn steps and says how many starts the stated 95 %
// interval covers, the median width of that interval in sampling intervals,
// and how many were not found at all.
func coverage(t *testing.T, n int, seed uint64) (covered float64, width float64, missed int) {
	var widths []float64
	hit := 0
	for i := range n {
		w, begin := drawn(seed + uint64(i))
		f := w.find(t)
		if len(f.Steps) < 2 || f.Steps[1].Found == 0 {
			missed++
			continue
		}
		s := f.Steps[1]
		half := 1.96 * s.StartU
		if math.Abs(seconds(s.Found-at(begin))) <= half {
			hit++
		} else {
			t.Logf("seed %d: %.2f intervals off, stated %.2f", seed+uint64(i), seconds(s.Found-at(begin))/w.every, half/w.every)
		}
		widths = append(widths, 2*half/w.every)
	}
	sort.Float64s(widths)
	return float64(hit) / float64(n), widths[len(widths)/2], missed
}

// Of steps over twenty times the noise the stated interval covers the true
// start in at least 94 %, and is at most 1.2 sampling intervals wide.
func TestStartIntervalCovers(t *testing.T) {
	n := *stepsDrawn
	covered, width, missed := coverage(t, n, seedOf(1000, 0))
	t.Logf("%d steps: %.1f %% covered, median width %.2f intervals, %d missed", n, 100*covered, width, missed)
	if covered < 0.94 || width > 1.2 {
		t.Errorf("%.1f %% covered (want 94), median width %.2f intervals (want 1.2), %d missed", 100*covered, width, missed)
	}
}
