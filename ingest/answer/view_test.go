package answer

import "testing"

func TestCountsReadEasily(t *testing.T) {
	for n, want := range map[int64]string{0: "0", 999: "999", 1234: "1234", 12345: "12\u202f345", 100000000: "100\u202f000\u202f000"} {
		if got := count(n); got != want {
			t.Errorf("%d is written %q, want %q", n, got, want)
		}
	}
}

// Axis labels stand at round places inside the range, with the true minus.
func TestYTicks(t *testing.T) {
	for _, c := range []struct {
		low, high float64
		want      []string
	}{
		{-0.011, 0.012, []string{"−0.01", "0.00", "0.01"}},
		{0.2, 4.4, []string{"2", "4"}},
		{99.9995, 100.0005, []string{"99.9995", "100.0000", "100.0005"}},
	} {
		var got []string
		for _, k := range YTicks(c.low, c.high, 4) {
			got = append(got, k.Label)
			if k.At < c.low-1e-9 || k.At > c.high+1e-9 {
				t.Errorf("%g lies outside %g to %g", k.At, c.low, c.high)
			}
		}
		if len(got) != len(c.want) {
			t.Errorf("%g to %g: %q, want %q", c.low, c.high, got, c.want)
			continue
		}
		for i := range got {
			if got[i] != c.want[i] {
				t.Errorf("%g to %g: %q, want %q", c.low, c.high, got, c.want)
				break
			}
		}
	}
}

func TestAFigureOfNothingHasNoRange(t *testing.T) {
	for _, f := range []Figure{{}, {X1: 1}, {X1: 1, Lines: []Line{{Name: "mid"}}}, {Lines: []Line{{Points: []Point{{0, 1}}}}}} {
		if _, _, any := f.Range(); any {
			t.Errorf("%+v has a range", f)
		}
	}
	still := Figure{X1: 1, Least: 0.01, Lines: []Line{{Points: []Point{{0, 1}, {1, 1}}}}}
	if low, high, any := still.Range(); !any || high-low < 0.01-1e-12 {
		t.Errorf("a still gauge is drawn from %g to %g", low, high)
	}
}
