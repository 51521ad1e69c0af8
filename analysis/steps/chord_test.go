package steps

import (
	"math"
	"testing"

	"gaugelog/config"
)

// A support that gives way tilts the beam about the other one: past it the
// overhang goes the other way, and the net sag there knows nothing of it.
func TestChordReachesTheOverhang(t *testing.T) {
	w := quiet()
	w.fallSupport, w.fallAt = 0.5, 13000
	w.gauges[0].at = 2100 + 600
	f := w.find(t)
	for _, g := range []int{0, 2, 3, 4} {
		gross, net := w.sag(g, w.length)
		if got := f.Steps[1].Gauges[g].Net.Final; got == nil || math.Abs(got.MM-net) > 0.01 {
			t.Errorf("g%d: net %+v, true %.4f (gross %.4f)", g+1, got, net, gross)
		}
	}
}

// A gauge carried by the beam nets its supports already.
func TestBarIsNotNettedTwice(t *testing.T) {
	w := quiet()
	w.fallSupport, w.fallAt = 0.5, 13000
	h := w.history(t)
	foot := func(v float64) config.Length { return config.Length{Quantity: config.Quantity{Value: v}} }
	h.Rig.Gauges[3].Bar = []config.Length{foot(0), foot(2100)}
	f, err := Find(h, Options{Influence: w.influence()})
	if err != nil {
		t.Fatal(err)
	}
	for _, s := range f.Steps[1:] {
		a, b := s.Gauges[3].Net.Initial, s.Gauges[3].Gross.Initial
		if a == nil || b == nil || a.MM != b.MM {
			t.Errorf("%s: net %+v, gross %+v", s.Name, a, b)
		}
	}
}
