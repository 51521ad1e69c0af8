package evaluate

import (
	"encoding/json"
	"math"
	"os"
	"strings"
	"testing"
)

func near(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance) {
		t.Errorf("%s: %.9g, want %.9g within %g", what, got, want, tolerance)
	}
}

// say is "yes", "no" or "open".
func say(p *bool) string {
	switch {
	case p == nil:
		return "open"
	case *p:
		return "yes"
	}
	return "no"
}

// Each case is worked out by hand from the formula the rule's clause names.
func TestClausesByHand(t *testing.T) {
	at := func(f *Facts, s, v float64) {
		for i := range f.Sag {
			if f.Sag[i].AfterS == s {
				f.Sag[i].Value = v
			}
		}
	}
	const day = 86400
	cases := []struct {
		name, rule, clause string
		change             func(*Facts)
		value              float64 // in the clause's unit
		pass               string
	}{
		// D30 - Di = 1.342 - 1.000 against D60 - D30 = 1.406 - 1.342 (the
		// practice's figures for the demo's law: 0.342 > 0.064 > 0.043).
		{"rate 1", "astm-d6815", "decreasing-rate-1", func(f *Facts) {
			at(f, 60, 1)
			at(f, 30*day, 1.342)
			at(f, 60*day, 1.406)
		}, 0.342, "yes"},
		{"rate 2", "astm-d6815", "decreasing-rate-2", func(f *Facts) {
			at(f, 30*day, 1.342)
			at(f, 60*day, 1.406)
			at(f, 90*day, 1.449)
		}, 0.064, "yes"},
		{"rate 2 rising", "astm-d6815", "decreasing-rate-2", func(f *Facts) {
			at(f, 30*day, 1.30)
			at(f, 60*day, 1.40)
			at(f, 90*day, 1.60)
		}, 0.10, "no"},
		{"fractional", "astm-d6815", "fractional-deflection", func(f *Facts) { at(f, 60, 2); at(f, 90*day, 2.898) }, 1.449, "yes"},
		{"fractional over", "astm-d6815", "fractional-deflection", func(f *Facts) { at(f, 60, 2); at(f, 90*day, 4.2) }, 2.1, "no"},
		{"fractional at the limit", "astm-d6815", "fractional-deflection", func(f *Facts) { at(f, 60, 2); at(f, 90*day, 4) }, 2, "yes"},
		{"duration", "astm-d6815", "duration", func(f *Facts) { f.Duration = Exactly(89 * day) }, 89, "no"},
		{"load level", "astm-d6815", "load-level", func(f *Facts) { f.Stress, f.Strength = Measured(11, 0.1), Measured(40, 1) }, 0.5, "open"},
		{"sample", "astm-d6815", "sample-size", func(f *Facts) { f.Details["sample_size"] = "27" }, 27, "no"},
		// k_c = (a_T - a_1)/(a_1 - a_0) = (3 - 2)/(2 - 0).
		{"creep factor", "en-1156", "creep-factor-1000-min", func(f *Facts) { at(f, 60, 2); at(f, 60000, 3) }, 0.5, "open"},
		{"creep factor at the end", "en-1156", "creep-factor-end", func(f *Facts) { at(f, 60, 2); f.EndSag = Measured(3.5, 0.01) }, 0.75, "open"},
		{"accuracy", "en-1156", "reading-accuracy", func(f *Facts) { f.Resolution = Exactly(0.02) }, 0.02, "no"},
		{"edgewise", "en-1156", "flatwise", func(f *Facts) { f.Width = Measured(20, 0.05) }, 0.5, "no"},
		// 16 h = 640 mm at h = 40 mm.
		{"span to depth", "iso-899-2", "span-to-depth", func(f *Facts) {}, 16, "yes"},
		{"span too long", "iso-899-2", "span-to-depth", func(f *Facts) { f.Span = Measured(720, 0.5) }, 18, "no"},
		{"off centre", "iso-899-2", "centre-load", func(f *Facts) { f.LoadOffCentre = Measured(12.8, 0.2) }, 2, "no"},
		{"too slowly placed", "iso-899-2", "placing", func(f *Facts) { f.LoadRamp = Measured(9, 0.5) }, 9, "no"},
		{"too warm", "iso-899-2", "temperature-highest", func(f *Facts) { f.TemperatureMax = Measured(27, 0.2) }, 27, "no"},
		{"damp", "iso-899-2", "humidity-highest", func(f *Facts) { f.HumidityMax = Measured(0.7, 0.01) }, 70, "no"},
		// A number of low confidence is compared, not decided.
		{"recovery", "astm-d7032", "recovery", func(f *Facts) {}, 90, "open"},
		{"twice the design load", "astm-d7032", "load-level", func(f *Facts) {}, 2, "open"},
		// phi = 1.2/0.8 - 1; k_def 0.6, so 0.5/0.6.
		{"coefficient", "en-1995-kdef", "coefficient-end", func(f *Facts) { f.EndSag, f.InitialSag = Measured(1.2, 0.001), Measured(0.8, 0.001) }, 0.5, "open"},
		{"over kdef", "en-1995-kdef", "coefficient-end-over-kdef", func(f *Facts) { f.EndSag, f.InitialSag = Measured(1.2, 0.001), Measured(0.8, 0.001) }, 0.5 / 0.6, "open"},
		{"forecast coefficient", "en-1995-kdef", "coefficient-forecast", func(f *Facts) { f.ForecastSag, f.InitialSag = Measured(1.6, 0.1), Measured(0.8, 0.001) }, 1, "open"},
		// 640/5 = 128, limit 100.
		{"span over sag", "span-over-sag", "end", func(f *Facts) { f.EndSag = Measured(5, 0.01) }, 128, "yes"},
		{"span over sag, too soft", "span-over-sag", "end", func(f *Facts) { f.EndSag = Measured(8, 0.01) }, 80, "no"},
		{"span over initial sag", "span-over-sag", "initial", func(f *Facts) { f.InitialSag = Measured(10, 0.01) }, 64, "no"},
		{"span over greatest sag", "span-over-sag", "greatest", func(f *Facts) { f.GreatestSag = Measured(10, 0.01) }, 64, "open"},
		{"span over creep", "span-over-sag", "creep-part", func(f *Facts) { f.EndSag, f.InitialSag = Measured(5, 0.01), Measured(3, 0.01) }, 320, "open"},
		// 200 N on 640 mm by 100 mm is 3.125 kPa; wanted 3.1 within 5 %.
		{"shelf load", "shelf", "load", func(f *Facts) {}, 3.125, "yes"},
		{"shelf sag", "shelf", "sag", func(f *Facts) { f.EndSag = Measured(4, 0.01) }, 160, "no"},
		{"shelf hold", "shelf", "hold", func(f *Facts) { f.Duration = Exactly(6 * day) }, 6, "no"},
	}
	for _, c := range cases {
		t.Run(c.name, func(t *testing.T) {
			f := full()
			c.change(f)
			o := only(Run(ruled(c.rule), f), c.clause)
			if o.Measured == nil {
				t.Fatalf("not measured: %s", o.Why)
			}
			near(t, "measured", o.Measured.Value, c.value, 1e-9*math.Abs(c.value))
			if got := say(o.Pass); got != c.pass {
				t.Errorf("pass %s, want %s: %s", got, c.pass, o.Why)
			}
			if !strings.HasSuffix(o.Why, Informative) {
				t.Errorf("why does not end with the reservation: %s", o.Why)
			}
		})
	}
}

// The practice's own figures for the demo's law: sag at 30, 60 and 90 days
// over the sag at one minute is 1.342, 1.406 and 1.449, and its increments
// fall.
func TestDemoLawOverNinetyDays(t *testing.T) {
	f := full()
	o := Run(ruled("astm-d6815"), f)
	near(t, "D90/Di", only(o, "fractional-deflection").Measured.Value, 1.449, 5e-4)
	// In units of elastic sag the practice gives .353 > .067 > .044.
	near(t, "D30-Di", only(o, "decreasing-rate-1").Measured.Value, 0.353, 5e-4)
	near(t, "D60-D30", only(o, "decreasing-rate-2").Measured.Value, 0.067, 5e-4)
	for _, clause := range []string{"decreasing-rate-1", "decreasing-rate-2", "fractional-deflection", "reading-times", "duration"} {
		if got := say(only(o, clause).Pass); got != "yes" {
			t.Errorf("%s: %s: %s", clause, got, only(o, clause).Why)
		}
	}
	if o := only(o, "adequate-strength"); o.Pass != nil {
		t.Errorf("strength judged from one run: %+v", o)
	}
}

// ISO 899-2's case of testdata/standards_formulas.json (E_t formula read for
// the predecessor ISO 6602, stress and strain from memory; exact arithmetic).
func TestISO8992Formulas(t *testing.T) {
	var file struct {
		NumericCases []map[string]any `json:"numeric_cases"`
	}
	text, err := os.ReadFile("testdata/standards_formulas.json")
	if err != nil {
		t.Fatal(err)
	}
	if err := json.Unmarshal(text, &file); err != nil {
		t.Fatal(err)
	}
	found := false
	for _, c := range file.NumericCases {
		if c["case"] != "ISO 899-2" {
			continue
		}
		found = true
		n := func(key string) float64 { return c[key].(float64) }
		if c["s_t_mm"] != "1/2" || c["stress_MPa"] != "12" || c["strain"] != "3/1024" || c["E_t_MPa"] != "4096" {
			t.Fatalf("the file's case changed: %v", c)
		}
		f := full()
		f.Span, f.Width, f.Depth, f.Load = Measured(n("L"), 0), Measured(n("b"), 0), Measured(n("h"), 0), Measured(n("F_N"), 0)
		for i := range f.Sag {
			f.Sag[i].Value = 0.5
		}
		o := Run(ruled("iso-899-2"), f)
		near(t, "stress", only(o, "stress").Measured.Value, 12, 1e-12)
		near(t, "strain", only(o, "creep-strain-1-h").Measured.Value, 3.0/1024, 1e-15)
		near(t, "modulus", only(o, "creep-modulus-1-h").Measured.Value, 4096, 1e-9)
	}
	if !found {
		t.Fatal("the file holds no ISO 899-2 case")
	}
}

func TestKDefTable(t *testing.T) {
	// Solid timber, glulam, LVL 0.60/0.80/2.00 and plywood EN 636-3
	// 0.80/1.00/2.50: read in public texts; the rest of the split from memory.
	for _, c := range []struct {
		product string
		class   int
		want    float64
	}{
		{"solid timber", 1, 0.6}, {"Glued laminated timber", 2, 0.8}, {"LVL", 3, 2},
		{"plywood EN 636 part 3", 3, 2.5}, {"OSB/2", 1, 2.25}, {"Particleboard P7", 2, 2.25},
	} {
		if got, err := KDef(c.product, c.class); err != nil || got != c.want {
			t.Errorf("%s in class %d: %g, %v, want %g", c.product, c.class, got, err, c.want)
		}
	}
	for _, c := range []struct {
		product string
		class   int
		says    string
	}{
		{"OSB/2", 2, "not permitted"}, {"OSB/2", 4, "give 1, 2 or 3"}, {"oak", 1, "no product"}, {"Plywood", 1, "EN 636 part 2"},
	} {
		if _, err := KDef(c.product, c.class); err == nil || !strings.Contains(err.Error(), c.says) {
			t.Errorf("%s in class %d: %v does not say %q", c.product, c.class, err, c.says)
		}
	}
}

func TestGuardBand(t *testing.T) {
	f := full()
	// 640/6.3 = 101.587 against 100: u = 101.587*hypot(0.5/640, 0.1/6.3)
	// = 1.6145, U95 = 3.229 > 1.587.
	f.EndSag = Measured(6.3, 0.1)
	o := only(Run(ruled("span-over-sag"), f), "end")
	near(t, "u", o.Measured.U, 1.6145, 5e-4)
	near(t, "U95", o.Measured.U95, 3.229, 1e-3)
	if say(o.Pass) != "yes" || !strings.Contains(o.Why, "straddles") {
		t.Errorf("%s: %s", say(o.Pass), o.Why)
	}
	f.EndSag = Measured(6.5, 0.1)
	if o := only(Run(ruled("span-over-sag"), f), "end"); say(o.Pass) != "no" || !strings.Contains(o.Why, "straddles") {
		t.Errorf("%s: %s", say(o.Pass), o.Why)
	}
	f.EndSag = Measured(5, 0.01)
	if o := only(Run(ruled("span-over-sag"), f), "end"); strings.Contains(o.Why, "straddles") {
		t.Errorf("a clear case: %s", o.Why)
	}
	f.EndSag = Measured(5, 0)
	if o := only(Run(ruled("span-over-sag"), f), "end"); !strings.Contains(o.Why, "the uncertainty of end_sag is not known") {
		t.Errorf("unknown uncertainty unsaid: %s", o.Why)
	}
}

// What a formula names twice counts once: (a - b) - (c - b) has no b in it
// that could add uncertainty where it cancels.
func TestSharedInputCancels(t *testing.T) {
	f := full()
	s := scope{}
	tree, bad := parseFormula("(span - depth) - (width - depth)")
	if bad != nil {
		t.Fatal(bad)
	}
	if _, bad := tree.resolve(s); bad != nil {
		t.Fatal(bad)
	}
	e := &env{facts: f, scope: s, used: inputs{}}
	d, err := tree.value(e)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "value", d.v, 540, 1e-12)
	near(t, "u", e.u(d), math.Hypot(0.5, 0.05), 1e-12)
}
