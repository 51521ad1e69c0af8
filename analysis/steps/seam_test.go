package steps

import (
	"math"
	"math/rand/v2"
	"testing"
)

// Behind a change of load readings are stored densely for some minutes, then
// ever more thinly. Where the one ends and the other begins nothing happens:
// the slope of the dense side, over so short a time, is made of counts, and
// must not be carried across the first long spacing.
func TestWhereDenseReadingsEndNothingHappens(t *testing.T) {
	for seed := range uint64(300) {
		draw := rand.New(rand.NewPCG(seed, 4))
		g := &gauge{res: 0.001, noise: 0.0005}
		size, sign := 1+20*draw.Float64(), float64(1-2*draw.IntN(2))
		var seq []point
		add := func(s float64) {
			y := sign * size * 0.085 * math.Pow(s/3600, 0.23)
			y = math.Round((y+g.noise*draw.NormFloat64())/g.res) * g.res
			at := nanos(s)
			seq = append(seq, point{t: at, y: y, n: 1, from: at, to: at, f: 1})
		}
		s := 100.0
		for ; s < 305; s++ {
			add(s)
		}
		for ; s < 20000; s += max(14, 0.047*s) {
			add(s)
		}
		flat, singles := hampel(g, seq)
		found := append(singles, jumps(g, flat, []int{1, 2, 5, 15, 45}, func(p point) float64 { return g.noise * p.f }, 1)...)
		for _, f := range found {
			t.Errorf("seed %d: %.4f mm between %.0f and %.0f s, at scale %d", seed, f.size, seconds(f.lo), seconds(f.hi), f.scale)
		}
	}
}
