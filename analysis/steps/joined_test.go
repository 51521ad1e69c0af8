package steps

import (
	"math"
	"testing"
)

// A point of several bins keeps the floor of the resolution: bins that all
// read alike are not exact.
func TestJoinedKeepsTheFloor(t *testing.T) {
	g := &gauge{res: 0.01, noise: floorU(0.01)}
	var in []point
	for i := range int64(4) {
		in = append(in, point{t: i * 1800 * second, y: 3.25, raw: 3.25, n: 1, from: i * 1800 * second, to: i * 1800 * second, f: 1})
	}
	p := joined(in)
	if u := g.pointU(p); u < floorU(0.01) || math.IsNaN(u) {
		t.Errorf("u = %g mm, the resolution's floor is %g", u, floorU(0.01))
	}
	if p.n != 4 || p.y != 3.25 || p.t != 2700*second {
		t.Errorf("joined to %+v", p)
	}
}
