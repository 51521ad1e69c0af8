package analysis

import (
	"gaugelog/analysis/history"
	"gaugelog/analysis/steps"
	"gaugelog/analysis/stiffness"
)

// Find says what happened in a run, exactly as [Evaluate] takes it: for those
// that want the gauges' tracks themselves. Errors are those of Evaluate.
func Find(h *history.History) (*steps.Findings, error) {
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
	return steps.Find(h, steps.Options{Gravity: g.Value, Influence: expected})
}
