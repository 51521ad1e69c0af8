package creep

import (
	"fmt"
	"math"
	"testing"
)

// NIST SP 1065 (2008), sections 12.3 and 12.4: the 1000-point set from the
// generator printed there and the nine-point set, to all printed digits.
func TestAllanPublished(t *testing.T) {
	var big struct {
		Published map[string][]string
		Factors   []int `json:"averaging_factors"`
	}
	load(t, "allan_sp1065_1000pt.json", &big)
	v := make([]float64, 1000)
	n := int64(1234567890)
	for i := range v {
		v[i] = float64(n) / 2147483647
		n = 16807 * n % 2147483647
	}
	kinds := map[string]func([]float64, int) (float64, error){"adev": AllanPlain, "oadev": Allan, "mdev": AllanModified}
	for name, f := range kinds {
		for i, m := range big.Factors {
			got, err := f(v, m)
			if err != nil || fmt.Sprintf("%.6e", got) != big.Published[name][i] {
				t.Errorf("%s at %d: %.6e, published %s, %v", name, m, got, big.Published[name][i], err)
			}
		}
	}
	var small struct {
		Y         []float64
		Published map[string][]string `json:"published_m1_m2"`
	}
	load(t, "allan_nbs_9pt.json", &small)
	for name, f := range kinds {
		for i, want := range small.Published[name] {
			got, err := f(small.Y, i+1)
			if w := numbers(t, []string{want})[0]; err != nil || fmt.Sprintf("%.7g", got) != fmt.Sprintf("%.7g", w) {
				t.Errorf("%s at %d: %.7g, published %s, %v", name, i+1, got, want, err)
			}
		}
	}
	if _, err := Allan(small.Y, 5); err == nil {
		t.Error("nine values gave two means of five")
	}
}

func TestConstantReadingsHaveTheFloor(t *testing.T) {
	v := make([]float64, 64)
	for i := range v {
		v[i] = 1.234
	}
	s, err := SoakOf(v, 1, 0.001)
	if err != nil {
		t.Fatal(err)
	}
	for _, d := range s.DeviationMM {
		if math.Abs(d-0.001/math.Sqrt(12)) > 1e-15 {
			t.Errorf("deviation %g", d)
		}
	}
	if !s.Floored {
		t.Error("the floor is not said")
	}
}
