package stiffness

import (
	"fmt"
	"math"

	"gaugelog/analysis/beam"
)

// Peak is a greatest sag and where it is, mm.
type Peak struct{ At, Sag Quantity }

// Curve is the fitted sag in mm at each place (mm along the beam) under all
// loads that came on up to and including the step (an index into the input's
// Steps), support movement included, plungers as they were. Like the
// increments it is each load's response at the initial-sag time, free of
// older creep.
func (e *Estimate) Curve(step int, places []float64) ([]float64, error) {
	s, err := e.fit.line(e.fit.theta, e.fit.best, step, true)
	if err != nil {
		return nil, err
	}
	lift, err := e.fit.liftUp(step)
	if err != nil {
		return nil, err
	}
	out := make([]float64, len(places))
	for i, x := range places {
		out[i] = s.Deflection(x) + lift(x)
	}
	return out, nil
}

// Largest is the greatest sag of the fitted curve after a step and its place,
// net of support movement (for a beam on redundant supports, with it), with
// uncertainties.
func (e *Estimate) Largest(step int) (*Peak, error) {
	f := e.fit
	if _, err := f.line(f.theta, f.best, step, false); err != nil {
		return nil, err
	}
	top := func(t []float64, st *state) beam.Extreme {
		s, err := f.line(t, st, step, false)
		if err != nil {
			return beam.Extreme{At: math.NaN(), Value: math.NaN()}
		}
		return s.Greatest(f.m.rig.Specimen.From.Value, f.m.rig.Specimen.From.Value+f.m.rig.Specimen.Length.Value)
	}
	at, _ := f.propagate(func(t []float64, st *state) float64 { return top(t, st).At })
	sag, _ := f.propagate(func(t []float64, st *state) float64 { return top(t, st).Value })
	for _, q := range []Quantity{at, sag} {
		if math.IsNaN(q.Value) || math.IsNaN(q.U) {
			return nil, fmt.Errorf("the greatest sag of step %d has no uncertainty: a shifted input makes the beam fall; mend: check the stated uncertainties of places", step+1)
		}
	}
	return &Peak{At: at, Sag: sag}, nil
}

// line solves the fitted beam under all changes up to a step.
func (f *fitted) line(theta []float64, st *state, step int, supports bool) (*beam.Solution, error) {
	if step < 0 || step >= len(f.m.changes) {
		return nil, fmt.Errorf("there is no step %d; the run has %d", step+1, len(f.m.changes))
	}
	var loads []beam.Load
	for k := range step + 1 {
		loads = append(loads, f.m.loads(st, k)...)
	}
	alpha, gamma, compliance := f.m.parts(st, theta)
	if !supports && f.m.determinate {
		compliance = make([]float64, len(compliance))
	}
	for i, c := range compliance {
		compliance[i] = math.Max(0, c)
	}
	s := math.Inf(1)
	if gamma > 0 {
		s = 1 / gamma
	}
	return f.m.beam(st, 1/alpha, s, compliance).Solve(loads)
}

// liftUp is what the supports' freely fitted movement adds to the curve.
func (f *fitted) liftUp(step int) (func(x float64) float64, error) {
	if !f.m.rigid {
		return func(float64) float64 { return 0 }, nil
	}
	b := f.m.beam(f.st, 1, math.Inf(1), make([]float64, len(f.st.support)))
	for k := range step + 1 {
		for j, s := range f.m.yields {
			b.Supports[s].Settlement += f.theta[f.m.firstYield()+k*len(f.m.yields)+j]
		}
	}
	s, err := b.Solve(nil)
	if err != nil {
		return nil, err
	}
	return s.Deflection, nil
}
