package report

import (
	"slices"
	"strings"

	"gaugelog/analysis"
)

// evaluations holds the run against the rules asked for, a table each.
func (b *builder) evaluations() Section {
	s := Section{ID: "evaluations", Title: "Evaluations",
		Lead: "Informative. The standard's text, its edition and a licensed engineer decide."}
	if len(b.r.Evaluations) == 0 {
		s.Lead = ""
		s.Blocks = append(s.Blocks, Paragraph{"No rule was asked for."})
		return s
	}
	var rules []string
	of := map[string][]analysis.Evaluation{}
	for _, e := range b.r.Evaluations {
		if of[e.Rule] == nil {
			rules = append(rules, e.Rule)
		}
		of[e.Rule] = append(of[e.Rule], e)
	}
	for _, r := range rules {
		s.Blocks = append(s.Blocks, b.ruleTable(r, of[r]))
	}
	return s
}

func (b *builder) ruleTable(rule string, clauses []analysis.Evaluation) Table {
	t := Table{Caption: "Rule " + rule, Columns: []Column{
		{Name: "Clause", Text: true}, {Name: "Holds", Text: true}, {Name: "Measured", Text: true}, {Name: "Required", Text: true}, {Name: "Why", Text: true}}}
	whys, tail := shortWhys(rule, clauses)
	for i, e := range clauses {
		measured := "–"
		if e.Measured != nil {
			measured = b.with(e.Measured)
		}
		required := e.Required
		if required == "" {
			required = "nothing"
		}
		t.Rows = append(t.Rows, []string{e.Clause, holdsWords(e), measured, required, whys[i]})
	}
	if tail != "" {
		t.Says = "Of every clause: " + tail + "."
	}
	return t
}

func holdsWords(e analysis.Evaluation) string {
	switch {
	case e.Pass != nil && *e.Pass:
		return "yes"
	case e.Pass != nil:
		return "NO"
	case e.Measured != nil && e.Required == "":
		return "a figure"
	case e.Measured != nil:
		return "not decided"
	}
	return "cannot evaluate"
}

// shortWhys splits the reasons at their semicolons and takes out what the
// table says elsewhere: the verdict, the rule's name, that it is informative.
// What all clauses share is returned once, as the tail.
func shortWhys(rule string, clauses []analysis.Evaluation) (whys []string, tail string) {
	said := []string{"holds", "a figure: nothing is required of it", "rule " + rule, "informative", "the standard's text and edition and a licensed engineer decide"}
	parts := make([][]string, len(clauses))
	count := map[string]int{}
	for i, e := range clauses {
		for _, p := range strings.Split(e.Why, "; ") {
			if !slices.Contains(said, p) && !slices.Contains(parts[i], p) {
				parts[i] = append(parts[i], p)
				count[p]++
			}
		}
	}
	var shared []string
	for i := range clauses {
		var own []string
		for _, p := range parts[i] {
			switch {
			case len(clauses) == 1 || count[p] < len(clauses):
				own = append(own, p)
			case i == 0:
				shared = append(shared, p)
			}
		}
		whys = append(whys, strings.Join(own, "; "))
	}
	return whys, strings.Join(shared, "; ")
}
