package config

import (
	"math"
	"math/big"
	"regexp"
	"strconv"
	"strings"
)

// A number is written as digits with an optional fraction, an optional
// standard uncertainty in parentheses (GUM 7.2.2: in the last digits, or with
// a point in the unit itself) and an optional exponent.
var numberText = regexp.MustCompile(`^([+-]?)(\d+(?:\.\d+)?)(?:\((\d+(?:\.\d+)?)\))?(?:[eE]([+-]?\d+))?`)

// A second number behind the first: 12 400 kg, 6 ft 6 in, 1_000 mm.
var secondNumber = regexp.MustCompile(`^ *[0-9_]|^.* [0-9]`)

// Longest accepted mantissa and largest exponent: far beyond any rig, and they
// bound the exact arithmetic below.
const (
	longestNumber   = 40
	largestExponent = 30
)

// measured is a number as written, exact.
type measured struct {
	value *big.Rat
	u     *big.Rat // nil: none stated
	text  string   // the number's own text, without uncertainty
}

// quoted puts a text from a file into a message, so that blanks and control
// characters in it can be seen.
func quoted(s string) string {
	if r := []rune(s); len(r) > 60 {
		s = string(r[:60]) + "…"
	}
	return strconv.Quote(s)
}

// scanNumber reads the number at the front of s and returns what follows it.
func scanNumber(s string) (m measured, rest string, err *Problem) {
	hit := numberText.FindStringSubmatch(s)
	if hit == nil {
		return m, "", notANumber(s)
	}
	rest = s[len(hit[0]):]
	sign, mantissa, u, exponent := hit[1], hit[2], hit[3], hit[4]
	e, convErr := strconv.Atoi("0" + strings.TrimLeft(exponent, "+-"))
	if len(mantissa) > longestNumber || len(u) > longestNumber || convErr != nil || e > largestExponent {
		return m, "", &Problem{What: quoted(s) + " has too many digits or too large an exponent",
			Fix: "choose a unit in which the number is short"}
	}
	power := ten(e)
	if strings.HasPrefix(exponent, "-") {
		power.Inv(power)
	}
	m.text = sign + mantissa
	if exponent != "" {
		m.text += "e" + exponent
	}
	m.value, _ = new(big.Rat).SetString(sign + mantissa)
	m.value.Mul(m.value, power)
	if u == "" {
		return m, rest, nil
	}
	m.u, _ = new(big.Rat).SetString(u)
	if m.u.Sign() == 0 {
		return m, "", &Problem{What: quoted(s) + " states an uncertainty of zero, which no measurement has",
			Fix: "leave the parentheses out where the uncertainty is not known"}
	}
	if _, decimals, ok := strings.Cut(mantissa, "."); ok && !strings.Contains(u, ".") {
		m.u.Quo(m.u, ten(len(decimals)))
	}
	m.u.Mul(m.u, power)
	return m, rest, nil
}

func ten(n int) *big.Rat {
	return new(big.Rat).SetInt(new(big.Int).Exp(big.NewInt(10), big.NewInt(int64(n)), nil))
}

// notANumber says why the text does not begin with a number.
func notANumber(s string) *Problem {
	p := &Problem{What: quoted(s) + " does not begin with a number"}
	switch {
	case s == "":
		p.What = "there is no number"
	case strings.HasPrefix(s, "."), strings.HasPrefix(s, "-."), strings.HasPrefix(s, "+."):
		p.Fix = "write a zero before the point, such as 0.5"
	case strings.HasPrefix(s, "−"), strings.HasPrefix(s, "–"):
		p.Fix = "use the plain hyphen - as the minus sign"
	case strings.HasPrefix(s, "~"), strings.HasPrefix(s, "<"), strings.HasPrefix(s, ">"):
		p.Fix = "write the value alone, and its standard uncertainty in parentheses: 300.0(5) mm is 300.0 mm with 0.5 mm"
	default:
		p.Fix = "write the number first, then the unit"
	}
	return p
}

// parse reads a text as a quantity of this dimension, in its internal unit.
func (d *dimension) parse(text string) (Quantity, *Problem) {
	shown := strings.TrimSpace(text)
	m, rest, problem := scanNumber(shown)
	if problem != nil {
		if problem.Fix == "" || shown == "" {
			problem.Fix = "write " + d.article + " with its unit, such as " + d.example
		}
		return Quantity{}, problem
	}
	name := strings.TrimSpace(rest)
	if name == "" {
		return Quantity{}, &Problem{What: quoted(shown) + " has no unit: " + d.article + " is wanted here",
			Fix: "write the unit: " + shown + " " + d.units[0].name + " (or " + d.others() + ")"}
	}
	if problem := oddNumber(rest, shown); problem != nil {
		return Quantity{}, problem
	}
	u, ok := d.find(plainUnit(name))
	if !ok {
		problem := d.unknown(m.text, name)
		return Quantity{}, &problem
	}
	factor := u.factor()
	if zero, ok := d.zero[u.name]; ok {
		z, _ := new(big.Rat).SetString(zero)
		m.value.Sub(m.value, z)
	}
	return m.quantity(factor, shown)
}

func (d *dimension) others() string {
	names := d.names()
	if _, after, ok := strings.Cut(names, ", "); ok {
		return after
	}
	_, after, _ := strings.Cut(names, " or ")
	return after
}

// oddNumber recognises number spellings that would otherwise be reported as a
// strange unit.
func oddNumber(rest, shown string) *Problem {
	what := quoted(shown) + " is not written as a quantity"
	switch {
	case strings.HasPrefix(rest, ","):
		return &Problem{What: what + ": it has a comma in the number",
			Fix: "use a decimal point, and nothing between thousands: 12.40 kg, 11500 MPa"}
	case strings.HasPrefix(rest, "."):
		return &Problem{What: what + ": it has a point without digits on both sides", Fix: "write 5.0 or 5"}
	case strings.HasPrefix(rest, "/"):
		return &Problem{What: what + ": fractions are not read", Fix: "write it as a decimal, such as 0.375 in for 3/8 in"}
	case strings.HasPrefix(rest, "("):
		return &Problem{What: what + ": the uncertainty in parentheses cannot be read",
			Fix: "write the digits of the standard uncertainty directly behind the number: 300.0(5) mm, 1.60(2)e6 psi"}
	case strings.Contains(rest, "+-"), strings.Contains(rest, "+/-"), strings.Contains(rest, "±"):
		return &Problem{What: what + ": plus-minus could be a tolerance or an uncertainty",
			Fix: "write the standard uncertainty in parentheses: 300.0(5) mm is 300.0 mm with 0.5 mm"}
	}
	if secondNumber.MatchString(rest) {
		return &Problem{What: what + ": it holds two numbers", Fix: "write one number without blanks in it and one unit: 6.5 ft, not 6 ft 6 in"}
	}
	return nil
}

// quantity scales the exact number and rounds it once, to the nearest float64.
func (m measured) quantity(factor *big.Rat, shown string) (Quantity, *Problem) {
	q := Quantity{Shown: shown}
	q.Value, _ = m.value.Mul(m.value, factor).Float64()
	if m.u != nil {
		q.U, _ = m.u.Mul(m.u, new(big.Rat).Abs(factor)).Float64()
	}
	if math.IsInf(q.Value, 0) || math.IsInf(q.U, 0) {
		return Quantity{}, &Problem{What: quoted(shown) + " is too large"}
	}
	return q, nil
}

// parseNumber reads a plain number, with its uncertainty; percent allows a
// percent sign behind it, which changes nothing (the key says percent).
func parseNumber(text string, percent bool) (Number, *Problem) {
	shown := strings.TrimSpace(text)
	m, rest, problem := scanNumber(shown)
	if problem != nil {
		if rest := strings.TrimSpace(shown); rest == "" {
			problem.Fix = "write a plain number"
		}
		return Number{}, problem
	}
	rest = strings.TrimSpace(rest)
	if percent && rest == "%" {
		rest = ""
	}
	if rest != "" {
		if problem := oddNumber(rest, shown); problem != nil {
			return Number{}, problem
		}
		p := &Problem{What: quoted(shown) + " has a unit, but this is a plain number", Fix: "write " + m.text}
		if rest == "%" {
			p.What = quoted(shown) + " is a percentage, but this key is a plain number"
			p.Fix = "write it as a fraction: 0.8, not 80 %"
		}
		return Number{}, p
	}
	q, problem := m.quantity(big.NewRat(1, 1), shown)
	return Number{q}, problem
}
