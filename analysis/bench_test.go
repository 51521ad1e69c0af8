package analysis

import (
	"testing"

	"gaugelog/analysis/history"
	"gaugelog/simulators"
)

// yearLong is the demonstration's rig under its last load for a year, eight
// gauges read every second around changes of load and every five minutes
// between.
func yearLong(b *testing.B) *history.History {
	b.Helper()
	d := simulators.DemoRig()
	for i := range d.Rig.Plan {
		if d.Rig.Plan[i].Step == "s4" {
			d.Rig.Plan[i].Hold.Value = 365 * 86400
		}
	}
	for i := range d.Truth.Pace {
		if p := &d.Truth.Pace[i]; p.Every > 1 {
			p.Every = 300
		} else if p.After == "s4" {
			p.At = 365*86400 - 300
		}
	}
	sim, err := simulators.New(simulators.Options{Rig: d.Rig, Truth: d.Truth, Seed: 1})
	if err != nil {
		b.Fatal(err)
	}
	index := map[string]int{}
	for i, g := range d.Rig.Gauges {
		index[g.Name] = i
	}
	given := history.Given{Rig: d.Rig, Samples: make([][]history.Sample, len(d.Rig.Gauges))}
	for done := false; !done; {
		st := sim.Next(sim.End(), 0)
		done = st.Done
		for _, batch := range st.Batches {
			for _, f := range batch.Frames {
				if g, is := index[f.Name]; is {
					given.Samples[g] = append(given.Samples[g], history.Sample{Time: f.At.Wall, MM: f.MM})
				}
			}
		}
		for _, e := range st.Events {
			given.Marks = append(given.Marks, marksOfEvent(e)...)
		}
	}
	h, err := history.FromSamples(given)
	if err != nil {
		b.Fatal(err)
	}
	return h
}

// BenchmarkEvaluateYear is everything `analyse` does after reading back.
func BenchmarkEvaluateYear(b *testing.B) {
	h := yearLong(b)
	for b.Loop() {
		r, err := Evaluate(h, Options{})
		if err != nil {
			b.Fatal(err)
		}
		if r.Stiffness.Modulus == nil || r.Creep.Model == "" {
			b.Fatal("no modulus or no law")
		}
	}
	b.ReportMetric(float64(h.Readings), "readings")
}
