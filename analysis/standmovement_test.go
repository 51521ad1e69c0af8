package analysis

import (
	"math"
	"testing"

	"gaugelog/analysis/steps"
	"gaugelog/config"
)

// A stand's movement is what its reference gauge shows beyond its own error:
// increments of 5 and -5 um that are known to 3 um each leave 4 um.
func TestStandMovement(t *testing.T) {
	yes := true
	u := config.Length{}
	u.Value = 0.003 / math.Sqrt2
	rig := &config.Rig{Gauges: []config.Gauge{
		{Name: "mid", Stand: "frame"},
		{Name: "dummy", Stand: "frame", Sees: "reference", U: &u},
		{Name: "still", Stand: "wall", Sees: "reference"},
		{Name: "loose", Sees: "reference"},
	}}
	f := &steps.Findings{Baseline: 0, Steps: make([]steps.Step, 4)}
	for i, mm := range []float64{9, 0.005, -0.005, 9} {
		f.Steps[i].Response = &yes
		if i == 3 { // not answered: nobody knows what moved it
			f.Steps[i].Response = nil
		}
		for g := range rig.Gauges {
			own := map[int]float64{0: 1, 1: mm, 2: 0.0001, 3: mm}[g]
			f.Steps[i].Gauges = append(f.Steps[i].Gauges, steps.GaugeFigures{Gross: steps.Figures{Increment: &steps.Value{MM: own, U: 0.0002 * float64(g/2)}}})
		}
	}
	got := standMovement(rig, f)
	if len(got) != 1 || math.Abs(got["frame"]-0.004) > 1e-9 {
		t.Errorf("%v, want frame 0.004", got)
	}
}
