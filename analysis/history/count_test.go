package history

import (
	"math"
	"slices"
	"testing"

	"gonum.org/v1/gonum/stat"
	"pgregory.net/rapid"
)

// plainMedian is the textbook median by sorting: what the counts must equal.
func plainMedian(x []float64) float64 {
	s := slices.Clone(x)
	slices.Sort(s)
	return (s[(len(s)-1)/2] + s[len(s)/2]) / 2
}

// Medians, deviations and extremes from counts equal those from sorting, for
// readings near and far, multiples of the resolution or not.
func TestCountsGiveExactMedians(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		quantum := rapid.SampledFrom([]int64{1, 10, 1000, 12700}).Draw(t, "resolution")
		step := quantum
		if rapid.Bool().Draw(t, "odd") {
			step = 1
		}
		spread := rapid.SampledFrom([]int64{3, 100, 100000}).Draw(t, "spread")
		n := rapid.IntRange(1, 200).Draw(t, "n")
		var list []Sample
		var x []float64
		for i := range n {
			v := step * rapid.Int64Range(-spread, spread).Draw(t, "v")
			list = append(list, Sample{int64(i) * second, float64(v) / 1e6})
			x = append(x, float64(v)/1e6)
		}
		bins, _ := binSamples(list, float64(quantum)/1e6, &grid{edges: []int64{0, int64(n) * second}})
		if len(bins) != 1 || bins[0].N != n {
			t.Fatalf("%d bins", len(bins))
		}
		b := bins[0]
		m := plainMedian(x)
		dev := make([]float64, n)
		for i := range x {
			dev[i] = math.Abs(x[i] - m)
		}
		near := func(a, b float64) bool { return math.Abs(a-b) < 1e-9 }
		if !near(b.Median, m) || !near(b.MAD, plainMedian(dev)) {
			t.Fatalf("median %v MAD %v, want %v %v", b.Median, b.MAD, m, plainMedian(dev))
		}
		if n > 1 && math.Abs(b.SD-stat.StdDev(x, nil)) > 1e-6*(1+b.SD) {
			t.Fatalf("SD %v, want %v", b.SD, stat.StdDev(x, nil))
		}
		if !near(b.Min, slices.Min(x)) || !near(b.Max, slices.Max(x)) || !near(b.First, x[0]) || !near(b.Last, x[n-1]) {
			t.Fatalf("extremes or ends wrong: %+v", b)
		}
	})
}

func TestReadingsOffTheResolutionAreNoted(t *testing.T) {
	_, inexact := binSamples([]Sample{{0, 0.001}, {1, 0.0005}}, 0.001, &grid{edges: []int64{0, 10}})
	if !inexact {
		t.Error("0.0005 mm is no multiple of 0.001 mm")
	}
	_, inexact = binSamples([]Sample{{0, 0.0127}, {1, -0.0254}}, 0.0127, &grid{edges: []int64{0, 10}})
	if inexact {
		t.Error("half thousandths of an inch are multiples of 0.0127 mm")
	}
}
