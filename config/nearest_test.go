package config

import "testing"

func TestNearest(t *testing.T) {
	keys := []string{"at", "bar", "calibration", "contact", "resolution", "sees", "sense", "serial_number", "silent_after", "u", "travel"}
	for word, want := range map[string]string{
		"sens": "sense", "see": "sees", "Resolution": "resolution", "calibraiton": "calibration", "serialnumber": "serial_number",
		"silent-after": "silent_after", "At": "at", "ta": "", "x": "", "colour": "", "": "",
	} {
		if got := nearest(word, keys); got != want {
			t.Errorf("nearest to %q is %q, want %q", word, got, want)
		}
	}
	if got := nearest("cm", []string{"mm", "in"}); got != "" {
		t.Errorf("cm was mended to %s", got)
	}
	for _, tc := range []struct {
		a, b string
		want int
	}{{"", "", 0}, {"abc", "", 3}, {"kitten", "sitting", 3}, {"ab", "ba", 1}, {"sense", "sens", 1}} {
		if got := distance([]rune(tc.a), []rune(tc.b)); got != tc.want {
			t.Errorf("distance of %q and %q is %d, want %d", tc.a, tc.b, got, tc.want)
		}
	}
}
