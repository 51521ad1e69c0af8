package unitsystem

import (
	"fmt"
	"math"
	"strconv"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

// Expected figures by hand from 1 in = 25.4 mm and 1 lbf = 4.4482216152605 N.
func TestText(t *testing.T) {
	for _, c := range []struct{ system, text, want string }{
		{"us", "up to 0.433\u202fmm: not put on gently", "up to 0.01705 in: not put on gently"},
		{"si", "up to 0.433\u202fmm: not put on gently", "up to 0.433 mm: not put on gently"},
		{"us", "at 300\u202fmm.", "at 11.81 in."},
		{"us", "from 0\u202fmm to 600\u202fmm", "from 0.00 in to 23.62 in"},
		{"us", "at 0.1\u202fN/mm each", "at 0.57 lbf/in each"},
		{"us", "+0.0020\u202fmm and -0.5\u202fmm and −0.5\u202fmm", "+0.000079 in and -0.020 in and -0.020 in"},
		{"us", "11000\u202fMPa", "1595400 psi"},
		{"us", "12.5\u202fGPa", "1810 ksi"},
		{"us", "23.5\u202fC", "74.3 °F"},
		{"us", "by 0.0123\u202fmm/d, of 98\u202fN", "by 0.000484 in/d, of 22.0 lbf"},
		{"us", "1000.0(5)\u202fmm", "39.370(20) in"},
		{"us", "12.400(1)\u202fkg", "27.3373(22) lb"},
		{"us", "1.5e+06\u202fN.mm2", "520 lb-in2"},
		{"us", "(0.35\u202fmm)", "(0.0138 in)"},
		{"us", "a typed 5 mm stays, 5\u202fmmx and 3\u202fwidgets lose the space only", "a typed 5 mm stays, 5 mmx and 3 widgets lose the space only"},
		{"si", "11.81\u202fin wide, 22\u202flbf, 1.6e6\u202fpsi", "300.0 mm wide, 98 N, 11000 MPa"},
		{"us", "11.8\u202fin", "11.8 in"},
		{"us", "no quantity", "no quantity"},
	} {
		if got := Text(c.system, c.text); got != c.want {
			t.Errorf("%s: %q gives %q, want %q", c.system, c.text, got, c.want)
		}
	}
}

func TestTyped(t *testing.T) {
	for typed, want := range map[string]string{
		"300.0(5) mm":                "11.811(20) in",
		"11.8 in":                    "11.8 in",
		"step s1: a 2.500(1) kg b 0": "step s1: a 5.5116(22) lb b 0",
		"98N":                        "22.0 lbf",
		"38.02 mm, 37.98 mm":         "1.4969 in, 1.4953 in",
		"5.5 %":                      "5.5 %",
		"11 h":                       "11 h",
	} {
		if got := Text("us", Typed(typed)); got != want {
			t.Errorf("%q gives %q, want %q", typed, got, want)
		}
	}
}

// Whatever is written, the converted figure is the written one within a
// third of its last digit, and the sentence around it stays.
func TestTextKeepsTheFigure(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		unit := rapid.SampledFrom([]string{"mm", "N", "MPa", "N/mm", "mm/N", "kg", "mm/d", "mm4"}).Draw(t, "unit")
		v := rapid.Float64Range(-1e5, 1e5).Draw(t, "v")
		written := strconv.FormatFloat(v, 'f', rapid.IntRange(0, 6).Draw(t, "digits"), 64)
		got := Text("us", fmt.Sprintf("it is %s%s%s, they say", written, Space, unit))
		c := us[unit]
		if !strings.HasPrefix(got, "it is ") || !strings.HasSuffix(got, " "+c.unit+", they say") {
			t.Fatalf("%q", got)
		}
		back, err := strconv.ParseFloat(strings.Fields(got)[2], 64)
		if err != nil {
			t.Fatal(err)
		}
		was, _ := strconv.ParseFloat(written, 64)
		if off := math.Abs(back/c.factor - was); off > 0.51*lastPlace(strings.TrimPrefix(written, "-")) {
			t.Fatalf("%s %s became %q: off by %g", written, unit, got, off)
		}
	})
}
