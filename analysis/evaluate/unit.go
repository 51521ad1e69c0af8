package evaluate

import (
	"fmt"
	"math"
	"sort"
	"strings"

	"gaugelog/config"
)

// dim is a dimension: the exponents of mm, N, s and degree Celsius.
type dim struct{ mm, newton, second, celsius int }

func (a dim) times(b dim, sign int) dim {
	return dim{a.mm + sign*b.mm, a.newton + sign*b.newton, a.second + sign*b.second, a.celsius + sign*b.celsius}
}

func (a dim) power(n int) dim {
	return dim{a.mm * n, a.newton * n, a.second * n, a.celsius * n}
}

// String names a dimension in internal units, such as "mm^4" or "N mm^-2".
func (a dim) String() string {
	var parts []string
	for _, p := range []struct {
		name string
		n    int
	}{{"N", a.newton}, {"mm", a.mm}, {"s", a.second}, {"C", a.celsius}} {
		switch {
		case p.n == 1:
			parts = append(parts, p.name)
		case p.n != 0:
			parts = append(parts, fmt.Sprintf("%s^%d", p.name, p.n))
		}
	}
	if len(parts) == 0 {
		return "a plain number"
	}
	return strings.Join(parts, " ")
}

// unit is a unit a rule file may write: its dimension and how many internal
// units it is.
type unit struct {
	dim    dim
	factor float64
}

// units of rule files. Temperatures are degrees Celsius only; a year has
// 365.25 days, as in rig files.
var units = map[string]unit{
	"1": {dim{}, 1}, "%": {dim{}, 0.01},
	"mm": {dim{mm: 1}, 1}, "m": {dim{mm: 1}, 1000}, "in": {dim{mm: 1}, 25.4},
	"mm2": {dim{mm: 2}, 1}, "mm3": {dim{mm: 3}, 1}, "mm4": {dim{mm: 4}, 1},
	"N": {dim{newton: 1}, 1}, "kN": {dim{newton: 1}, 1000}, "lbf": {dim{newton: 1}, 4.4482216152605},
	"Pa": {dim{newton: 1, mm: -2}, 1e-6}, "kPa": {dim{newton: 1, mm: -2}, 1e-3},
	"MPa": {dim{newton: 1, mm: -2}, 1}, "GPa": {dim{newton: 1, mm: -2}, 1000},
	"N/mm": {dim{newton: 1, mm: -1}, 1}, "mm/N": {dim{newton: -1, mm: 1}, 1},
	"N.mm2": {dim{newton: 1, mm: 2}, 1},
	"s":     {dim{second: 1}, 1}, "min": {dim{second: 1}, 60}, "h": {dim{second: 1}, 3600},
	"d": {dim{second: 1}, 86400}, "w": {dim{second: 1}, 604800}, "a": {dim{second: 1}, 31557600},
	"C": {dim{celsius: 1}, 1},
}

func unitNames() []string {
	var out []string
	for name := range units {
		out = append(out, name)
	}
	sort.Strings(out)
	return out
}

// parseAmount reads "90 d", "55 %", "2.0" or "500(5) N" (concise form) into
// internal units.
func parseAmount(text string) (Quantity, dim, error) {
	text = strings.TrimSpace(text)
	if n, err := config.ParseNumber(text); err == nil {
		return Quantity{Value: n.Value, U: n.U}, dim{}, nil
	}
	best := ""
	for name := range units {
		if len(name) > len(best) && name != "1" && strings.HasSuffix(text, name) {
			if _, err := config.ParseNumber(strings.TrimSpace(strings.TrimSuffix(text, name))); err == nil {
				best = name
			}
		}
	}
	if best == "" {
		return Quantity{}, dim{}, fmt.Errorf("%q is no number with a known unit (known: %s)", text, strings.Join(unitNames(), ", "))
	}
	n, err := config.ParseNumber(strings.TrimSpace(strings.TrimSuffix(text, best)))
	if err != nil {
		return Quantity{}, dim{}, err
	}
	u := units[best]
	q := Quantity{Value: n.Value * u.factor, U: n.U * u.factor}
	if math.IsInf(q.Value, 0) || math.IsNaN(q.Value) {
		return Quantity{}, dim{}, fmt.Errorf("%q is out of range", text)
	}
	return q, u.dim, nil
}
