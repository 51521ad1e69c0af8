package wire

import (
	"errors"
	"math"
	"regexp"
)

// number is a way to write decimals: so many digits before and behind the
// point, and how the sign stands.
type number struct {
	whole    int // least digits before the point
	most     int // most digits before the point; 0: no bound
	decimals int
	plus     byte // before numbers that are not negative: 0 for nothing
	pad      byte // fills whole: '0' or ' '
	scale    float64
}

// errNoNumber says that no way of writing numbers fits a group.
var errNoNumber = errors.New("no way of writing a decimal fits the group")

// newNumber looks for a way of writing numbers that a group's own pattern
// takes whole, with the digits behind the point that the resolution asks for
// if the pattern leaves a choice.
func newNumber(group *regexp.Regexp, decimals int, signed bool) (number, error) {
	tries := []int{decimals}
	for d := 8; d >= 0; d-- {
		if d != decimals {
			tries = append(tries, d)
		}
	}
	for _, d := range tries {
		for whole := 1; whole <= 9; whole++ {
			for _, plus := range []byte{0, '+', ' '} {
				for _, pad := range []byte{'0', ' '} {
					n := number{whole: whole, decimals: d, plus: plus, pad: pad, scale: math.Pow10(d)}
					if n.fits(group, signed) {
						n.most = n.widest(group)
						return n, nil
					}
				}
			}
		}
	}
	return number{}, errNoNumber
}

// fits tries the way on small numbers of either sign.
func (n *number) fits(group *regexp.Regexp, signed bool) bool {
	for _, v := range []float64{0, 1.234567, 7.5, -3.25, -0.000244140625} {
		if v < 0 && !signed {
			continue
		}
		text, ok := n.append(nil, v)
		if !ok || !group.Match(text) {
			return false
		}
	}
	return true
}

// widest is the most digits before the point that the group takes; 0 where it
// takes twelve and more.
func (n *number) widest(group *regexp.Regexp) int {
	for digits := n.whole; digits < 12; digits++ {
		if text, _ := n.append(nil, math.Pow10(digits)); !group.Match(text) {
			return digits
		}
	}
	return 0
}

// pairs are the numbers 00 to 99.
var pairs = func() (out [200]byte) {
	for i := range 100 {
		out[2*i], out[2*i+1] = byte('0'+i/10), byte('0'+i%10)
	}
	return out
}()

// append writes v; false where it has too many digits.
func (n *number) append(dst []byte, v float64) ([]byte, bool) {
	scaled := math.Round(math.Abs(v) * n.scale)
	if !(scaled < 1e15) {
		return dst, false
	}
	var digits [20]byte
	at := len(digits)
	// Two digits at a time: half the divisions.
	rest := uint64(scaled)
	for rest >= 100 {
		two := rest % 100 * 2
		rest /= 100
		at -= 2
		digits[at], digits[at+1] = pairs[two], pairs[two+1]
	}
	for rest > 0 || len(digits)-at <= n.decimals {
		at--
		digits[at] = byte('0' + rest%10)
		rest /= 10
	}
	whole := len(digits) - at - n.decimals
	if n.most > 0 && whole > n.most {
		return dst, false
	}
	negative := v < 0 && scaled > 0
	if n.pad == ' ' {
		for i := whole; i < n.whole; i++ {
			dst = append(dst, ' ')
		}
	}
	if negative {
		dst = append(dst, '-')
	} else if n.plus != 0 {
		dst = append(dst, n.plus)
	}
	if n.pad == '0' {
		for i := whole; i < n.whole; i++ {
			dst = append(dst, '0')
		}
	}
	dst = append(dst, digits[at:len(digits)-n.decimals]...)
	if n.decimals > 0 {
		dst = append(dst, '.')
		dst = append(dst, digits[len(digits)-n.decimals:]...)
	}
	return dst, true
}
