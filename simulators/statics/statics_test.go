package statics

import (
	"encoding/json"
	"errors"
	"math"
	"math/big"
	"os"
	"testing"

	"pgregory.net/rapid"
)

const span = 1000.0

func pins(t testing.TB, a, b float64) *Layout {
	t.Helper()
	l, err := New([]Support{{At: a}, {At: b}})
	if err != nil {
		t.Fatal(err)
	}
	return l
}

func clamp(t testing.TB) *Layout {
	t.Helper()
	l, err := New([]Support{{At: 0, Clamp: true}})
	if err != nil {
		t.Fatal(err)
	}
	return l
}

func point(at float64) Load { return Load{From: at, To: at} }

// halves is the sag at x under two loads of half a newton.
func halves(l *Layout, x, a, b float64) (bending, shear float64) {
	m1, v1 := l.Sag(x, point(a))
	m2, v2 := l.Sag(x, point(b))
	return (m1 + m2) / 2, (v1 + v2) / 2
}

// TestTable91 checks the constants of table 9-1, USDA Wood Handbook
// FPL-GTR-190 (2010), public domain, read in a public copy; and more cases of
// the same form. Source: testdata/beam_formulas.json, whose header says what
// was read and what is from memory. Beams with two clamps are not this
// package's.
func TestTable91(t *testing.T) {
	ss, can := pins(t, 0, span), clamp(t)
	wide := pins(t, 0, span)
	sag := func(l *Layout, x float64, load Load) func() (float64, float64) {
		return func() (float64, float64) { return l.Sag(x, load) }
	}
	two := func(x, a, b float64) func() (float64, float64) {
		return func() (float64, float64) { return halves(ss, x, a, b) }
	}
	cases := map[string]func() (float64, float64){
		"uniform/both simply supported/midspan":                            sag(ss, 500, Load{0, span}),
		"concentrated midspan/both simply supported/midspan":               sag(ss, 500, point(500)),
		"W/2 at each outer quarter point/both simply supported/midspan":    two(500, 250, 750),
		"W/2 at each outer quarter point/both simply supported/load point": two(250, 250, 750),
		"uniform/cantilever/free end":                                      sag(can, span, Load{0, span}),
		"concentrated at free end/cantilever/free end":                     sag(can, span, point(span)),
		"W/2 at each third point (total W)":                                two(500, span/3, span*2/3),
		"W/2 at each third point, at load point":                           two(span/3, span/3, span*2/3),
		"W at a=L/3, at midspan":                                           sag(ss, 500, point(span/3)),
		"W at a=L/3, at load":                                              sag(ss, span/3, point(span/3)),
		"W centre, at quarter span":                                        sag(ss, 250, point(500)),
		"overhang c=L/4 end load W, tip":                                   sag(wide, 1250, point(1250)),
		"two overhangs c=L/4, W at centre of span, tip (negative = up)":    sag(wide, -250, point(500)),
	}
	text, err := os.ReadFile("testdata/beam_formulas.json")
	if err != nil {
		t.Fatal(err)
	}
	var data struct {
		Table []struct {
			Loading string `json:"loading"`
			Ends    string `json:"beam_ends"`
			At      string `json:"deflection_at"`
			Kb      string `json:"k_b"`
			Ks      string `json:"k_s"`
		} `json:"table_9_1"`
		Extra []struct {
			Case string
			Kb   string `json:"k_b"`
			Ks   string `json:"k_s"`
		} `json:"same_form_extra_computed"`
	}
	if err := json.Unmarshal(text, &data); err != nil {
		t.Fatal(err)
	}
	checked := 0
	check := func(name, kb, ks string) {
		run, ok := cases[name]
		if !ok {
			return
		}
		checked++
		bending, shear := run()
		close(t, name+" k_b", bending/(span*span*span), fraction(t, kb))
		close(t, name+" k_s", shear/span, fraction(t, ks))
	}
	for _, c := range data.Table {
		check(c.Loading+"/"+c.Ends+"/"+c.At, c.Kb, c.Ks)
	}
	for _, c := range data.Extra {
		check(c.Case, c.Kb, c.Ks)
	}
	if checked != len(cases) {
		t.Errorf("%d of %d cases found in the file", checked, len(cases))
	}
}

func fraction(t *testing.T, s string) float64 {
	t.Helper()
	r, ok := new(big.Rat).SetString(s)
	if !ok {
		t.Fatalf("%q is no fraction", s)
	}
	f, _ := r.Float64()
	return f
}

func close(t testing.TB, what string, got, want float64) {
	t.Helper()
	if math.Abs(got-want) > 1e-12*math.Max(1, math.Abs(want)) {
		t.Errorf("%s: %.15g, want %.15g", what, got, want)
	}
}

// TestClosedForms checks the handbook formulas of testdata/beam_formulas.json
// ("formulas"; from memory, recomputed in exact rationals there) at random
// places, with EI = 1 and S = 1.
func TestClosedForms(t *testing.T) {
	l, can := pins(t, 0, span), clamp(t)
	const L = span
	rapid.Check(t, func(rt *rapid.T) {
		a, x := rapid.Float64Range(1, L-1).Draw(rt, "a"), rapid.Float64Range(0, L).Draw(rt, "x")
		c := rapid.Float64Range(1, L).Draw(rt, "c")
		b := L - a
		want, moment := a*(L-x)*(2*L*x-x*x-a*a)/(6*L), a*(L-x)/L
		if x <= a {
			want, moment = b*x*(L*L-b*b-x*x)/(6*L), b*x/L
		}
		near(rt, "SS load at a", first(l.Sag(x, point(a))), want)
		near(rt, "SS load at a, shear", second(l.Sag(x, point(a))), moment)
		near(rt, "SS UDL", first(l.Sag(x, Load{0, L})), x*(L*L*L-2*L*x*x+x*x*x)/24/L)
		near(rt, "SS UDL, shear", second(l.Sag(x, Load{0, L})), x*(L-x)/2/L)
		near(rt, "overhang tip", first(l.Sag(L+c, point(L+c))), c*c*(L+c)/3)
		near(rt, "overhang tip, in span", first(l.Sag(x, point(L+c))), -c*x*(L*L-x*x)/(6*L))
		// Outside the left support the beam is straight and feels no shear.
		near(rt, "outside, load in span", first(l.Sag(-c, point(a))), -c*b*(L*L-b*b)/(6*L))
		near(rt, "outside, shear", second(l.Sag(-c, point(a))), 0)
		near(rt, "cantilever at a, tip", first(can.Sag(L, point(a))), a*a*(3*L-a)/6)
		near(rt, "cantilever at a, load", first(can.Sag(a, point(a))), a*a*a/3)
		near(rt, "cantilever UDL", first(can.Sag(x, Load{0, L})), x*x*(x*x-4*L*x+6*L*L)/24/L)
		near(rt, "cantilever to the left", first(can.Sag(-x, point(-a))), first(can.Sag(x, point(a))))
		near(rt, "cantilever shear", second(can.Sag(L, point(a))), a)
	})
}

// TestReciprocity: the sag at x under a load at a is that at a under one at x
// (Maxwell), and a spread load is the mean of its points.
func TestReciprocity(t *testing.T) {
	l := pins(t, 300, 2400)
	rapid.Check(t, func(rt *rapid.T) {
		a, x := rapid.Float64Range(0, 2600).Draw(rt, "a"), rapid.Float64Range(0, 2600).Draw(rt, "x")
		m1, v1 := l.Sag(x, point(a))
		m2, v2 := l.Sag(a, point(x))
		near(rt, "bending", m1, m2)
		near(rt, "shear", v1, v2)
		near(rt, "settling", l.Settle(x, point(a), []float64{0.3, 0.7}), l.Settle(a, point(x), []float64{0.3, 0.7}))
	})
	bending, shear := l.Sag(1300, Load{700, 1900})
	var mb, ms float64
	const n = 4000
	for i := range n {
		m, v := l.Sag(1300, point(700+1200*(float64(i)+0.5)/n))
		mb, ms = mb+m/n, ms+v/n
	}
	if math.Abs(mb/bending-1) > 1e-6 || math.Abs(ms/shear-1) > 1e-6 {
		t.Errorf("spread load %g %g, mean of points %g %g", bending, shear, mb, ms)
	}
}

func first(a, _ float64) float64  { return a }
func second(_, b float64) float64 { return b }

func near(t *rapid.T, what string, got, want float64) {
	t.Helper()
	if math.Abs(got-want) > 1e-9*span*span*span/48 && math.Abs(got-want) > 1e-9*math.Abs(want) {
		t.Fatalf("%s: %.15g, want %.15g", what, got, want)
	}
	if math.Abs(want) < 10*span && math.Abs(got-want) > 1e-6 {
		t.Fatalf("%s: %.15g, want %.15g", what, got, want)
	}
}

func TestRefused(t *testing.T) {
	for name, s := range map[string][]Support{
		"none": nil, "one pin": {{At: 0}}, "three pins": {{At: 0}, {At: 1}, {At: 2}},
		"clamp and pin": {{At: 0, Clamp: true}, {At: 1}}, "two pins in one place": {{At: 5}, {At: 5}},
	} {
		if _, err := New(s); !errors.Is(err, ErrLayout) {
			t.Errorf("%s: %v", name, err)
		}
	}
}
