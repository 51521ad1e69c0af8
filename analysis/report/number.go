package report

import (
	"math"
	"strconv"
	"strings"

	"gaugelog/analysis"
)

// decimalsFor is the number of decimals that shows u with two significant
// digits; negative where u is 100 or more.
func decimalsFor(u float64) int {
	if u <= 0 || math.IsInf(u, 0) || math.IsNaN(u) {
		return 3
	}
	d := 1 - int(math.Floor(math.Log10(u)))
	// 0.0996 rounds up to 0.10: one digit fewer is wanted then.
	if s := u * math.Pow(10, float64(d)); s >= 99.5 {
		d--
	}
	return d
}

// fixed prints v with the given decimals; negative ones round to tens,
// hundreds and so on.
func fixed(v float64, decimals int) string {
	if decimals < 0 {
		p := math.Pow(10, float64(-decimals))
		return grouped(strconv.FormatFloat(math.Round(v/p)*p, 'f', 0, 64))
	}
	s := strconv.FormatFloat(v, 'f', min(decimals, 12), 64)
	if strings.Trim(s, "-0.") == "" {
		s = strings.TrimPrefix(s, "-")
	}
	return grouped(s)
}

// thousands stands between groups of three digits: a no-break space, which
// every font has and no line is broken at.
const thousands = "\u00a0"

// grouped puts a space between thousands of five digits and more, as ISO
// 80000-1 has it, before the decimal point only.
func grouped(s string) string {
	whole, frac, dot := strings.Cut(s, ".")
	sign := ""
	if strings.HasPrefix(whole, "-") {
		sign, whole = "−", whole[1:]
	}
	if len(whole) >= 5 {
		var b strings.Builder
		for i, c := range whole {
			if i > 0 && (len(whole)-i)%3 == 0 {
				b.WriteString(thousands)
			}
			b.WriteRune(c)
		}
		whole = b.String()
	}
	if dot {
		return sign + whole + "." + frac
	}
	return sign + whole
}

// significant prints v with n significant digits and no exponent.
func significant(v float64, n int) string {
	if v == 0 {
		return "0"
	}
	return fixed(v, n-1-int(math.Floor(math.Log10(math.Abs(v)))))
}

// figure is a quantity ready to print, in the units of the report.
type figure struct {
	value, u, unit string
	expanded       string // U95, "" where not worked out
	k              string
}

// figure converts q and rounds it by its uncertainty; without one it shows
// four significant digits, lengths three decimals.
func (b *builder) figure(q analysis.Q) figure {
	f, unit := b.u.convert(q.Unit)
	v := q.Value * f
	if q.U == nil {
		digits := significant(v, 4)
		if unit == "mm" {
			digits = fixed(v, 3)
		}
		return figure{value: digits, unit: unit}
	}
	u := *q.U * f
	d := decimalsFor(u)
	out := figure{value: fixed(v, d), u: fixed(u, d), unit: unit}
	if q.U95 != nil {
		e := *q.U95 * f
		out.expanded = fixed(e, decimalsFor(e))
		if de := decimalsFor(e); de < d {
			out.value = fixed(v, de)
		}
	}
	if q.K != nil {
		out.k = fixed(*q.K, 2)
	}
	return out
}

// with prints "value unit, U95 ±x (k y)" or "value ± u unit (standard)".
func (b *builder) with(q *analysis.Q) string {
	if q == nil {
		return "not measured"
	}
	f := b.figure(*q)
	unit := f.unit
	if unit != "" {
		unit = " " + unit
	}
	switch {
	case f.expanded != "":
		return f.value + " ± " + f.expanded + unit + " (95 %, k = " + f.k + ")"
	case f.u != "":
		return f.value + unit + " (u = " + f.u + unit + ")"
	}
	return f.value + unit
}

// mostDecimals bounds what is shown of a value that stands without its
// uncertainty: a sag that is a mean shows one more than the gauges' 0.001 mm, a
// ratio three, a percentage one.
var mostDecimals = map[string]int{"mm": 4, "in": 5, "": 3, "%": 1}

// bounded is figure's value with no more decimals than its kind is worth.
func (b *builder) bounded(q *analysis.Q) figure {
	f := b.figure(*q)
	most, known := mostDecimals[f.unit]
	if _, frac, _ := strings.Cut(f.value, "."); known && len(frac) > most {
		factor, _ := b.u.convert(q.Unit)
		f.value = fixed(q.Value*factor, most)
	}
	return f
}

// cell prints a value alone for a table whose head has the unit; "–" where
// there is none.
func (b *builder) cell(q *analysis.Q) string {
	if q == nil {
		return "–"
	}
	return b.bounded(q).value
}

// cellU prints the standard uncertainty alone.
func (b *builder) cellU(q *analysis.Q) string {
	if q == nil || q.U == nil {
		return "–"
	}
	return b.figure(*q).u
}

// short prints a value with its unit, rounded by its uncertainty.
func (b *builder) short(q *analysis.Q) string {
	if q == nil {
		return "not measured"
	}
	f := b.bounded(q)
	if f.unit == "" {
		return f.value
	}
	return f.value + " " + f.unit
}

// percentU is the relative standard uncertainty in per cent, "" if unknown.
func percentU(q *analysis.Q) string {
	if q == nil || q.U == nil || q.Value == 0 {
		return ""
	}
	return significant(100**q.U/math.Abs(q.Value), 2) + " %"
}

// whole prints a count.
func whole(n int64) string { return strconv.FormatInt(n, 10) }
