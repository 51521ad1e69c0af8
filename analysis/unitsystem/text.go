package unitsystem

import (
	"math"
	"regexp"
	"strconv"
	"strings"
)

// Space stands between the number and the unit of a quantity in a sentence:
// the narrow no-break space, which nobody types.
const Space = "\u202f"

var (
	// said is a quantity in the written form: number, uncertainty of the last
	// digits in the GUM's concise form, unit.
	said = regexp.MustCompile(`([-+−]?)(\d+(?:\.\d+)?(?:[eE][-+]?\d+)?)(?:\(([\d.]+)\))?` + Space + `([A-Za-z°][A-Za-z0-9°/.()^]*)`)
	// typed is one as people write it into rig files and marks.
	typed = regexp.MustCompile(`(^|[\s,])([-+]?\d+(?:\.\d+)?(?:[eE][-+]?\d+)?(?:\([\d.]+\))?) ?([A-Za-z][A-Za-z0-9/.]*)`)
)

// Typed puts the quantities of a text that holds nothing else but them and
// names ("300.0(5) mm", "a 2.500(1) kg b 98N") into the written form.
func Typed(text string) string {
	return typed.ReplaceAllStringFunc(text, func(m string) string {
		p := typed.FindStringSubmatch(m)
		if !known(p[3]) {
			return m
		}
		return p[1] + p[2] + Space + p[3]
	})
}

func known(unit string) bool {
	_, metric := us[unit]
	_, inches := si[unit]
	return metric || inches
}

// Text shows a sentence in a system of units: quantities in the written form
// are converted, everything else stays.
func Text(system, text string) string {
	if !strings.Contains(text, Space) {
		return text
	}
	table := si
	if Of(system) == "us" {
		table = us
	}
	out := said.ReplaceAllStringFunc(text, func(m string) string {
		p := said.FindStringSubmatch(m)
		unit, rest := p[4], ""
		for unit != "" { // a sentence may end behind the unit
			if _, ok := table[unit]; ok || known(unit) {
				break
			}
			unit, rest = unit[:len(unit)-1], unit[len(unit)-1:]+rest
		}
		c, ok := table[unit]
		if !ok {
			return m
		}
		if rest != "" && !strings.ContainsAny(rest[:1], ".)/(") {
			return m // a longer word that only begins like a unit
		}
		number, ok := converted(p[2], p[1] == "-" || p[1] == "−", p[3], c)
		if !ok {
			return m
		}
		if p[1] == "+" && !strings.HasPrefix(number, "-") {
			number = "+" + number
		}
		return number + " " + c.unit + rest
	})
	return strings.ReplaceAll(out, Space, " ")
}

// converted turns a written number, with the concise form's uncertainty or "".
func converted(number string, negative bool, concise string, c conversion) (string, bool) {
	v, err := strconv.ParseFloat(number, 64)
	if err != nil {
		return "", false
	}
	if negative {
		v = -v
	}
	step := lastPlace(number)
	w := v*c.factor + c.offset
	if concise != "" {
		u, err := strconv.ParseFloat(concise, 64)
		if err != nil {
			return "", false
		}
		if !strings.Contains(concise, ".") {
			u *= step
		}
		if u *= c.factor; u > 0 {
			return withU(w, u), true
		}
	}
	return round(w, decimalsOf(v, w, step*c.factor)), true
}

// lastPlace is the value of a written number's last digit.
func lastPlace(number string) float64 {
	mantissa, exponent, _ := strings.Cut(strings.ToLower(number), "e")
	e, _ := strconv.Atoi(exponent)
	if _, frac, ok := strings.Cut(mantissa, "."); ok {
		e -= len(frac)
	}
	return math.Pow(10, float64(e))
}

// decimalsOf is how many decimals show what was written as v, whose last digit
// is worth step in the new unit: no coarser than a third of it, and two digits
// in any case.
func decimalsOf(v, w, step float64) int {
	d := int(math.Ceil(-math.Log10(step) - math.Log10(3.4)))
	for step > 0 && math.Pow(10, float64(-d)) > step {
		d++
	}
	if v != 0 && w != 0 {
		d = max(d, 1-int(math.Floor(math.Log10(math.Abs(w)))))
	}
	return d
}

// withU is the concise form with two digits of u.
func withU(v, u float64) string {
	d := 1 - int(math.Floor(math.Log10(u)))
	if u*math.Pow(10, float64(d)) >= 99.5 {
		d--
	}
	if d <= 0 {
		p := math.Pow(10, float64(-d))
		return round(v, d) + "(" + strconv.FormatFloat(math.Round(u/p)*p, 'f', 0, 64) + ")"
	}
	return round(v, d) + "(" + strconv.FormatFloat(u*math.Pow(10, float64(d)), 'f', 0, 64) + ")"
}

// round prints v with the given decimals; negative ones round to tens and so
// on. Very small and very great figures take an exponent.
func round(v float64, d int) string {
	if a := math.Abs(v); a != 0 && (a < 1e-6 || a >= 1e9) {
		return strconv.FormatFloat(v, 'g', max(2, d+1+int(math.Floor(math.Log10(a)))), 64)
	}
	if d < 0 {
		p := math.Pow(10, float64(-d))
		return strconv.FormatFloat(math.Round(v/p)*p, 'f', 0, 64)
	}
	s := strconv.FormatFloat(v, 'f', d, 64)
	if strings.Trim(s, "-0.") == "" {
		s = strings.TrimPrefix(s, "-")
	}
	return s
}
