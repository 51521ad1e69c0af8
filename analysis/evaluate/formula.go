package evaluate

import (
	"fmt"
	"maps"
	"math"
	"slices"
	"strings"
)

// eachName is the time of a clause with `each`, by this name in its formula.
const eachName = "t"

// scope is what a formula may name beside the catalogue: the rule's numbers.
type scope map[string]*Number

// resolve checks every name of the tree, turns those of the rule's numbers
// into such, and returns the dimension of the whole.
func (n *node) resolve(s scope) (dim, *formulaError) {
	switch n.op {
	case 'n':
		return dim{}, nil
	case 'q', 'k':
		if k, ok := s[n.name]; ok {
			n.op = 'k'
			return k.dim, nil
		}
		if q, ok := catalogue[n.name]; ok {
			return units[q.unit].dim, nil
		}
		return dim{}, &formulaError{n.pos, fmt.Sprintf("unknown name %q", n.name), n.hint(s)}
	case 'f':
		return n.resolveCall(s)
	}
	a, err := n.left.resolve(s)
	if err != nil || n.right == nil {
		if n.op == '^' {
			a = a.power(n.exponent)
		}
		return a, err
	}
	b, err := n.right.resolve(s)
	switch {
	case err != nil:
		return dim{}, err
	case n.op == '*':
		return a.times(b, 1), nil
	case n.op == '/':
		return a.times(b, -1), nil
	case a != b:
		return dim{}, &formulaError{n.pos, fmt.Sprintf("%s and %s cannot be added or subtracted", a, b), "bring both sides to one dimension"}
	}
	return a, nil
}

func (n *node) resolveCall(s scope) (dim, *formulaError) {
	f, ok := lookups[n.name]
	if !ok {
		return dim{}, &formulaError{n.pos, fmt.Sprintf("unknown function %q", n.name), "known: " + strings.Join(slices.Sorted(maps.Keys(lookups)), ", ")}
	}
	k, ok := s[n.arg]
	if !ok || k.dim != (dim{second: 1}) || k.Detail != "" {
		return dim{}, &formulaError{n.pos, fmt.Sprintf("%q in %s is no time among the rule's numbers", n.arg, n.name), "add it under numbers, with a value such as 24 h"}
	}
	return units[f.unit].dim, nil
}

// hint lists the names that begin like the unknown one, or says where the
// names stand.
func (n *node) hint(s scope) string {
	var near []string
	for _, known := range slices.Concat(slices.Sorted(maps.Keys(s)), slices.Sorted(maps.Keys(catalogue))) {
		if len(n.name) >= 2 && strings.HasPrefix(known, n.name[:2]) {
			near = append(near, known)
		}
	}
	if len(near) > 0 {
		return "did you mean " + strings.Join(near, " or ") + "?"
	}
	return "RULES.md lists the names; a number of your own goes under numbers"
}

// walk visits every part of the tree.
func (n *node) walk(visit func(*node)) {
	if n == nil {
		return
	}
	visit(n)
	n.left.walk(visit)
	n.right.walk(visit)
}

// missing is why a formula has no value.
type missing struct{ why string }

func (m *missing) Error() string { return m.why }

// dual is a value with its derivative by each input.
type dual struct {
	v float64
	g map[string]float64
}

// inputs are the quantities a formula used, by name.
type inputs map[string]Quantity

// env is what a formula is worked out against.
type env struct {
	facts *Facts
	scope scope
	used  inputs
}

// input makes a quantity a dual whose only derivative is its own.
func (e *env) input(key string, q Quantity) dual {
	e.used[key] = q
	if q.Exact || q.U == 0 {
		return dual{v: q.Value}
	}
	return dual{q.Value, map[string]float64{key: 1}}
}

// value works the tree out. The error is a *missing.
func (n *node) value(e *env) (dual, error) {
	switch n.op {
	case 'n':
		return dual{v: n.literal}, nil
	case 'q':
		q := finite(catalogue[n.name].of(e.facts))
		if q == nil {
			return dual{}, &missing{whyMissing(n.name, e.facts)}
		}
		return e.input(n.name, *q), nil
	case 'k':
		q, err := e.scope[n.name].in(e.facts)
		if err != nil {
			return dual{}, err
		}
		return e.input("number "+n.name, q), nil
	case 'f':
		return n.read(e)
	}
	a, err := n.left.value(e)
	if err != nil {
		return dual{}, err
	}
	var b dual
	if n.right != nil {
		if b, err = n.right.value(e); err != nil {
			return dual{}, err
		}
	}
	d := n.combine(a, b)
	if math.IsNaN(d.v) || math.IsInf(d.v, 0) {
		return dual{}, &missing{"the formula divides by zero or overflows with this run's figures"}
	}
	return d, nil
}

func (n *node) combine(a, b dual) dual {
	switch n.op {
	case '+':
		return join(a.v+b.v, a.g, 1, b.g, 1)
	case '-':
		return join(a.v-b.v, a.g, 1, b.g, -1)
	case '*':
		return join(a.v*b.v, a.g, b.v, b.g, a.v)
	case '/':
		return join(a.v/b.v, a.g, 1/b.v, b.g, -a.v/(b.v*b.v))
	case '^':
		k := float64(n.exponent)
		return join(math.Pow(a.v, k), a.g, k*math.Pow(a.v, k-1), nil, 0)
	}
	return join(-a.v, a.g, -1, nil, 0)
}

func join(v float64, a map[string]float64, ka float64, b map[string]float64, kb float64) dual {
	d := dual{v: v}
	if len(a)+len(b) == 0 {
		return d
	}
	d.g = make(map[string]float64, len(a)+len(b))
	for key, g := range a {
		d.g[key] += ka * g
	}
	for key, g := range b {
		d.g[key] += kb * g
	}
	return d
}

// u is the standard uncertainty of a dual from its inputs, taken as
// independent of each other; 0 where none is known.
func (e *env) u(d dual) float64 {
	var sum float64
	for _, key := range slices.Sorted(maps.Keys(d.g)) {
		c := d.g[key] * e.used[key].U
		sum += c * c
	}
	return math.Sqrt(sum)
}

// unknown lists the inputs without a known uncertainty, in order.
func (e *env) unknown() []string {
	var out []string
	for _, key := range slices.Sorted(maps.Keys(e.used)) {
		if q := e.used[key]; !q.Exact && q.U == 0 {
			out = append(out, strings.TrimPrefix(key, "number "))
		}
	}
	return out
}

// read looks a reading up at the function's time.
func (n *node) read(e *env) (dual, error) {
	f := lookups[n.name]
	at, err := e.scope[n.arg].in(e.facts)
	if err != nil {
		return dual{}, err
	}
	for _, r := range f.of(e.facts) {
		if math.Abs(r.AfterS-at.Value) > 1e-6*at.Value {
			continue
		}
		q := finite(&r.Quantity)
		if r.Modelled || q == nil {
			return dual{}, &missing{fmt.Sprintf("no reading was taken near %s in %s", timeText(at.Value), f.lasting)}
		}
		return e.input(fmt.Sprintf("%s(%s)", n.name, timeText(at.Value)), *q), nil
	}
	if end := finite(f.ends(e.facts)); end != nil && end.Value < at.Value {
		return dual{}, &missing{fmt.Sprintf("%s lasted %s, %s are needed", f.lasting, timeText(end.Value), timeText(at.Value))}
	}
	return dual{}, &missing{fmt.Sprintf("%s at %s", f.missing, timeText(at.Value))}
}

// whyMissing says why a quantity of the catalogue is not there.
func whyMissing(name string, f *Facts) string {
	if name == "kdef" {
		return kdefWhy(f)
	}
	return fmt.Sprintf("%s is not known: %s", name, catalogue[name].missing)
}
