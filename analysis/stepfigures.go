package analysis

import (
	"math"

	"gaugelog/analysis/steps"
	"gaugelog/config"
)

// quantity makes a Q; an uncertainty that is 0, negative or no number is
// unknown and becomes null.
func quantity(v, u float64, unit string) Q {
	q := Q{Value: v, Unit: unit}
	if u > 0 && !math.IsInf(u, 0) {
		q.U = &u
	}
	return q
}

// sag turns a step's value into a Q in mm, nil where it was not measured.
func sag(v *steps.Value) *Q {
	if v == nil || math.IsNaN(v.MM) {
		return nil
	}
	q := quantity(v.MM, v.U, "mm")
	return &q
}

// stepsOf renders the steps that were found, with net figures.
func stepsOf(rig *config.Rig, f *steps.Findings) []Step {
	own := instrument{rig: rig, chord: f.Chord}
	out := make([]Step, 0, len(f.Steps))
	for _, s := range f.Steps {
		st := Step{
			Step: s.Name, From: instant(s.From), To: instant(s.To),
			Loads: map[string]float64{}, Kilogram: s.Kilogram, Response: s.Response,
			Start: startOf(s), Gauges: []StepGauge{},
		}
		for name, n := range s.Loads {
			st.Loads[name] = n
		}
		for i, g := range s.Gauges {
			st.Gauges = append(st.Gauges, stepGauge(own, i, g.Net))
		}
		out = append(out, st)
	}
	return out
}

func startOf(s steps.Step) Start {
	st := Start{Marked: instantOrNil(s.Marked), Found: instantOrNil(s.Found), Full: instantOrNil(s.Full)}
	if s.Marked != 0 && s.Found != 0 {
		offset := s.OffsetS
		st.OffsetS = &offset
	}
	if s.StartU > 0 {
		u := s.StartU
		st.US = &u
	}
	return st
}

func stepGauge(own instrument, i int, f steps.Figures) StepGauge {
	g := &own.rig.Gauges[i]
	sg := StepGauge{
		Gauge: g.Name, AtMM: g.At.Value,
		Initial: own.widen(sag(f.Initial), i), Increment: own.widen(sag(f.Increment), i), Final: own.widen(sag(f.Final), i),
		SagAt: []SagAt{},
	}
	for _, a := range f.SagAt {
		v := a.Value
		if q := own.widen(sag(&v), i); q != nil {
			sg.SagAt = append(sg.SagAt, SagAt{AfterS: a.AfterS, Sag: *q})
		}
	}
	return sg
}

// disturbancesOf renders what disturbed the gauges.
func disturbancesOf(rig *config.Rig, f *steps.Findings) []Disturbance {
	out := make([]Disturbance, 0, len(f.Disturbances))
	for _, d := range f.Disturbances {
		v := Disturbance{
			Kind: string(d.Kind), Gauges: []string{}, From: instant(d.From), To: instantOrNil(d.To),
			Size: sag(d.Size), Treated: d.Treated, Evidence: d.Evidence,
		}
		for _, g := range d.Gauges {
			v.Gauges = append(v.Gauges, rig.Gauges[g].Name)
		}
		if d.Load != nil {
			q := quantity(d.Load.MM, d.Load.U, "N")
			v.Load = &q
		}
		for _, c := range d.Candidates {
			v.Candidates = append(v.Candidates, string(c))
		}
		out = append(out, v)
	}
	return out
}

// supportsOf renders how far each support went down.
func supportsOf(rig *config.Rig, f *steps.Findings) []Support {
	out := make([]Support, 0, len(f.Supports))
	for _, s := range f.Supports {
		out = append(out, Support{Name: rig.Supports[s.Support].Name, Settlement: sag(s.Value), Measured: s.Measured})
	}
	return out
}

// decisionsOf renders what a person overruled.
func decisionsOf(f *steps.Findings) []Decision {
	out := make([]Decision, 0, len(f.Decisions))
	for _, d := range f.Decisions {
		out = append(out, Decision(d))
	}
	return out
}

// warningsOf renders the warnings of the step finding.
func warningsOf(rig *config.Rig, f *steps.Findings) []Warning {
	out := make([]Warning, 0, len(f.Warnings))
	for _, w := range f.Warnings {
		v := Warning{Code: w.Code, Text: w.Text}
		if w.Gauge >= 0 && w.Gauge < len(rig.Gauges) {
			v.Gauge = rig.Gauges[w.Gauge].Name
		}
		if w.Time != 0 {
			v.Time = instant(w.Time)
		}
		out = append(out, v)
	}
	return out
}
