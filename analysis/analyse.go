package analysis

import (
	"fmt"
	"path/filepath"

	"gaugelog/analysis/creep"
	"gaugelog/analysis/history"
	"gaugelog/analysis/steps"
	"gaugelog/analysis/stiffness"
	"gaugelog/config"
)

// Options chooses what Analyse does.
type Options struct {
	// Program names the program and its version in the result.
	Program string
	// Beyond allows forecasts more than two decades of time beyond the data.
	Beyond bool
	// Thorough, if set, is handed what the modulus was worked out from and gives
	// the check of its uncertainty by drawn inputs, such as
	// [stiffness.Thorough] with a context and a progress bar. Its error is
	// Evaluate's.
	Thorough func(stiffness.Input) (*stiffness.MonteCarlo, error)
	// Rules is a folder of rule files of the user's own; "": none. Analyse
	// takes the run's own RulesFolder where it is not set.
	Rules string
}

// Analyse reads a run folder back and says everything about it. Its error is
// a folder that cannot be read, a rig file that is wrong or a run without
// readings; whatever else is missing becomes a warning in the result.
func Analyse(dir string, o Options) (*Result, error) {
	h, err := history.Load(dir)
	if err != nil {
		return nil, err
	}
	if o.Rules == "" {
		o.Rules = filepath.Join(dir, RulesFolder)
	}
	return Evaluate(h, o)
}

// Evaluate works out the result of a run that was read back.
func Evaluate(h *history.History, o Options) (*Result, error) {
	rules, err := evaluatorOf(h.Rig, o.Rules)
	if err != nil {
		return nil, err
	}
	st, err := stageOf(h)
	if err != nil {
		return nil, err
	}
	g, ei, s, f := st.gravity, st.ei, st.s, st.findings
	r := &Result{
		Schema: Schema, Run: runOf(h, g, o), Steps: stepsOf(h.Rig, f),
		Stiffness: emptyStiffness(h.Rig), Creep: emptyCreep(h.Rig),
		Drift:    driftOf(h, nil, nil, nil),
		Supports: supportsOf(h.Rig, f), Disturbances: disturbancesOf(h.Rig, f), Decisions: decisionsOf(f),
		Evaluations: []Evaluation{}, Warnings: append(notesOf(h), warningsOf(h.Rig, f)...), Series: seriesOf(h, f),
	}
	if r.Drift.Soak, err = soaksOf(h, f); err != nil {
		return nil, err
	}
	found := len(r.Warnings)
	in := stiffnessInput(h, f, g.Value)
	if e := r.addStiffness(h.Rig, f, in); e != nil {
		ei, s = e.Bending.Value, shearOf(e, s)
		if o.Thorough != nil {
			mc, err := o.Thorough(in)
			if err != nil {
				return nil, fmt.Errorf("checking the modulus's uncertainty by draws: %w", err)
			}
			r.Stiffness.MonteCarlo = monteCarloOf(mc)
		}
	}
	if err := r.addCreep(h, f, g.Value, ei, s, rules, o); err != nil {
		return nil, err
	}
	if err := r.addEvaluations(h, f, rules, ei, s, g.Value, g.U); err != nil {
		return nil, err
	}
	if f.TooFew {
		r.Warnings = r.Warnings[:found] // what came behind follows from that
	}
	return r, nil
}

// shearOf is the fitted shear stiffness, or the nominal one where the fit has
// none.
func shearOf(e *stiffness.Estimate, nominal float64) float64 {
	if e.Shear != nil && e.Shear.Value > 0 {
		return e.Shear.Value
	}
	return nominal
}

func runOf(h *history.History, g stiffness.Value, o Options) Run {
	return Run{
		Title: h.Rig.Title, Readings: h.Readings, First: instant(h.First), Last: instant(h.Last),
		RigSHA256: h.RigSHA256, Amendments: len(h.Amendments), Gravity: quantity(g.Value, g.U, "m/s2"),
		Program: o.Program, DamagedBlocks: len(h.Damaged),
	}
}

// notesOf renders what was found while reading.
func notesOf(h *history.History) []Warning {
	out := []Warning{}
	for _, n := range h.Notes {
		w := Warning{Code: n.Code, Gauge: n.Gauge, Text: n.Text}
		if n.Time != 0 {
			w.Time = instant(n.Time)
		}
		out = append(out, w)
	}
	return out
}

// addStiffness fits the beam; where that cannot be, a warning says why.
func (r *Result) addStiffness(rig *config.Rig, f *steps.Findings, in stiffness.Input) *stiffness.Estimate {
	e, err := stiffness.Compute(in)
	if err != nil {
		r.Warnings = append(r.Warnings, Warning{Code: "no-modulus", Text: fmt.Sprintf("no stiffness: %v", err)})
		return nil
	}
	r.Stiffness = stiffnessOf(rig, e)
	for _, w := range e.Warnings {
		r.Warnings = append(r.Warnings, Warning{Code: w.Code, Gauge: w.Gauge, Text: w.Text})
	}
	addCurves(r, rig, f, e)
	return e
}

// addCreep fits the laws; where that cannot be, a warning says why.
func (r *Result) addCreep(h *history.History, f *steps.Findings, gravity, ei, s float64, rules *evaluator, o Options) error {
	shares, err := influence(h.Rig, ei, s, true)
	if err != nil {
		return err
	}
	t, ok := creepTaskOf(h, f, shares)
	if !ok {
		r.Warnings = append(r.Warnings, Warning{Code: "no-creep", Text: "no loaded step was found, so there is no creep to speak of"})
		return nil
	}
	opt := creepOptions(h.Rig)
	opt.Beyond = o.Beyond
	opt.TimesH = rules.times(opt.TimesH, h.Rig, t)
	opt.ForecastH = append(opt.ForecastH, drawnForecasts(h.Rig, t.in.EndH-t.in.FullH)...)
	a, err := creep.Analyse(t.in, opt)
	if err != nil {
		r.Warnings = append(r.Warnings, Warning{Code: "no-creep", Text: fmt.Sprintf("no creep law: %v", err)})
		return nil
	}
	if odd := t.oddOnes(a.Best); len(odd) > 0 {
		if freed, err := creep.Analyse(t.freed(odd), opt); err == nil && freed.Best != nil {
			a = freed
		}
	}
	own := instrument{h.Rig, f.Chord, true}
	shared, err := commonOf(h, f, t, own, gravity, ei, s)
	if err != nil {
		return err
	}
	r.Creep = creepOf(r, h, t, own, shared, f.Steps[t.step].Name, a)
	r.Drift = driftOf(h, t, a, r.Drift.Soak)
	r.Warnings = append(r.Warnings, driftWarnings(h, t, a)...)
	for _, n := range append(t.notes, a.Notes...) {
		r.Warnings = append(r.Warnings, Warning{Code: n.Code, Gauge: r.Creep.Gauge, Text: n.Text})
	}
	addLaw(r, h, t, a)
	return nil
}
