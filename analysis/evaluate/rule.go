package evaluate

import (
	"fmt"
	"maps"
	"math"
	"slices"
	"strings"
)

// Confidence says how a number or a clause came into a rule file.
type Confidence string

// The confidences, from the surest to the least sure.
const (
	Confirmed    Confidence = "confirmed"     // compared with a copy of the standard by whoever wrote the file
	Read         Confidence = "read"          // read in a public text named as the source
	Choice       Confidence = "choice"        // no standard's number: chosen by whoever wrote the file
	MemoryHigh   Confidence = "memory-high"   // remembered, surely
	MemoryMedium Confidence = "memory-medium" // remembered, likely
	MemoryLow    Confidence = "memory-low"    // remembered, doubtful: decides nothing
)

var confidences = []Confidence{Confirmed, Read, Choice, MemoryHigh, MemoryMedium, MemoryLow}

// rank orders confidences; greater is less sure.
func (c Confidence) rank() int { return slices.Index(confidences, c) }

// words is how a confidence is told to a reader.
func (c Confidence) words() string {
	switch c {
	case Confirmed:
		return "confirmed against a copy by the rule file's writer"
	case Read:
		return "read in a public text"
	case Choice:
		return "the rule file's own choice, no standard's number"
	}
	return "from memory (" + strings.TrimPrefix(string(c), "memory-") + " confidence): confirm against your copy"
}

// Rule is one rule file.
type Rule struct {
	Name     string // as the rig file's `evaluate` lists it
	Title    string
	Standard string // its number; "none" where the rule is of no standard
	Edition  string
	// Determination is true of a standard that only asks for figures: it has
	// no criteria.
	Determination bool
	Numbers       []Number
	Readings      *Readings
	Clauses       []Clause
	// Origin is "built in" or the file's name.
	Origin string

	scope scope
}

// Number is a named number of a rule with where it comes from; or, with
// Detail, one that the rig file's details must state.
type Number struct {
	Name       string
	Text       string // as written: "90 d"
	Detail     string // name of the rig file's detail; Text is then its unit
	Source     string
	Confidence Confidence

	value Quantity
	dim   dim
}

// in is the number's value, from the details where it stands there. The error
// is a *missing.
func (k *Number) in(f *Facts) (Quantity, error) {
	if k.Detail == "" {
		return k.value, nil
	}
	text, ok := f.Details[k.Detail]
	if !ok || strings.TrimSpace(text) == "" {
		return Quantity{}, &missing{fmt.Sprintf("the rig file's details state no %s (in %s)", k.Detail, k.Text)}
	}
	q, d, err := parseAmount(text)
	switch {
	case err != nil:
		return Quantity{}, &missing{fmt.Sprintf("details.%s: %v", k.Detail, err)}
	case d != k.dim:
		return Quantity{}, &missing{fmt.Sprintf("details.%s: %q is not in %s or a unit like it", k.Detail, text, k.Text)}
	}
	q.Exact = q.U == 0
	return q, nil
}

// Readings is the schedule of reading times a standard asks for.
type Readings struct {
	Times      []string // names of numbers
	Tolerance  string   // name of a number: the part of a time by which a reading may miss it
	Source     string
	Confidence Confidence
}

// Parts a clause may belong to. Figure clauses have no requirement.
const (
	Geometry  = "geometry"
	LoadLevel = "load"
	Climate   = "climate"
	TimeCheck = "time"
	Figure    = "figure"
	Criterion = "criterion"
)

var parts = []string{Geometry, LoadLevel, Climate, TimeCheck, Figure, Criterion}

// Clause is one thing a rule measures and, unless it is a figure, requires.
type Clause struct {
	Clause     string
	Part       string
	Text       string // what a reader should know about it
	Measure    string // formula
	Unit       string
	Each       []string // names of times; the formula calls the time t
	Source     string
	Confidence Confidence

	measure  *node
	required []requirement
}

// requirement is one side of what a clause requires.
type requirement struct {
	op   string // at_least, at_most, above, below
	text string
	rhs  *node
}

var ops = []string{"at_least", "at_most", "above", "below"}

// holds compares the margin, measured less required, with zero.
func (r requirement) holds(margin float64) bool {
	switch r.op {
	case "at_least":
		return margin >= 0
	case "at_most":
		return margin <= 0
	case "above":
		return margin > 0
	}
	return margin < 0
}

// Inputs names what the clause draws from the run, in order: names of the
// catalogue, functions with their time, and details. each is the time a
// clause with Each is worked out for, "" otherwise.
func (c *Clause) Inputs(r *Rule, each string) []string {
	set := map[string]bool{}
	visit := func(n *node) {
		switch n.op {
		case 'q':
			set[n.name] = true
		case 'k':
			if k := r.scope[n.name]; k != nil && k.Detail != "" {
				set["details."+k.Detail] = true
			}
		case 'f':
			arg := n.arg
			if arg == eachName && each != "" {
				arg = each
			}
			set[n.name+"("+timeText(r.scope[arg].value.Value)+")"] = true
		}
	}
	c.measure.walk(visit)
	for _, q := range c.required {
		q.rhs.walk(visit)
	}
	return slices.Sorted(maps.Keys(set))
}

// weakest is the least sure of the clause itself and the numbers it names.
func (c *Clause) weakest(r *Rule, each string) Confidence {
	worst := c.Confidence
	take := func(name string) {
		if name == eachName && each != "" {
			name = each
		}
		if k := r.scope[name]; k != nil && k.Confidence.rank() > worst.rank() {
			worst = k.Confidence
		}
	}
	visit := func(n *node) {
		take(n.name)
		take(n.arg)
	}
	c.measure.walk(visit)
	for _, q := range c.required {
		q.rhs.walk(visit)
	}
	return worst
}

// Moment is a time after full load (or after unloading) that a rule reads at.
type Moment struct {
	AfterS float64
	// ToleranceS is by how much a reading may miss it; 0 where the rule only
	// reads a figure there.
	ToleranceS float64
}

// Moments lists the times the rules read at, in order and without repeats:
// what the caller must provide in Facts.Sag, Facts.Recovered and Facts.ReadAt.
func Moments(rules []*Rule) []Moment {
	found := map[float64]float64{}
	for _, r := range rules {
		if r.Readings != nil {
			tolerance := r.scope[r.Readings.Tolerance].value.Value
			for _, name := range r.Readings.Times {
				at := r.scope[name].value.Value
				found[at] = math.Max(found[at], tolerance*at)
			}
		}
		for i := range r.Numbers {
			if k := &r.Numbers[i]; k.dim == (dim{second: 1}) && k.Detail == "" && k.value.Value > 0 {
				found[k.value.Value] = math.Max(found[k.value.Value], 0)
			}
		}
	}
	out := make([]Moment, 0, len(found))
	for _, at := range slices.Sorted(maps.Keys(found)) {
		out = append(out, Moment{at, found[at]})
	}
	return out
}

// timeText writes seconds in the greatest unit that leaves few digits.
func timeText(s float64) string {
	for _, u := range []struct {
		name string
		s    float64
	}{{"d", 86400}, {"h", 3600}, {"min", 60}} {
		if s >= u.s && (u.name != "d" || s >= 2*u.s) {
			return fmt.Sprintf("%.4g %s", s/u.s, u.name)
		}
	}
	return fmt.Sprintf("%.4g s", s)
}
