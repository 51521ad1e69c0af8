package report

import (
	"testing"

	"gaugelog/analysis"
)

func q(v, u float64, unit string) analysis.Q {
	if u == 0 {
		return analysis.Q{Value: v, Unit: unit}
	}
	return analysis.Q{Value: v, U: &u, Unit: unit}
}

// The rounding rule is JCGM 100 7.2.6: two significant digits of u, the value
// to the same decimal.
func TestFigure(t *testing.T) {
	for _, c := range []struct {
		q              analysis.Q
		units          string
		value, u, unit string
	}{
		{q(11423.4, 33.2, "MPa"), "", "11 423", "33", "MPa"},
		{q(11423.4, 332, "MPa"), "", "11 420", "330", "MPa"},
		{q(10.74137, 0.00213, "mm"), "", "10.7414", "0.0021", "mm"},
		{q(10.74137, 0.00999, "mm"), "", "10.741", "0.010", "mm"},
		{q(-0.0001, 0.0123, "mm"), "", "0.000", "0.012", "mm"},
		{q(-4.11234, 0, "mm"), "", "−4.112", "", "mm"},
		{q(0.23012, 0.0012, "1"), "", "0.2301", "0.0012", ""},
		{q(25.4, 0.254, "mm"), "us", "1.000", "0.010", "in"},
		{q(4.4482216152605, 0.044482216152605, "N"), "us", "1.000", "0.010", "lbf"},
		{q(7554e6, 12e6, "N.mm2"), "", "7554", "12", "N·m2"},
	} {
		b := &builder{u: unitsOf(c.units)}
		f := b.figure(c.q)
		if f.value != c.value || f.u != c.u || f.unit != c.unit {
			t.Errorf("%+v in %q: got %q ± %q %q, want %q ± %q %q", c.q, c.units, f.value, f.u, f.unit, c.value, c.u, c.unit)
		}
	}
}

// NIST SP 811 appendix B.8: 1 psi = 6.894757 E-03 MPa, 1 lbf.in2 from
// 4.448222 N and 25.4 mm.
func TestUSFactors(t *testing.T) {
	f, unit := unitsOf("us").convert("MPa")
	if got := 1 / f; unit != "psi" || got < 6.8947569e-3 || got > 6.8947574e-3 {
		t.Errorf("psi is %v MPa (%s)", got, unit)
	}
	f, _ = unitsOf("us").convert("N.mm2")
	if got, want := 1/f, 4.4482216152605*25.4*25.4; got < want*(1-1e-12) || got > want*(1+1e-12) {
		t.Errorf("lb-in2 is %v N.mm2, want %v", got, want)
	}
}

func TestSpan(t *testing.T) {
	for s, want := range map[float64]string{1: "1 s", 60: "60 s", 600: "10 min", 3600: "1 h", 86400: "1 d", 604800: "7 d", 31557600: "1 a", 5400: "1.5 h"} {
		if got := span(s); got != want {
			t.Errorf("span(%v) = %q, want %q", s, got, want)
		}
	}
}
