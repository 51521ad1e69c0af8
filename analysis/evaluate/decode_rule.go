package evaluate

import (
	"maps"
	"slices"
	"strings"

	"go.yaml.in/yaml/v3"
)

// rule decodes the top of a rule file. Numbers are known before clauses are
// read, wherever they stand in the file.
func (d *decoder) rule(root *yaml.Node) *Rule {
	r := &Rule{scope: scope{}}
	var clauses []*yaml.Node
	var readings *yaml.Node
	d.fields(root, "the rule", map[string]func(*yaml.Node){
		"rule":          d.named(&r.Name, ruleName),
		"title":         d.text(&r.Title),
		"standard":      d.text(&r.Standard),
		"edition":       d.text(&r.Edition),
		"determination": d.bool(&r.Determination),
		"numbers":       d.list(func(n *yaml.Node) { d.number(r, n) }),
		"readings":      func(n *yaml.Node) { readings = n },
		"clauses":       d.list(func(n *yaml.Node) { clauses = append(clauses, n) }),
	}, "rule", "title", "standard", "edition", "clauses")
	for i := range r.Numbers {
		r.scope[r.Numbers[i].Name] = &r.Numbers[i]
	}
	if readings != nil {
		d.readings(r, readings)
	}
	for _, n := range clauses {
		d.clause(r, n)
	}
	return r
}

// number decodes one named number.
func (d *decoder) number(r *Rule, n *yaml.Node) {
	k := Number{}
	var value, detail, unitOf *yaml.Node
	d.fields(n, "a number", map[string]func(*yaml.Node){
		"name":       d.named(&k.Name, numberName),
		"value":      func(v *yaml.Node) { value = v; d.text(&k.Text)(v) },
		"detail":     func(v *yaml.Node) { detail = v; d.text(&k.Detail)(v) },
		"unit":       func(v *yaml.Node) { unitOf = v; d.text(&k.Text)(v) },
		"source":     d.text(&k.Source),
		"confidence": one(d, &k.Confidence, confidences),
	}, "name", "source", "confidence")
	switch {
	case (value == nil) == (detail == nil) || (detail == nil) != (unitOf == nil):
		d.wrong(n, "write value: 90 d, or detail: design_load with unit: N", "a number has a value, or a detail of the rig file and its unit")
	case value != nil:
		q, dm, err := parseAmount(k.Text)
		if err != nil {
			d.wrong(value, "write a number and a unit, such as 90 d or 55 %", "%v", err)
		}
		q.Exact = q.U == 0
		k.value, k.dim = q, dm
	default:
		u, ok := units[k.Text]
		if !ok {
			d.wrong(unitOf, "known: "+strings.Join(unitNames(), ", "), "unknown unit %q", k.Text)
		}
		k.dim = u.dim
	}
	_, taken := catalogue[k.Name]
	_, call := lookups[k.Name]
	switch {
	case taken || call || k.Name == eachName:
		d.wrong(n, "give it another name", "%q is a name of the run's own figures", k.Name)
	case slices.ContainsFunc(r.Numbers, func(o Number) bool { return o.Name == k.Name }):
		d.wrong(n, "give it another name", "there are two numbers called %q", k.Name)
	}
	r.Numbers = append(r.Numbers, k)
}

// readings decodes the schedule.
func (d *decoder) readings(r *Rule, n *yaml.Node) {
	s := &Readings{}
	d.fields(n, "readings", map[string]func(*yaml.Node){
		"times": d.list(func(m *yaml.Node) {
			var name string
			d.text(&name)(m)
			d.timeName(r, m, name)
			s.Times = append(s.Times, name)
		}),
		"tolerance": func(m *yaml.Node) {
			d.text(&s.Tolerance)(m)
			if k := r.scope[s.Tolerance]; k == nil || k.dim != (dim{}) || k.Detail != "" || !(k.value.Value > 0) {
				d.wrong(m, "name a number such as 5 %", "%q is no share of time among the numbers", s.Tolerance)
			}
		},
		"source":     d.text(&s.Source),
		"confidence": one(d, &s.Confidence, confidences),
	}, "times", "tolerance", "source", "confidence")
	r.Readings = s
}

func (d *decoder) timeName(r *Rule, n *yaml.Node, name string) {
	if k := r.scope[name]; k == nil || k.dim != (dim{second: 1}) || k.Detail != "" || !(k.value.Value > 0) {
		d.wrong(n, "add it under numbers, with a value such as 24 h", "%q is no time among the numbers", name)
	}
}

// clause decodes one clause and resolves its formulas.
func (d *decoder) clause(r *Rule, n *yaml.Node) {
	c := Clause{}
	var measure, unitOf *yaml.Node
	sides := map[string]*yaml.Node{}
	known := map[string]func(*yaml.Node){
		"clause":     d.named(&c.Clause, ruleName),
		"part":       one(d, &c.Part, parts),
		"text":       d.text(&c.Text),
		"measure":    func(m *yaml.Node) { measure = m; d.text(&c.Measure)(m) },
		"unit":       func(m *yaml.Node) { unitOf = m; one(d, &c.Unit, unitNames())(m) },
		"source":     d.text(&c.Source),
		"confidence": one(d, &c.Confidence, confidences),
		"each": d.list(func(m *yaml.Node) {
			var name string
			d.text(&name)(m)
			d.timeName(r, m, name)
			c.Each = append(c.Each, name)
		}),
	}
	for _, op := range ops {
		known[op] = func(m *yaml.Node) { sides[op] = m }
	}
	d.fields(n, "a clause", known, "clause", "part", "measure", "unit", "source", "confidence")
	if slices.ContainsFunc(r.Clauses, func(o Clause) bool { return o.Clause == c.Clause }) {
		d.wrong(n, "give it another name", "there are two clauses called %q", c.Clause)
	}
	if measure == nil || unitOf == nil {
		return
	}
	s := maps.Clone(r.scope)
	if len(c.Each) > 0 {
		s[eachName] = r.scope[c.Each[0]]
	}
	if s[eachName] == nil {
		delete(s, eachName)
	}
	want := units[c.Unit].dim
	c.measure = d.formula(measure, s, want, c.Unit)
	for _, op := range ops {
		if m := sides[op]; m != nil {
			c.required = append(c.required, requirement{op: op, text: strings.Join(strings.Fields(m.Value), " "), rhs: d.limit(m, s, want, c.Unit)})
		}
	}
	d.purpose(r, n, &c)
	r.Clauses = append(r.Clauses, c)
}

// purpose checks that what a clause is for and what it requires agree.
func (d *decoder) purpose(r *Rule, n *yaml.Node, c *Clause) {
	switch {
	case c.Part == Figure && len(c.required) > 0:
		d.wrong(n, "call it a criterion, or take the requirement out", "a figure requires nothing")
	case c.Part != Figure && c.Part != "" && len(c.required) == 0:
		d.wrong(n, "add "+strings.Join(ops, ", ")+", or call it a figure", "clause %q requires nothing", c.Clause)
	case c.Part == Criterion && r.Determination:
		d.wrong(n, "call it a figure, or take determination out", "a determination has no criteria")
	}
}

// formula parses and resolves a formula that must have a dimension.
func (d *decoder) formula(n *yaml.Node, s scope, want dim, unitName string) *node {
	if n.Kind != yaml.ScalarNode {
		d.wrong(n, "write it on one line", "a formula is wanted here")
		return nil
	}
	tree, bad := parseFormula(n.Value)
	var got dim
	if bad == nil {
		got, bad = tree.resolve(s)
	}
	if bad != nil {
		at := *n
		if n.Style&(yaml.FoldedStyle|yaml.LiteralStyle) == 0 {
			at.Column += len([]rune(n.Value[:min(bad.pos, len(n.Value))]))
			if n.Style&(yaml.DoubleQuotedStyle|yaml.SingleQuotedStyle) != 0 {
				at.Column++
			}
		}
		d.wrong(&at, bad.fix, "%s", bad.what)
		return nil
	}
	if got != want {
		d.wrong(n, "correct the formula or the unit", "the formula gives %s, and %s is %s", got, unitName, want)
	}
	return tree
}

// limit is formula for a requirement: a number in it must be named, so that
// its source stands beside it. 0 and 1 may stand bare.
func (d *decoder) limit(n *yaml.Node, s scope, want dim, unitName string) *node {
	tree := d.formula(n, s, want, unitName)
	tree.walk(func(part *node) {
		if part.op == 'n' && part.literal != 0 && part.literal != 1 {
			d.wrong(n, "list it under numbers with its source and confidence, and name it here", "a limit's number %g has no source", part.literal)
		}
	})
	return tree
}
