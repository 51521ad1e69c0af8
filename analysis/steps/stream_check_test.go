package steps

import (
	"math"
	"slices"
	"testing"

	"gaugelog/analysis/history"
)

// The made-up bins are those of the made-up readings: history.FromSamples
// counts the same readings to the same bins.
func TestStreamBinsItsReadings(t *testing.T) {
	for seed := range uint64(8) {
		m := foul(300+seed, 0.3)
		s := m.stream()
		all, err := s.Window(at(0), at(m.length))
		if err != nil {
			t.Fatal(err)
		}
		if len(all[0]) > 2*history.WindowMost {
			t.Fatal("the window is thinned; make the test shorter")
		}
		rig := m.rig()
		h, err := history.FromSamples(history.Given{Rig: rig, Samples: all})
		if err != nil {
			t.Fatal(err)
		}
		for g := range rig.Gauges {
			want, got := h.Bins(g), s.Bins(g)
			if len(want) != len(got) {
				t.Fatalf("seed %d: %d bins, want %d", seed, len(got), len(want))
			}
			odd := 0
			for i := range got {
				a, b := got[i], want[i]
				same := a.N == b.N && math.Abs(float64(a.Time-b.Time)) < 1e7 && a.From == b.From
				near := math.Abs(a.Median-b.Median) < 1e-6 && math.Abs(a.Min-b.Min) < 1e-6 && math.Abs(a.Max-b.Max) < 1e-6 && math.Abs(a.SD-b.SD) < 1e-6 && math.Abs(a.MAD-b.MAD) < 2e-6
				if !same {
					t.Fatalf("seed %d gauge %d bin %d: %+v, want %+v", seed, g, i, a, b)
				}
				if !near {
					odd++ // a parabola rounds a reading in a million otherwise
				}
			}
			if odd > len(got)/50 {
				i := slices.IndexFunc(got, func(a history.Bin) bool { return true })
				t.Errorf("seed %d (%s) gauge %d: %d of %d bins differ, such as %+v, want %+v", seed, m.kind, g, odd, len(got), got[i], want[i])
			}
		}
	}
}
