package analysis

import (
	"fmt"
	"math"
	"os"
	"slices"
	"strings"

	"gaugelog/analysis/evaluate"
	"gaugelog/analysis/history"
	"gaugelog/analysis/steps"
	"gaugelog/config"
)

// RulesFolder is the folder of a run (or beside a rig file) that holds rule
// files of the user's own.
const RulesFolder = "rules"

// spanOverSag is the rule that goes with the rig file's limit of that name.
const spanOverSag = "span-over-sag"

// standardTimes are the reading times of a rig file that states none, s: 1
// and 10 min, 1 h, 1, 7, 30 and 90 d, 1 a (common practice).
var standardTimes = []float64{60, 600, 3600, 86400, 604800, 2592000, 7776000, 31557600}

// evaluator holds the rules a rig file asks for.
type evaluator struct {
	rules   []*evaluate.Rule
	unknown []string
	moments []evaluate.Moment
}

// evaluatorOf picks the rules: those the rig file lists, and span over sag
// where it states that limit. folder holds the user's own, "" for none. The
// error is a rule file that is wrong, with its place.
func evaluatorOf(rig *config.Rig, folder string) (*evaluator, error) {
	names := slices.Clone(rig.Evaluate)
	if rig.Limits.SpanOverSag != nil && !slices.Contains(names, spanOverSag) {
		names = append(names, spanOverSag)
	}
	if len(names) == 0 {
		return &evaluator{}, nil
	}
	var own []*evaluate.Rule
	if folder != "" {
		var err error
		if own, err = evaluate.LoadFolder(os.DirFS(folder)); err != nil {
			return nil, fmt.Errorf("the rules in %s: %w", RulesFolder, err)
		}
	}
	v := &evaluator{}
	v.rules, v.unknown = evaluate.Pick(names, own)
	v.moments = evaluate.Moments(v.rules)
	return v, nil
}

// times adds to the times asked for (h) those the rules read at, the initial
// sag's and the creep step's end; prune takes them out of the result again.
func (v *evaluator) times(asked []float64, rig *config.Rig, t *creepTask) []float64 {
	out := slices.Clone(asked)
	add := func(h float64) {
		if !slices.ContainsFunc(out, func(o float64) bool { return math.Abs(o-h) <= 1e-9*h }) {
			out = append(out, h)
		}
	}
	if len(asked) == 0 {
		for _, s := range standardTimes {
			add(s / 3600)
		}
	}
	if len(v.rules) == 0 {
		return out
	}
	add(rig.Read.InitialAfter.Value / 3600)
	for _, m := range v.moments {
		add(m.AfterS / 3600)
	}
	add(t.in.EndH - t.in.FullH)
	return out
}

// prune leaves in the creep section the times the rig file asks for, or the
// standard ones.
func (c *Creep) prune(rig *config.Rig) {
	wanted := standardTimes
	if len(rig.Read.Times) > 0 {
		wanted = nil
		for _, t := range rig.Read.Times {
			wanted = append(wanted, t.Value)
		}
	}
	extra := func(s float64) bool {
		return !slices.ContainsFunc(wanted, func(w float64) bool { return sameTime(s, w) })
	}
	c.After = slices.DeleteFunc(c.After, func(a After) bool { return extra(a.AfterS) })
	c.Equivalent = slices.DeleteFunc(c.Equivalent, func(e Equivalent) bool { return extra(e.AfterS) })
	c.Recovery = slices.DeleteFunc(c.Recovery, func(r Recovery) bool { return extra(r.AfterS) })
}

func sameTime(a, b float64) bool { return math.Abs(a-b) <= 1e-6*math.Max(math.Abs(a), math.Abs(b)) }

// addEvaluations holds the run against the rules; it comes last, for it reads
// the rest of the result.
func (r *Result) addEvaluations(h *history.History, f *steps.Findings, v *evaluator, ei, s, gravity, uGravity float64) error {
	defer r.Creep.prune(h.Rig)
	for _, name := range v.unknown {
		text := fmt.Sprintf("evaluate: %q is no rule; known: %s, and the files in the folder %s", name, strings.Join(evaluate.Names(), ", "), RulesFolder)
		r.Warnings = append(r.Warnings, Warning{Code: "unknown-rule", Text: text})
		r.Evaluations = append(r.Evaluations, Evaluation{Rule: name, Clause: "rule", Why: "cannot evaluate: there is no such rule; " + evaluate.Informative})
	}
	if len(v.rules) == 0 {
		return nil
	}
	b := factsBuilder{r: r, h: h, f: f, ei: ei, s: s, gravity: gravity, uGravity: uGravity}
	facts, err := b.build(v.moments)
	if err != nil {
		return err
	}
	for _, o := range evaluate.Run(v.rules, facts) {
		e := Evaluation{Rule: o.Rule, Clause: o.Clause, Pass: o.Pass, Required: o.Required, Why: o.Why}
		if m := o.Measured; m != nil {
			q := quantity(m.Value, m.U, m.Unit)
			if q.U != nil {
				k, u95 := m.U95/m.U, m.U95
				q.K, q.U95 = &k, &u95
			}
			e.Measured = &q
		}
		r.Evaluations = append(r.Evaluations, e)
	}
	return nil
}
