package analysis

import (
	"math"
	"math/rand/v2"
	"testing"

	"gaugelog/analysis/history"
	"gaugelog/config"
)

// begunLoaded is a run on the board that begins with 100 N on it, carries 500 N
// for a day and ends with final newtons: 8 um/N, with creep by superposition.
func begunLoaded(t *testing.T, final float64) *history.History {
	t.Helper()
	rig, err := config.Parse("rig.yaml", []byte(boardRig))
	if err != nil {
		t.Fatal(err)
	}
	rig.Evaluate = nil
	const start, second = int64(1790000000e9), int64(1e9)
	loaded, bare := int64(600), int64(600+86400)
	noise := rand.New(rand.NewPCG(7, 1))
	sag := func(n, hours float64) float64 {
		if hours <= 0 {
			return 0
		}
		return 0.008 * n * (1 + 0.085*math.Pow(hours, 0.23))
	}
	var list []history.Sample
	for s := int64(0); s < bare+86400; {
		mm := 2 + 0.0015*noise.NormFloat64() + sag(400, float64(s-loaded)/3600) + sag(final-500, float64(s-bare)/3600)
		list = append(list, history.Sample{Time: start + s*second, MM: math.Round(mm*1000) / 1000})
		if s < loaded+600 || s >= bare-600 && s < bare+600 {
			s++
		} else {
			s += 120
		}
	}
	mark := func(s int64, n float64, step string) history.Mark {
		return history.Mark{Kind: "load", Load: "pan", Newton: n, Step: step, Time: start + s*second}
	}
	h, err := history.FromSamples(history.Given{
		Rig: rig, Samples: [][]history.Sample{list},
		Marks: []history.Mark{mark(-60, 100, "zero"), mark(loaded, 500, "s1"), mark(bare, final, "bare")},
	})
	if err != nil {
		t.Fatal(err)
	}
	return h
}

// What came back below a loaded baseline is no recovery and leaves no set.
func TestNoRecoveryBelowBaseline(t *testing.T) {
	for final, recovers := range map[float64]bool{100: true, 0: false} {
		r, err := Evaluate(begunLoaded(t, final), Options{})
		if err != nil {
			t.Fatal(err)
		}
		if r.Creep.Model == "" {
			t.Fatalf("%g N at the end: no creep law: %v", final, r.Warnings)
		}
		if got := len(r.Creep.Recovery) > 0 && r.Creep.PermanentSet != nil; got != recovers {
			t.Errorf("%g N at the end: recovery %v, permanent set %v", final, r.Creep.Recovery, r.Creep.PermanentSet)
		}
		warned := false
		for _, w := range r.Warnings {
			warned = warned || w.Code == "unloaded-below-baseline"
		}
		if warned == recovers {
			t.Errorf("%g N at the end: warnings %v", final, r.Warnings)
		}
		if !recovers && (len(r.Creep.Recovery) > 0 || r.Creep.PermanentSet != nil) {
			t.Errorf("%g N at the end: recovery %v, permanent set %v", final, r.Creep.Recovery, r.Creep.PermanentSet)
		}
	}
}
