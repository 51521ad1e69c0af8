package steps

import (
	"math"
	"testing"

	"gaugelog/analysis/history"
	"gaugelog/config"
)

const oneGauge = `specimen: {name: a, section: {shape: rectangle, width: 60 mm, depth: 20 mm}, length: 900 mm}
supports: [{name: l, at: 0 mm}, {name: r, at: 900 mm}]
gauges: [{name: mid, at: 450 mm, sense: down, resolution: 0.001 mm, calibration: {offset: 0.010 mm, gain: 1.0}}]
loads: [{name: pan, at: 450 mm}]
`

// A calibration dated into the run counts from its day on: what moved before
// stays as it was, what moves later is told by the new line, and nothing jumps.
func TestDatedCalibration(t *testing.T) {
	rig, err := config.Parse("rig.yaml", []byte(oneGauge))
	if err != nil {
		t.Fatal(err)
	}
	amendments, err := config.ParseAmendments("amendments.yaml", []byte(
		`- {path: "gauges[mid].calibration", value: {offset: 0.250 mm, gain: 1.25}, since: "`+stamp(500)+`", why: checked with blocks, by: MK, entered: "`+stamp(900)+`"}`))
	if err != nil {
		t.Fatal(err)
	}
	var list []history.Sample
	for k := range 1000 {
		list = append(list, history.Sample{Time: at(float64(k)), MM: math.Round((1+0.002*float64(k))*1000) / 1000})
	}
	h, err := history.FromSamples(history.Given{Rig: rig, Amendments: amendments, Samples: [][]history.Sample{list}})
	if err != nil {
		t.Fatal(err)
	}
	g := newGauge(h, 0)
	for _, c := range []struct{ s, want float64 }{
		{0, 0.99}, {499, 1.988}, {500, 1.988 + 0.002/1.25}, {900, 1.988 + 0.802/1.25},
	} {
		if got := g.sag(list[int(c.s)].MM, at(c.s)); math.Abs(got-c.want) > 1e-9 {
			t.Errorf("sag at %g s: %.6f, want %.6f", c.s, got, c.want)
		}
	}
	f, err := Find(h, Options{})
	if err != nil {
		t.Fatal(err)
	}
	for _, d := range f.Disturbances {
		t.Errorf("the new line was taken for a %s", d.Kind)
	}
}
