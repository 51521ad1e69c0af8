package importer

import (
	"fmt"
	"math/big"
	"strings"
)

// lengths are the units a gauge's column may be in, in mm. An inch is exactly
// 25.4 mm (international yard and pound agreement, 1959).
var lengths = map[string]*big.Rat{
	"mm": big.NewRat(1, 1), "cm": big.NewRat(10, 1), "m": big.NewRat(1000, 1),
	"um": big.NewRat(1, 1000), "µm": big.NewRat(1, 1000), "μm": big.NewRat(1, 1000),
	"in": big.NewRat(254, 10), "inch": big.NewRat(254, 10), "inches": big.NewRat(254, 10), `"`: big.NewRat(254, 10),
	"mil": big.NewRat(254, 10000), "thou": big.NewRat(254, 10000),
}

// spans are the units of elapsed time, in nanoseconds.
var spans = map[string]*big.Rat{
	"ms": big.NewRat(1e6, 1), "s": big.NewRat(1e9, 1), "sec": big.NewRat(1e9, 1), "seconds": big.NewRat(1e9, 1),
	"min": big.NewRat(60e9, 1), "minutes": big.NewRat(60e9, 1), "h": big.NewRat(3600e9, 1), "hours": big.NewRat(3600e9, 1),
	"d": big.NewRat(86400e9, 1), "days": big.NewRat(86400e9, 1),
}

// parseNumber reads a plain decimal number, or whole and common fraction as on
// a ruler (1 3/8), exactly.
func parseNumber(text string, comma bool) (*big.Rat, error) {
	text = strings.TrimSpace(strings.NewReplacer("\u2212", "-", "\u00a0", " ").Replace(text))
	if comma {
		if strings.Contains(text, ".") && strings.Contains(text, ",") {
			return nil, fmt.Errorf("%q has both a point and a comma", text)
		}
		text = strings.Replace(text, ",", ".", 1)
	}
	if strings.Contains(text, "/") {
		return parseFraction(text)
	}
	if !plainDecimal(text) {
		return nil, fmt.Errorf("%q is no number", text)
	}
	v, ok := new(big.Rat).SetString(text)
	if !ok {
		return nil, fmt.Errorf("%q is no number", text)
	}
	return v, nil
}

// plainDecimal keeps out what the library would also take: hexadecimal,
// underscores, fractions, endless exponents.
func plainDecimal(text string) bool {
	digits, body := 0, strings.TrimLeft(text, "+-")
	if len(text)-len(body) > 1 || len(body) > 30 {
		return false
	}
	mantissa, exponent, has := strings.Cut(strings.ToLower(body), "e")
	for _, c := range mantissa {
		if c >= '0' && c <= '9' {
			digits++
		} else if c != '.' {
			return false
		}
	}
	if has {
		exponent = strings.TrimLeft(exponent, "+-")
		if len(exponent) < 1 || len(exponent) > 2 {
			return false
		}
		for _, c := range exponent {
			if c < '0' || c > '9' {
				return false
			}
		}
	}
	return digits > 0
}

// parseFraction reads 3/8, 1 3/8 and 1-3/8.
func parseFraction(text string) (*big.Rat, error) {
	sign := int64(1)
	body := text
	if strings.HasPrefix(body, "-") {
		sign, body = -1, body[1:]
	}
	var whole, over, under int64
	body = strings.Join(strings.Fields(strings.Replace(body, "-", " ", 1)), " ")
	form := "%d/%d"
	args := []any{&over, &under}
	if strings.Contains(body, " ") {
		form, args = "%d %d/%d", []any{&whole, &over, &under}
	}
	var rest string
	n, _ := fmt.Sscanf(body+" .", form+" %s", append(args, &rest)...)
	if n != len(args)+1 || rest != "." || under <= 0 || over < 0 || whole < 0 || over >= under {
		return nil, fmt.Errorf("%q is no number and no fraction such as 1 3/8", text)
	}
	v := new(big.Rat).Add(big.NewRat(whole, 1), big.NewRat(over, under))
	return v.Mul(v, big.NewRat(sign, 1)), nil
}

// millimetres converts a number in a unit to the nearest float64 in mm.
func millimetres(v *big.Rat, unit string) (float64, error) {
	mm, _ := new(big.Rat).Mul(v, lengths[unit]).Float64()
	if mm > 1e6 || mm < -1e6 {
		return 0, fmt.Errorf("%g mm is no indication of a gauge", mm)
	}
	if mm == 0 {
		return 0, nil
	}
	return mm, nil
}
