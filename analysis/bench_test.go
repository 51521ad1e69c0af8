package analysis

import (
	"fmt"
	"testing"

	"gaugelog/analysis/history"
	"gaugelog/config"
	"gaugelog/simulators"
)

// yearLong is the demonstration's rig under its last load for a year, eight
// gauges read every second around changes of load and every five minutes
// between; with changes, two loads take turns so often.
func yearLong(b *testing.B, changes int) *history.History {
	b.Helper()
	const year = 365 * 86400
	d := simulators.DemoRig()
	plan, pace := d.Rig.Plan[:0:0], d.Truth.Pace[:0:0]
	every := func(after string, at, s float64) {
		pace = append(pace, simulators.TruthPace{After: after, At: simulators.Seconds(at), Every: simulators.Seconds(s)})
	}
	every("", 0, 1)
	hold := year / float64(changes+1)
	var lighter []config.SetWeight
	for _, p := range d.Rig.Plan {
		if p.Step == "s2" {
			lighter = p.Set
		}
		if p.Step != "s4" {
			plan = append(plan, p)
			continue
		}
		heavier := p.Set
		for k := range changes + 1 {
			if p.Hold.Value = hold; k > 0 {
				p.Step, p.Set = fmt.Sprintf("m%d", k), [][]config.SetWeight{heavier, lighter}[k%2]
			}
			plan = append(plan, p)
			every(p.Step, 0, 1)
			every(p.Step, 3600, 300)
			every(p.Step, hold-300, 1)
		}
	}
	every("bare", 3600, 300)
	d.Rig.Plan, d.Truth.Pace = plan, pace
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
	benchmarkYear(b, yearLong(b, 0))
}

// BenchmarkEvaluateYearOfChanges is the same of a year with twelve changes of
// load.
func BenchmarkEvaluateYearOfChanges(b *testing.B) {
	benchmarkYear(b, yearLong(b, 12))
}

func benchmarkYear(b *testing.B, h *history.History) {
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
