package steps

import (
	"fmt"
	"math"
	"slices"
	"sort"

	"gaugelog/analysis/lsq"
)

// A support may sink over hours or weeks: no reading jumps then. What tells is
// that the gauges move along a straight line through the other support, beyond
// what creep (in the proportions of the load) and the stand's temperature (on
// every gauge alike, the reference too) explain.

// settling figures.
const (
	// leastBins is how many bins a step must have to be looked at.
	leastBins = 30
	// settleSigmas is how far a day's mean must stand off its neighbours' trend,
	// in robust standard deviations of that over the step.
	settleSigmas = 6
	// settleMisfit is the greatest misfit of a gauge, as a share of the
	// settlement, that is still called a straight line.
	settleMisfit = 0.35
	day          = 86400 * second
)

// slowly is a settlement without a jump.
type slowly struct {
	support  int
	from, to int64
	mm, u    float64
	why      string
}

// slowSettlements reports supports that went down without a jump. It needs a
// gauge over the support and runs when steps, offsets and exclusions are known.
func (r *run) slowSettlements() {
	over := r.supportGauges()
	if len(r.h.Rig.Supports) != 2 || over[0] < 0 && over[1] < 0 {
		return
	}
	for k := range r.out.Steps {
		s := r.sinkingIn(k)
		if len(s.t) < leastBins {
			continue
		}
		for side := range 2 {
			if over[side] < 0 {
				continue
			}
			b := s.movement(side)
			v, ok := s.sankWithinDays(side, b, over[side])
			if !ok {
				v, ok = s.sank(side, b, over[side])
			}
			if ok && r.rulingAt(over[side], v.from, v.to) != "none" {
				r.reportSettling(v, over[side])
			}
		}
	}
}

func (r *run) reportSettling(v slowly, g int) {
	name := r.h.Rig.Supports[v.support].Name
	d := Disturbance{Kind: SupportShift, Gauges: []int{g}, From: v.from, To: v.to, By: []Value{{v.mm, v.u}},
		Treated:  "a real movement: taken off by the support gauges",
		Evidence: fmt.Sprintf("support %s settled slowly, by %.3g\u202fmm within %s: %s", name, v.mm, lasted(seconds(v.to-v.from)), v.why)}
	if !r.chordPossible() {
		d.Treated = "taken off as far as one support gauge tells"
	}
	d.Size = largest(d.By)
	r.add(d)
}

// finest is the least movement that readings of a gauge can show at all, mm.
func (s *sinking) finest(g int) float64 {
	return max(2.5*s.r.gauges[g].res, 6*s.r.gauges[g].noise)
}

// sank looks at the whole step: a settlement is greater than all that the
// stand's weather did in it.
func (s *sinking) sank(side int, b []float64, g int) (slowly, bool) {
	n := len(b)
	edge := max(3, n/20)
	between := func(v []float64) float64 { return level(v[n-edge:]) - level(v[:min(edge, 3)]) }
	total := between(b)
	if math.IsNaN(total) {
		return slowly{}, false
	}
	weather := 0.0
	if s.common >= 0 {
		for o := range s.y {
			if s.r.gauges[o].cfg.Sees == "reference" {
				weather = max(weather, spreadOf(s.y[o]))
			}
		}
	} else {
		// Temperature moves both supports alike.
		weather = 2 * math.Abs(between(s.movement(1-side)))
	}
	if math.Abs(total) < max(weather, s.finest(g)) || !s.straight(side, between) {
		return slowly{}, false
	}
	v := slowly{support: side, mm: total, u: hypot(weather/math.Sqrt(12), floorU(s.r.gauges[g].res)), why: "more than the stand's own movement in all that time"}
	v.from, v.to = s.passed(b, level(b[:min(edge, 3)]), total)
	return v, v.to-v.from > s.t[leastBins/3]-s.t[0]
}

// straight says that what a linear statistic makes of every gauge's bins lies
// along the line of one support's settlement.
func (s *sinking) straight(side int, of func([]float64) float64) bool {
	value := make([]float64, len(s.y))
	for g := range value {
		value[g] = of(s.y[g])
	}
	x, misfit := s.solve(func(g int) float64 { return value[g] })
	return x != nil && misfit <= settleMisfit*math.Abs(x[side])
}

// passed returns the instants at which the smoothed movement first reached a
// tenth and nine tenths of the whole.
func (s *sinking) passed(b []float64, start, whole float64) (from, to int64) {
	from, to = s.t[0], s.t[len(s.t)-1]
	began := false
	for i := range b {
		f := (level(b[max(0, i-2):min(len(b), i+3)]) - start) / whole
		if !began && f > 0.1 {
			from, began = s.t[i], true
		}
		if f > 0.9 {
			return from, s.t[i]
		}
	}
	return from, to
}

// sankWithinDays looks for a settlement within a day: the means of whole days
// before and behind it hold no daily temperature, and their difference is held
// against the same difference some days before and later.
func (s *sinking) sankWithinDays(side int, b []float64, g int) (slowly, bool) {
	width := s.t[1] - s.t[0]
	n := int(day / width)
	if len(b) < 8*n {
		return slowly{}, false
	}
	stat := dayShift(n)
	d := make([]float64, len(b))
	var abs []float64
	for i := range d {
		d[i] = stat(b, i)
		if !math.IsNaN(d[i]) {
			abs = append(abs, math.Abs(d[i]))
		}
	}
	if len(abs) < 4*n {
		return slowly{}, false
	}
	sigma := lsq.MADScale * lsq.Median(abs)
	best := -1
	for i := range d {
		if !math.IsNaN(d[i]) && (best < 0 || math.Abs(d[i]) > math.Abs(d[best])) {
			best = i
		}
	}
	need := max(settleSigmas*sigma, 2*s.r.gauges[g].res, 4*s.r.gauges[g].noise)
	if math.Abs(d[best]) < need || !s.straight(side, func(v []float64) float64 { return stat(v, best) }) {
		return slowly{}, false
	}
	v := slowly{support: side, mm: d[best], u: hypot(sigma, floorU(s.r.gauges[g].res)), why: "the means of the days before and behind it differ by more than those of other days"}
	v.from, v.to = s.within(b, best, n, d[best])
	return v, true
}

// within narrows a settlement of mm down that the days about bin i show: less
// the same hour two days before and two days later, in which the daily
// temperature falls out, the movement rises from half of it below nought to
// half of it above.
func (s *sinking) within(b []float64, i, n int, mm float64) (from, to int64) {
	var c []float64
	first := max(i-n, 2*n)
	for k := first; k <= i+n && k+2*n < len(b); k++ {
		c = append(c, (b[k]-(b[k-2*n]+b[k+2*n])/2)/mm)
	}
	from, to = s.t[i]-day/2, s.t[i]+day/2
	half := max(1, n/48)
	smooth := func(k int) float64 { return level(c[max(0, k-half):min(len(c), k+half+1)]) }
	began := -1
	for k := range c {
		v := smooth(k)
		if v < -0.4 {
			began, from = k, s.t[first+k] // the last time it had not begun
		}
		if v > 0.4 && began >= 0 {
			return from, max(from, s.t[first+k])
		}
	}
	return from, to
}

// dayShift returns the mean of the day behind an index, half a day away, less
// that of the day before it, less what the same was some days earlier and later.
func dayShift(n int) func(v []float64, i int) float64 {
	mean := func(v []float64, from, to int) float64 {
		if from < 0 || to > len(v) {
			return math.NaN()
		}
		sum, k := 0.0, 0
		for _, x := range v[from:to] {
			if !math.IsNaN(x) {
				sum += x
				k++
			}
		}
		if 2*k < n {
			return math.NaN()
		}
		return sum / float64(k)
	}
	shift := func(v []float64, i int) float64 { return mean(v, i+n/2, i+n/2+n) - mean(v, i-n/2-n, i-n/2) }
	return func(v []float64, i int) float64 {
		return shift(v, i) - (shift(v, i-2*n)+shift(v, i+2*n))/2
	}
}

// level is the median of what is known, NaN for nothing.
func level(v []float64) float64 {
	known := slices.DeleteFunc(slices.Clone(v), math.IsNaN)
	if len(known) == 0 {
		return math.NaN()
	}
	return lsq.Median(known)
}

// spreadOf is the range that holds the middle nine tenths of what is known.
func spreadOf(v []float64) float64 {
	known := slices.DeleteFunc(slices.Clone(v), math.IsNaN)
	if len(known) == 0 {
		return 0
	}
	sort.Float64s(known)
	return known[len(known)*95/100] - known[len(known)*5/100]
}
