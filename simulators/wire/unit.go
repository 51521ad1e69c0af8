package wire

import "math"

// inUnit is the number to show and its unit: an instrument that says its unit
// shows what its key chose, one that does not has the one unit the frame's
// description gives it.
func inUnit(v *Value, unit string, says bool) (float64, string) {
	switch {
	case unit == "" || unit == v.Unit || says:
		return v.Shown, v.Unit
	case unit == "in":
		return v.Shown / 25.4, "in"
	}
	return v.Shown * 25.4, "mm"
}

// count is shown / step as a whole number; false where it is none that a
// float64 holds exactly.
func count(shown, step float64) (int64, bool) {
	n := math.Round(shown / step)
	return int64(n), math.Abs(n) < 1<<53
}

// codeOf is the code that says word, the smallest where several do. The codes
// are hexadecimal digits.
func codeOf(codes map[string]string, word string) (byte, bool) {
	for _, code := range sortedKeys(codes) {
		if codes[code] == word && len(code) == 1 {
			return nibbleOf(code[0])
		}
	}
	return 0, false
}

// nibbleOf is the value of a hexadecimal digit.
func nibbleOf(c byte) (byte, bool) {
	switch {
	case c >= '0' && c <= '9':
		return c - '0', true
	case c >= 'a' && c <= 'f':
		return c - 'a' + 10, true
	case c >= 'A' && c <= 'F':
		return c - 'A' + 10, true
	}
	return 0, false
}
