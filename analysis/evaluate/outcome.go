package evaluate

import (
	"fmt"
	"math"
	"strings"
)

// Outcome is one clause of one rule, held against a run.
type Outcome struct {
	Rule, Clause string
	// Pass is nil where nothing was decided; Why says why.
	Pass *bool
	// Measured is nil where the run cannot tell it.
	Measured *Figured
	Required string
	Why      string
}

// Figured is a measured figure in Unit, with its standard uncertainty and its
// expanded one (k = 2, about 95 %); both 0 where unknown.
type Figured struct {
	Value, U, U95 float64
	Unit          string
}

// coverage is the factor of U95. The degrees of freedom of the run's own
// figures are not carried this far, so the usual 2 is taken.
const coverage = 2

// Run holds the facts against the rules, in the order given; each clause
// gives one outcome, or one for each of its times.
func Run(rules []*Rule, f *Facts) []Outcome {
	var out []Outcome
	for _, r := range rules {
		if r.Readings != nil {
			out = append(out, r.schedule(f))
		}
		for i := range r.Clauses {
			c := &r.Clauses[i]
			if len(c.Each) == 0 {
				out = append(out, r.outcome(c, f, ""))
			}
			for _, at := range c.Each {
				out = append(out, r.outcome(c, f, at))
			}
		}
	}
	return out
}

// why joins an outcome's remarks, ending with Informative.
func (r *Rule) why(parts ...string) string {
	var kept []string
	for _, p := range append(parts, r.about(), Informative) {
		if p != "" {
			kept = append(kept, strings.TrimSuffix(p, "."))
		}
	}
	return strings.Join(kept, "; ")
}

// about names the standard and the file.
func (r *Rule) about() string {
	text := "rule " + r.Name
	if r.Standard != "none" {
		text = r.Standard + ", " + r.Edition
	}
	if r.Origin != builtIn {
		text += " (" + r.Origin + ")"
	}
	return text
}

// outcome works one clause out.
func (r *Rule) outcome(c *Clause, f *Facts, each string) Outcome {
	o := Outcome{Rule: r.Name, Clause: c.Clause}
	s := r.scope
	if each != "" {
		s = withEach(r.scope, each)
		o.Clause += "-" + strings.ReplaceAll(r.scope[each].Text, " ", "-")
	}
	e := &env{facts: f, scope: s, used: inputs{}}
	weakest := c.weakest(r, each)
	o.Required = c.words(e)
	measured, err := c.measure.value(e)
	if err != nil {
		o.Why = r.why("cannot evaluate: "+err.Error(), c.Text, basis(c, weakest))
		return o
	}
	o.Measured = figured(e, measured, c.Unit)
	if c.Part == Figure {
		o.Why = r.why(determined(r), c.Text, doubt(e), basis(c, weakest))
		return o
	}
	holds, words, err := c.judge(e, measured)
	switch {
	case err != nil:
		o.Why = r.why("cannot evaluate: "+err.Error(), c.Text, basis(c, weakest))
		return o
	case weakest == MemoryLow:
		words = "not decided, for a number of it is remembered with low confidence; as remembered it " + words
	default:
		o.Pass = &holds
	}
	o.Why = r.why(words, c.Text, doubt(e), basis(c, weakest))
	return o
}

func withEach(s scope, each string) scope {
	out := scope{eachName: s[each]}
	for name, k := range s {
		out[name] = k
	}
	return out
}

// judge compares the measured figure with each side that is required. words
// say where the expanded uncertainty of the margin reaches over the limit.
func (c *Clause) judge(e *env, measured dual) (holds bool, words string, err error) {
	holds = true
	var said []string
	for _, q := range c.required {
		rhs, err := q.rhs.value(e)
		if err != nil {
			return false, "", err
		}
		m := join(measured.v-rhs.v, measured.g, 1, rhs.g, -1)
		holds = holds && q.holds(m.v)
		if u := e.u(m); u > 0 && math.Abs(m.v) <= coverage*u {
			f := units[c.Unit].factor
			said = append(said, fmt.Sprintf("the guard band straddles the limit: the margin is %.3g%s and its U95 %.3g%s, so it is not decided within its uncertainty",
				math.Abs(m.v)/f, behind(difference(c.Unit)), coverage*u/f, behind(difference(c.Unit))))
		}
	}
	if len(said) == 0 {
		return holds, map[bool]string{true: "holds", false: "does not hold"}[holds], nil
	}
	return holds, map[bool]string{true: "holds by the measured value, but ", false: "does not hold by the measured value, but "}[holds] + strings.Join(said, "; "), nil
}

// words is what the clause requires, its limits worked out where they can be.
func (c *Clause) words(e *env) string {
	var out []string
	for _, q := range c.required {
		limit := q.text
		own := &env{facts: e.facts, scope: e.scope, used: inputs{}}
		if v, err := q.rhs.value(own); err == nil {
			limit = fmt.Sprintf("%s (%s)", fmt.Sprintf("%.4g%s", v.v/units[c.Unit].factor, behind(c.Unit)), q.text)
		}
		out = append(out, strings.ReplaceAll(q.op, "_", " ")+" "+limit)
	}
	return strings.Join(out, " and ")
}

// behind is a unit as it stands behind a number in a sentence, with the space
// by which a reader's own units are put in; nothing for a plain number.
func behind(unit string) string {
	if unit == "1" {
		return ""
	}
	return "\u202f" + unit
}

// difference is the unit of a difference: of temperatures, kelvin.
func difference(unit string) string {
	if unit == "C" {
		return "K"
	}
	return unit
}

func figured(e *env, d dual, unit string) *Figured {
	f := units[unit].factor
	u := e.u(d) / f
	return &Figured{Value: d.v / f, U: u, U95: coverage * u, Unit: unit}
}

// doubt says which inputs' uncertainty is not known.
func doubt(e *env) string {
	names := e.unknown()
	if len(names) == 0 {
		return ""
	}
	return "the uncertainty of " + strings.Join(names, ", ") + " is not known and left out"
}

// determined says that nothing is required of a figure.
func determined(r *Rule) string {
	if r.Determination {
		return "determination only: the standard sets no limit"
	}
	return "a figure: nothing is required of it"
}

// basis says where the clause's numbers come from, the weakest counting.
func basis(c *Clause, weakest Confidence) string {
	return fmt.Sprintf("%s; %s", c.Source, weakest.words())
}

// schedule holds the reading times against what was read.
func (r *Rule) schedule(f *Facts) Outcome {
	s := r.Readings
	o := Outcome{Rule: r.Name, Clause: "reading-times"}
	tolerance := r.scope[s.Tolerance]
	weakest := s.Confidence
	if tolerance.Confidence.rank() > weakest.rank() {
		weakest = tolerance.Confidence
	}
	var times, missed, ahead []string
	duration := finite(f.Duration)
	for _, name := range s.Times {
		k := r.scope[name]
		if k.Confidence.rank() > weakest.rank() {
			weakest = k.Confidence
		}
		at, text := k.value.Value, k.Text
		times = append(times, text)
		switch {
		case readNear(f.ReadAt, at, tolerance.value.Value*at):
		case duration == nil || duration.Value < at:
			ahead = append(ahead, text)
		default:
			missed = append(missed, text)
		}
	}
	o.Required = fmt.Sprintf("a reading at %s, each within %s of its time", strings.Join(times, ", "), tolerance.Text)
	base := fmt.Sprintf("%s; tolerance: %s; %s", s.Source, tolerance.Source, weakest.words())
	switch {
	case duration == nil || len(f.ReadAt) == 0:
		o.Why = r.why("cannot evaluate: no readings of a loaded step are known", base)
	case weakest == MemoryLow:
		o.Why = r.why("not decided: a number of it is remembered with low confidence", listed("missed", missed), listed("not reached", ahead), base)
	case len(missed) > 0:
		no := false
		o.Pass = &no
		o.Why = r.why("does not hold", listed("missed", missed), listed("not reached", ahead), base)
	case len(ahead) > 0:
		o.Why = r.why(fmt.Sprintf("cannot evaluate: the creep step lasted %s", timeText(duration.Value)), listed("not reached", ahead), base)
	default:
		yes := true
		o.Pass = &yes
		o.Why = r.why("holds", base)
	}
	return o
}

func listed(what string, times []string) string {
	if len(times) == 0 {
		return ""
	}
	return what + ": " + strings.Join(times, ", ")
}

func readNear(readAt []float64, at, tolerance float64) bool {
	for _, t := range readAt {
		if math.Abs(t-at) <= tolerance*(1+1e-9) {
			return true
		}
	}
	return false
}
