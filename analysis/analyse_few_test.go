package analysis

import (
	"testing"

	"gaugelog/analysis/history"
	"gaugelog/config"
)

// Of a run of one reading one thing is to be said, not all that follows.
func TestOneReading(t *testing.T) {
	rig, err := config.Parse("rig.yaml", []byte(boardRig))
	if err != nil {
		t.Fatal(err)
	}
	rig.Evaluate = nil
	const at = int64(1790000000e9)
	for n, want := range map[int]bool{1: true, 2: false} {
		list := []history.Sample{{Time: at, MM: 2}, {Time: at + 1e9, MM: 2}}
		h, err := history.FromSamples(history.Given{Rig: rig, Samples: [][]history.Sample{list[:n]},
			Marks: []history.Mark{{Kind: "load", Load: "pan", Newton: 500, Time: at + 60e9}}})
		if err != nil {
			t.Fatal(err)
		}
		r, err := Evaluate(h, Options{})
		if err != nil {
			t.Fatal(err)
		}
		if got := len(r.Warnings) == 1 && r.Warnings[0].Code == "too-few-readings"; got != want {
			t.Errorf("%d readings: %+v", n, r.Warnings)
		}
	}
}
