package frame

import (
	"math"
	"math/bits"
	"strconv"
)

// Decimal is a decimal number exactly as sent: Digits / 10^Scale. Negative
// zero does not exist in it.
type Decimal struct {
	Digits int64
	// Scale is the number of digits behind the point, -30 to 30; negative
	// where the number ends in zeros that an exponent gave.
	Scale int
}

// maxDigits keeps every Decimal, and its conversion from inches, inside an int64.
const (
	maxDigits = 18
	maxScale  = 30
)

// pow10 holds the powers of ten a float64 represents exactly.
var pow10 = [...]float64{1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11,
	1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18, 1e19, 1e20, 1e21, 1e22}

// ParseDecimal reads a decimal number as instruments print them: blanks, one
// sign, blanks (a fixed-width field is padded with them), digits with at most
// one decimal point or comma, an optional exponent, blanks. It reports false
// for anything else, and for more than 18 digits or an exponent beyond 30.
func ParseDecimal(b []byte) (Decimal, bool) {
	b = trimBlanks(b)
	negative := false
	if len(b) > 0 && (b[0] == '+' || b[0] == '-') {
		negative = b[0] == '-'
		b = trimBlanks(b[1:])
	}
	var d Decimal
	digits, significant, point := 0, 0, false
	i := 0
	for ; i < len(b); i++ {
		c := b[i]
		if (c == '.' || c == ',') && !point {
			point = true
			continue
		}
		if c < '0' || c > '9' {
			break
		}
		digits++
		if significant > 0 || c != '0' {
			significant++
		}
		if significant > maxDigits {
			return Decimal{}, false
		}
		d.Digits = d.Digits*10 + int64(c-'0')
		if point {
			d.Scale++
		}
	}
	if digits == 0 {
		return Decimal{}, false
	}
	exponent, ok := parseExponent(b[i:])
	d.Scale -= exponent
	if !ok || d.Scale > maxScale || d.Scale < -maxScale {
		return Decimal{}, false
	}
	if negative {
		d.Digits = -d.Digits
	}
	return d, true
}

// parseExponent reads "" or E with an optional sign and one to three digits.
func parseExponent(b []byte) (int, bool) {
	if len(b) == 0 {
		return 0, true
	}
	if b[0] != 'e' && b[0] != 'E' {
		return 0, false
	}
	b = b[1:]
	sign := 1
	if len(b) > 0 && (b[0] == '+' || b[0] == '-') {
		if b[0] == '-' {
			sign = -1
		}
		b = b[1:]
	}
	if len(b) == 0 || len(b) > 3 {
		return 0, false
	}
	n := 0
	for _, c := range b {
		if c < '0' || c > '9' {
			return 0, false
		}
		n = n*10 + int(c-'0')
	}
	return sign * n, true
}

func trimBlanks(b []byte) []byte {
	for len(b) > 0 && b[0] == ' ' {
		b = b[1:]
	}
	for len(b) > 0 && b[len(b)-1] == ' ' {
		b = b[:len(b)-1]
	}
	return b
}

// Times returns d times s, exactly. It reports false where the product has
// more than 18 digits or leaves the range of Scale. Zeros at the end of s add
// no digits to the product: 1.50 times 1000 is 1500, not 1500.00.
func (d Decimal) Times(s Decimal) (Decimal, bool) {
	for s.Digits != 0 && s.Digits%10 == 0 {
		s.Digits /= 10
		s.Scale--
	}
	hi, lo := bits.Mul64(magnitude(d.Digits), magnitude(s.Digits))
	const limit = 1_000_000_000_000_000_000
	p := Decimal{Digits: int64(lo), Scale: d.Scale + s.Scale}
	if hi != 0 || lo >= limit || p.Scale > maxScale || p.Scale < -maxScale {
		return Decimal{}, false
	}
	if (d.Digits < 0) != (s.Digits < 0) {
		p.Digits = -p.Digits
	}
	return p, true
}

func magnitude(n int64) uint64 {
	if n < 0 {
		return -uint64(n)
	}
	return uint64(n)
}

// fromFloat returns the shortest decimal that rounds to f as a float of so
// many bits; false for what is none or beyond the range of a Decimal. scratch
// is memory to write in.
func fromFloat(f float64, size int, scratch []byte) (Decimal, bool) {
	return ParseDecimal(strconv.AppendFloat(scratch[:0], f, 'e', -1, size))
}

// Float64 returns the float64 nearest to d.
func (d Decimal) Float64() float64 { return nearest(d.Digits, d.Scale) }

// MM returns the float64 nearest to d, read in u, in millimetres: an inch is
// exactly 25.4 mm, so the product is taken in decimal and rounded once.
func (d Decimal) MM(u Unit) float64 {
	if u != Inch {
		return d.Float64()
	}
	if d.Digits > math.MaxInt64/254 || d.Digits < -math.MaxInt64/254 {
		// Beyond 16 digits the product leaves an int64: multiply in two parts
		// and let the decimal text carry them.
		return nearestText(d)
	}
	return nearest(d.Digits*254, d.Scale+1)
}

// nearest rounds digits/10^scale once. Where both are exact in a float64 the
// division is correctly rounded; else strconv does it.
func nearest(digits int64, scale int) float64 {
	if digits == 0 {
		return 0
	}
	const exact = 1 << 53
	if digits < exact && digits > -exact {
		if scale >= 0 && scale < len(pow10) {
			return float64(digits) / pow10[scale]
		}
	}
	var buf [48]byte
	b := strconv.AppendInt(buf[:0], digits, 10)
	b = append(b, 'e')
	b = strconv.AppendInt(b, int64(-scale), 10)
	f, _ := strconv.ParseFloat(string(b), 64) // cannot fail: at most 19 digits, small exponent
	return f
}

// nearestText multiplies by 25.4 digit by digit and rounds the text once.
func nearestText(d Decimal) float64 {
	negative := d.Digits < 0
	u := uint64(d.Digits)
	if negative {
		u = -u
	}
	var rev [24]byte
	n, carry := 0, uint64(0)
	for u > 0 || carry > 0 {
		carry += u % 10 * 254
		rev[n] = byte('0' + carry%10)
		carry /= 10
		u /= 10
		n++
	}
	b := make([]byte, 0, 40)
	if negative {
		b = append(b, '-')
	}
	for i := n - 1; i >= 0; i-- {
		b = append(b, rev[i])
	}
	b = append(b, 'e')
	b = strconv.AppendInt(b, int64(-d.Scale-1), 10)
	f, _ := strconv.ParseFloat(string(b), 64)
	return f
}

// String returns d in plain digits, with as many behind the point as Scale says.
func (d Decimal) String() string {
	return strconv.FormatFloat(d.Float64(), 'f', max(d.Scale, 0), 64)
}
