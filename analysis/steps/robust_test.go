package steps

import (
	"math"
	"testing"
)

// A local fit returns what made its points, whatever the outlier.
func TestLocalFitIsExactAndRobust(t *testing.T) {
	var x, y, u []float64
	for i := range 20 {
		v := float64(i) / 10
		x, y, u = append(x, v), append(y, 1+2*v-0.5*v*v), append(u, 0.001)
	}
	y[7] += 5
	f, ok := fitPoly(x, y, u, 2)
	if !ok || math.Abs(f.at(1.3)-(1+2.6-0.845)) > 1e-3 {
		t.Errorf("fit %v at 1.3: %v", f, f.at(1.3))
	}
	if f, ok := fitPoly([]float64{1}, []float64{3}, []float64{0.1}, 2); !ok || f.at(9) != 3 {
		t.Errorf("one point carries a constant: %v", f)
	}
	if _, ok := fitPoly(nil, nil, nil, 1); ok {
		t.Error("no points carry no fit")
	}
}
