package config

import (
	"encoding/csv"
	"errors"
	"math"
	"math/big"
	"os"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

// Against NIST SP 811 (see testdata/units_sp811.csv): what is parsed must be
// the exact rational, rounded once to the nearest float64.
func TestConversionsAgreeWithSP811(t *testing.T) {
	f, err := os.Open("testdata/units_sp811.csv")
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	table := csv.NewReader(f)
	table.Comment = '#'
	rows, err := table.ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	published := map[string]*big.Rat{}
	for _, row := range rows[1:] {
		exact, ok := new(big.Rat).SetString(row[3])
		if !ok {
			t.Fatalf("row %v", row)
		}
		published[row[0]] = exact
	}
	length := func(s string) (float64, error) { q, err := ParseLength(s); return q.Value, err }
	mass := func(s string) (float64, error) { q, err := ParseMass(s); return q.Value, err }
	force := func(s string) (float64, error) { q, err := ParseForce(s); return q.Value, err }
	stress := func(s string) (float64, error) { q, err := ParseStress(s); return q.Value, err }
	stiffness := func(s string) (float64, error) { q, err := ParseStiffness(s); return q.Value, err }
	duration := func(s string) (float64, error) { q, err := ParseDuration(s); return q.Value, err }
	area := func(s string) (float64, error) { q, err := ParseArea(s); return q.Value, err }
	moment := func(s string) (float64, error) { q, err := ParseSecondMoment(s); return q.Value, err }
	checked := 0
	for _, tc := range []struct {
		row, unit string
		scale     string // published unit to ours
		parse     func(string) (float64, error)
	}{
		{"inch to mm", "in", "1", length}, {"foot to m", "ft", "1000", length},
		{"lb to kg", "lb", "1", mass}, {"ounce (avdp) to kg", "oz", "1", mass}, {"lbf to N", "lbf", "1", force},
		{"psi to Pa", "psi", "1/1000000", stress}, {"ksi to MPa", "ksi", "1", stress},
		{"lbf/in to N/mm", "lbf/in", "1", stiffness}, {"in^2 to mm^2", "in2", "1", area}, {"in^4 to mm^4", "in4", "1", moment},
		{"day to s", "d", "1", duration}, {"julian year to s", "a", "1", duration},
	} {
		exact := published[tc.row]
		if exact == nil {
			t.Errorf("no row %q", tc.row)
			continue
		}
		for _, number := range []string{"1", "0.1", "12.40", "-3.7e3", "27.3"} {
			x, _ := new(big.Rat).SetString(number)
			scale, _ := new(big.Rat).SetString(tc.scale)
			want, _ := x.Mul(x, exact).Mul(x, scale).Float64()
			if got, err := tc.parse(number + " " + tc.unit); err != nil || got != want {
				t.Errorf("%s %s = %v, want %v (%v)", number, tc.unit, got, want, err)
			}
			checked++
		}
	}
	if checked != 60 {
		t.Errorf("only %d conversions checked", checked)
	}
}

// degC = (degF - 32) * 5/9 (SP 811, B.8); the ice and steam points by definition.
func TestTemperatures(t *testing.T) {
	for text, want := range map[string]float64{"32 F": 0, "212F": 100, "-40 °F": -40, "273.15 K": 0, "20 C": 20, "20°C": 20, "68 degF": 20} {
		if q, err := ParseTemperature(text); err != nil || q.Value != want {
			t.Errorf("%s = %v, want %v (%v)", text, q.Value, want, err)
		}
	}
	if q, err := ParseTemperature("68.0(9) F"); err != nil || q.U != 0.05*10 {
		t.Errorf("u of 68.0(9) F = %v, %v", q.U, err)
	}
}

func TestUncertaintyInParentheses(t *testing.T) {
	for text, want := range map[string][2]float64{
		"300.0(5) mm": {300, 0.5}, "300(5)mm": {300, 5}, "10.02(2) m": {10020, 20}, "1.000(15) in": {25.4, 0.381},
		"300.0(0.5) mm": {300, 0.5}, "3.0(5)e2 mm": {300, 50},
	} {
		if q, err := ParseLength(text); err != nil || q.Value != want[0] || math.Abs(q.U-want[1]) > 1e-15*want[1] {
			t.Errorf("%s = %v with u %v, want %v (%v)", text, q.Value, q.U, want, err)
		}
	}
	if n, err := ParseNumber("10.02(2)"); err != nil || n.Value != 10.02 || n.U != 0.02 {
		t.Errorf("10.02(2) = %+v, %v", n, err)
	}
	if _, err := ParseLength("300.0(0) mm"); err == nil {
		t.Error("an uncertainty of zero was taken")
	}
}

func TestWrongQuantitiesSayTheMend(t *testing.T) {
	length := func(s string) error { _, err := ParseLength(s); return err }
	duration := func(s string) error { _, err := ParseDuration(s); return err }
	weight := func(s string) error { _, err := ParseWeight(s); return err }
	force := func(s string) error { _, err := ParseForce(s); return err }
	number := func(s string) error { _, err := ParseNumber(s); return err }
	for _, tc := range []struct {
		parse            func(string) error
		text, what, mend string
	}{
		{length, "300", "has no unit", "write the unit: 300 mm"},
		{length, "", "there is no number", "such as 300 mm"},
		{length, "12,40 mm", "comma", "decimal point"},
		{length, "3/8 in", "fractions", "0.375 in"},
		{length, "6 ft 6 in", "holds two numbers", "6.5 ft"},
		{length, "300 ± 1 mm", "plus-minus", "300.0(5) mm"},
		{length, "300 MM", "not a unit of length", "capitals count in units: write 300 mm"},
		{length, "300 kg", "is a mass; a length is wanted", "mm, cm, m, um, in or ft"},
		{length, "1e99 mm", "too large an exponent", "choose a unit"},
		{length, ".5 mm", "does not begin with a number", "zero before the point"},
		{length, `5 "`, "not a unit of length", "write 5 in"},
		{duration, "10 m", "no time: m is metres", "m is metres; write min for minutes: 10 min"},
		{duration, "10 hours", "not a unit of time", "write 10 h"},
		{duration, "10", "has no unit", "write the unit: 10 s"},
		{weight, "12.4", "has no unit", "12.4 kg"},
		{weight, "10 kgf", "kgf is not a unit here", "write the mass, 10 kg"},
		{weight, "10 lbs", "not a unit of mass", "write 10 lb"},
		{weight, "-1 kg", "negative", "0 kg"},
		{force, "22 lb", "is a mass; a force is wanted", "write lbf"},
		{number, "80 %", "percentage", "fraction"},
		{number, "3 mm", "has a unit", "write 3"},
		{number, "x", "does not begin with a number", "number"},
	} {
		err := tc.parse(tc.text)
		var p Problem
		if !errors.As(err, &p) || !strings.Contains(p.What, tc.what) || !strings.Contains(p.Mend(), tc.mend) {
			t.Errorf("%q:\n got %v; %v\nwant %s; %s", tc.text, err, p.Fix, tc.what, tc.mend)
		}
	}
}

func TestWeights(t *testing.T) {
	w, err := ParseWeight("12.40kg")
	if err != nil || w.Mass == nil || w.Force != nil || w.Mass.Value != 12.4 || w.Shown != "12.40kg" {
		t.Errorf("12.40kg = %+v, %v", w, err)
	}
	w, err = ParseWeight("22 lbf")
	if err != nil || w.Force == nil || w.Mass != nil || w.Force.Value != 22*4.4482216152605 {
		t.Errorf("22 lbf = %+v, %v", w, err)
	}
}

// Any decimal in millimetres is read as strconv would read it, and as the same
// length in every other unit of a power of ten.
func TestDecimalsAreReadExactly(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		digits := rapid.StringMatching(`-?[0-9]{1,6}(\.[0-9]{1,6})?`).Draw(t, "digits")
		want, _ := new(big.Rat).SetString(digits)
		exact, _ := want.Float64()
		if q, err := ParseLength(digits + " mm"); err != nil || q.Value != exact || q.Shown != digits+" mm" {
			t.Fatalf("%s mm = %+v, %v", digits, q, err)
		}
		metres, _ := new(big.Rat).Mul(want, big.NewRat(1000, 1)).Float64()
		if q, err := ParseLength(digits + "m"); err != nil || q.Value != metres {
			t.Fatalf("%sm = %+v, %v", digits, q, err)
		}
	})
}
