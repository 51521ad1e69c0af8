package beam

import (
	"math"
	"testing"
)

// closed is one closed form of beam_formulas.json ("formulas"): standard
// results as in AISC table 3-23 and Roark table 8.1, the file says which were
// read and that all were recomputed in exact rationals.
type closed struct {
	name  string
	b     Beam
	loads []Load
	from  float64
	to    float64
	y     func(x float64) float64
}

func closedForms() []closed {
	const l, p, q, c, a = 2400.0, 1000.0, 0.5, 310.0, 731.0
	ei := refEI
	inf := math.Inf(1)
	ss := Beam{Length: l, EI: ei, S: inf, Supports: []Support{{At: 0}, {At: l}}}
	over := Beam{From: -c, Length: l + 2*c, EI: ei, S: inf, Supports: ss.Supports}
	cant := Beam{Length: l, EI: ei, S: inf, Supports: []Support{{At: 0, Clamp: true}}}
	fixed := Beam{Length: l, EI: ei, S: inf, Supports: []Support{{At: 0, Clamp: true}, {At: l, Clamp: true}}}
	propped := Beam{Length: l, EI: ei, S: inf, Supports: []Support{{At: 0}, {At: l, Clamp: true}}}
	shears := func(b Beam) Beam {
		b.S = refS
		return b
	}
	timo := shears(ss)
	b := l - a
	return []closed{
		{"SS centre", ss, []Load{Point(l/2, p)}, 0, l / 2, func(x float64) float64 { return p * x * (3*l*l - 4*x*x) / (48 * ei) }},
		{"SS at a, left", ss, []Load{Point(a, p)}, 0, a, func(x float64) float64 { return p * b * x * (l*l - b*b - x*x) / (6 * l * ei) }},
		{"SS at a, right", ss, []Load{Point(a, p)}, a, l, func(x float64) float64 { return p * a * (l - x) * (2*l*x - x*x - a*a) / (6 * l * ei) }},
		{"SS uniform", ss, []Load{Spread(0, l, q*l)}, 0, l, func(x float64) float64 { return q * x * (l*l*l - 2*l*x*x + x*x*x) / (24 * ei) }},
		{"SS two loads, outer", ss, []Load{Point(a, p), Point(l-a, p)}, 0, a, func(x float64) float64 { return p * x * (3*l*a - 3*a*a - x*x) / (6 * ei) }},
		{"SS two loads, between", ss, []Load{Point(a, p), Point(l-a, p)}, a, l - a, func(x float64) float64 { return p * a * (3*l*x - 3*x*x - a*a) / (6 * ei) }},
		{"two overhangs, centre, tip line", over, []Load{Point(l/2, p)}, -c, 0, func(x float64) float64 { return p * l * l * x / (16 * ei) }},
		{"one overhang, tip load, in the span", over, []Load{Point(l+c, p)}, 0, l, func(x float64) float64 { return -p * c * x * (l*l - x*x) / (6 * l * ei) }},
		{"tips loaded, mid and tips", over, []Load{Point(-c, p), Point(l+c, p)}, 0, l, func(x float64) float64 { return -p * c * x * (l - x) / (2 * ei) }},
		{"cantilever, end load", cant, []Load{Point(l, p)}, 0, l, func(x float64) float64 { return p * x * x * (3*l - x) / (6 * ei) }},
		{"cantilever, load at a, beyond", cant, []Load{Point(a, p)}, a, l, func(x float64) float64 { return p * a * a * (3*x - a) / (6 * ei) }},
		{"cantilever, uniform", cant, []Load{Spread(0, l, q*l)}, 0, l, func(x float64) float64 { return q * x * x * (x*x - 4*l*x + 6*l*l) / (24 * ei) }},
		{"fixed-fixed, centre", fixed, []Load{Point(l/2, p)}, 0, l / 2, func(x float64) float64 { return p * x * x * (3*l - 4*x) / (48 * ei) }},
		{"fixed-fixed, uniform", fixed, []Load{Spread(0, l, q*l)}, 0, l, func(x float64) float64 { return q * x * x * (l - x) * (l - x) / (24 * ei) }},
		{"propped, centre", propped, []Load{Point(l/2, p)}, 0, l / 2, func(x float64) float64 { return p * x * (3*l*l - 5*x*x) / (96 * ei) }},
		{"propped, uniform", propped, []Load{Spread(0, l, q*l)}, 0, l, func(x float64) float64 { return q * x * (l*l*l - 3*l*x*x + 2*x*x*x) / (48 * ei) }},
		{"SS uniform with shear", timo, []Load{Spread(0, l, q*l)}, 0, l, func(x float64) float64 {
			return q*x*(l*l*l-2*l*x*x+x*x*x)/(24*ei) + q*x*(l-x)/(2*refS)
		}},
		{"SS at a with shear, left", timo, []Load{Point(a, p)}, 0, a, func(x float64) float64 {
			return p*b*x*(l*l-b*b-x*x)/(6*l*ei) + p*b*x/l/refS
		}},
		{"SS two loads with shear, outer", timo, []Load{Point(a, p), Point(l-a, p)}, 0, a, func(x float64) float64 { return p*x*(3*l*a-3*a*a-x*x)/(6*ei) + p*x/refS }},
		{"SS two loads with shear, between", timo, []Load{Point(a, p), Point(l-a, p)}, a, l - a, func(x float64) float64 { return p*a*(3*l*x-3*x*x-a*a)/(6*ei) + p*a/refS }},
		{"two overhangs, centre with shear, tip line", shears(over), []Load{Point(l/2, p)}, -c, 0, func(x float64) float64 { return p * l * l * x / (16 * ei) }},
		{"cantilever, load at a, before", cant, []Load{Point(a, p)}, 0, a, func(x float64) float64 { return p * x * x * (3*a - x) / (6 * ei) }},
		{"cantilever, end load with shear", shears(cant), []Load{Point(l, p)}, 0, l, func(x float64) float64 { return p*x*x*(3*l-x)/(6*ei) + p*x/refS }},
		{"cantilever, uniform with shear", shears(cant), []Load{Spread(0, l, q*l)}, 0, l, func(x float64) float64 {
			return q*x*x*(x*x-4*l*x+6*l*l)/(24*ei) + q*x*(2*l-x)/(2*refS)
		}},
		{"fixed-fixed, centre with shear", shears(fixed), []Load{Point(l/2, p)}, 0, l / 2, func(x float64) float64 { return p*x*x*(3*l-4*x)/(48*ei) + p*x/(2*refS) }},
		{"SS at a with shear, right", timo, []Load{Point(a, p)}, a, l, func(x float64) float64 {
			return p*a*(l-x)*(2*l*x-x*x-a*a)/(6*l*ei) + p*a*(l-x)/l/refS
		}},
	}
}

func TestClosedFormsInsideElements(t *testing.T) {
	for _, c := range closedForms() {
		s, err := c.b.Solve(c.loads)
		if err != nil {
			t.Fatalf("%s: %v", c.name, err)
		}
		scale := math.Max(s.Greatest(c.b.From, c.b.End()).Value, -s.Least(c.b.From, c.b.End()).Value)
		if scale <= 0 {
			t.Fatalf("%s: no sag at all", c.name)
		}
		for i := range 201 {
			x := c.from + (c.to-c.from)*float64(i)/200
			if got, want := s.Deflection(x), c.y(x); math.Abs(got-want) > 1e-9*scale {
				t.Errorf("%s at %g mm: %.13g, want %.13g", c.name, x, got, want)
			}
		}
	}
}

// The greatest sags and the end moments of the same tables.
func TestClosedFormExtremes(t *testing.T) {
	const l, p, q = 2400.0, 1000.0, 0.5
	ei, inf := refEI, math.Inf(1)
	solve := func(b Beam, loads ...Load) *Solution {
		t.Helper()
		s, err := b.Solve(loads)
		if err != nil {
			t.Fatal(err)
		}
		return s
	}
	ss := Beam{Length: l, EI: ei, S: inf, Supports: []Support{{At: 0}, {At: l}}}
	propped := Beam{Length: l, EI: ei, S: inf, Supports: []Support{{At: 0}, {At: l, Clamp: true}}}
	fixed := Beam{Length: l, EI: ei, S: inf, Supports: []Support{{At: 0, Clamp: true}, {At: l, Clamp: true}}}
	const c = 600.0
	over := Beam{Length: l + c, EI: ei, S: inf, Supports: ss.Supports}
	for _, x := range []struct {
		name      string
		got       Extreme
		at, value float64
	}{
		{"SS centre", solve(ss, Point(l/2, p)).Greatest(0, l), l / 2, p * l * l * l / (48 * ei)},
		{"SS uniform", solve(ss, Spread(0, l, q*l)).Greatest(0, l), l / 2, 5 * q * l * l * l * l / (384 * ei)},
		{"propped centre", solve(propped, Point(l/2, p)).Greatest(0, l), l / math.Sqrt(5), p * l * l * l / (48 * math.Sqrt(5) * ei)},
		{"fixed centre", solve(fixed, Point(l/2, p)).Greatest(0, l), l / 2, p * l * l * l / (192 * ei)},
		{"overhang rise", solve(over, Point(l+c, p)).Least(0, l), l / math.Sqrt(3), -p * c * l * l / (9 * math.Sqrt(3) * ei)},
		{"overhang tip", solve(over, Point(l+c, p)).Greatest(0, l+c), l + c, p * c * c * (l + c) / (3 * ei)},
		{"SS moment", solve(ss, Spread(0, l, q*l)).MaxMoment(), l / 2, q * l * l / 8},
		{"fixed moment", solve(fixed, Spread(0, l, q*l)).MaxMoment(), 0, -q * l * l / 12},
		{"overhang moment", solve(over, Point(l+c, p)).MaxMoment(), l, -p * c},
	} {
		if math.Abs(x.got.Value-x.value) > 1e-9*math.Abs(x.value) || math.Abs(x.got.At-x.at) > 1e-6*l {
			t.Errorf("%s: %.12g at %.9g mm, want %.12g at %.9g", x.name, x.got.Value, x.got.At, x.value, x.at)
		}
	}
	// Two equal overhangs: loaded evenly all along, and at both tips.
	both := Beam{From: -c, Length: l + 2*c, EI: ei, S: inf, Supports: ss.Supports}
	even, tips := solve(both, Spread(-c, l+c, q*(l+2*c))), solve(both, Point(-c, p), Point(l+c, p))
	for _, x := range []struct {
		name      string
		got, want float64
	}{
		{"even, middle", even.Deflection(l / 2), q * l * l * (5*l*l - 24*c*c) / (384 * ei)},
		{"even, tip", even.Deflection(-c), q * c * (3*c*c*c + 6*c*c*l - l*l*l) / (24 * ei)},
		{"tips, middle", tips.Deflection(l / 2), -p * c * l * l / (8 * ei)},
		{"tips, tip", tips.Deflection(l + c), p * c * c * (2*c + 3*l) / (6 * ei)},
		{"thirds, middle", solve(ss, Point(l/3, p), Point(2*l/3, p)).Deflection(l / 2), 23 * p * l * l * l / (648 * ei)},
		{"thirds, load", solve(ss, Point(l/3, p), Point(2*l/3, p)).Deflection(l / 3), 5 * p * l * l * l / (162 * ei)},
	} {
		if math.Abs(x.got-x.want) > 1e-9*math.Abs(x.want) {
			t.Errorf("%s: %.12g, want %.12g", x.name, x.got, x.want)
		}
	}
	// beam_formulas.json: propped uniform, greatest at (1+sqrt33)L/16.
	if g := solve(propped, Spread(0, l, q*l)).Greatest(0, l); math.Abs(g.At-(1+math.Sqrt(33))*l/16) > 1e-6*l {
		t.Errorf("propped uniform: greatest at %.9g mm", g.At)
	}
}
