package analysis

import (
	"gaugelog/analysis/history"
	"gaugelog/analysis/steps"
	"gaugelog/analysis/stiffness"
)

// Find says what happened in a run, exactly as [Evaluate] takes it: for those
// that want the gauges' tracks themselves. Errors are those of Evaluate.
func Find(h *history.History) (*steps.Findings, error) {
	st, err := stageOf(h)
	if err != nil {
		return nil, err
	}
	return st.findings, nil
}

// stage is what is known before anything is fitted.
type stage struct {
	gravity  stiffness.Value // m/s2
	ei, s    float64         // nominal stiffness, N.mm2 and N
	findings *steps.Findings
}

// stageOf finds the steps with the loads' expected shares along the beam.
func stageOf(h *history.History) (*stage, error) {
	g, _, err := stiffness.GravityOf(h.Rig.Gravity)
	if err != nil {
		return nil, err
	}
	ei, s, err := nominal(h.Rig)
	if err != nil {
		return nil, err
	}
	expected, err := influence(h.Rig, ei, s, false)
	if err != nil {
		return nil, err
	}
	f, err := steps.Find(h, steps.Options{Gravity: g.Value, Influence: expected})
	if err != nil {
		return nil, err
	}
	return &stage{g, ei, s, f}, nil
}
