package creep

import (
	"cmp"
	"math"
	"slices"
	"sort"

	"gaugelog/analysis/lsq"
)

// Acceleration says when the sag began to go faster, h after the origin of
// the ages given to Watch. It is a warning to keep away, never leave to go
// near and check; a brittle break gives none.
type Acceleration struct {
	// MinimumH is when the rate was least, given only where it rose since.
	MinimumH *float64
	// CautionH is when a window of time ran at 1.25 times the least rate or
	// more, ClearAreaH when at 1.5 times by its end, or with the sag limit a
	// day away.
	CautionH, ClearAreaH *float64
}

// Limits are what Watch holds the sag against, and what it must know.
type Limits struct {
	SagMM float64 // 0: none
	// ChangesH are load changes within the ages given, h: after each the creep
	// begins anew and so does the watch.
	ChangesH []float64
	// ResolutionMM is the gauge's: less than it in a window is no rise. 0: exact.
	ResolutionMM float64
}

// The rules of the two levels. A window must stand out from the least rate
// before by standOut times the scatter that windows of its length had, which
// counts what is left of daily cycles and weather, and the window before it
// must have begun to rise. One knock in a window is taken out of it, so none
// raises anything.
const (
	cautionRatio = 1.25
	clearRatio   = 1.5
	begun        = 0.5
	leastHistory = 4 // windows before a rate can be judged
	// beforeEnd parts the time watched: what came before the end over this
	// tells the steady course.
	beforeEnd = 1.4
)

// oneStep is the standard uncertainty that the gauge's steps leave in the
// difference of two readings, in steps: the least that a window's rise scatters.
var oneStep = math.Sqrt(2.0 / 12)

// standOut is by how much a window at an age, h, must stand out: the longer a
// test is watched, the more windows there are one of which may do so by chance.
func standOut(ageH float64) float64 {
	const short, long = 400, 1600
	return 5.5 + 1.5*min(max(math.Log(ageH/short)/math.Log(long/short), 0), 1)
}

// Watch looks for acceleration in the temperature-compensated sag (mm) of
// one load, at ages in h (rising), with windows from 6 h on, each longer by half.
// Jumps that stay are taken out first: a knock is no acceleration.
func Watch(ageH, sagMM []float64, l Limits) Acceleration {
	var out Acceleration
	sag := withoutJumps(sagMM)
	for i, origin := 0, 0.0; i < len(ageH); {
		end := math.Inf(1)
		for _, c := range l.ChangesH {
			if c > ageH[i] {
				end = min(end, c)
			}
		}
		j := i
		var age []float64
		for j < len(ageH) && ageH[j] < end {
			age = append(age, ageH[j]-origin)
			j++
		}
		watchSegment(age, sag[i:j], origin, l, &out)
		i, origin = j, end
	}
	return out
}

// watchSegment watches one interval of steady load that began at origin.
func watchSegment(age, sag []float64, origin float64, l Limits, out *Acceleration) {
	if len(age) < 10 {
		return
	}
	var own Acceleration
	course := courseOf(age, sag)
	for w := 6.0; w <= age[len(age)-1]/float64(leastHistory); w *= 2 {
		for _, v := range []float64{w, 1.5 * w} {
			// Windows at several phases, so that none waits long for its end.
			var phases [][]window
			var all []window
			for phase := 0.0; phase < v; phase += max(v/8, 3) {
				win := windows(age, sag, v, phase)
				phases, all = append(phases, win), append(all, win...)
			}
			slices.SortFunc(all, func(a, b window) int { return cmp.Compare(a.endH, b.endH) })
			for _, win := range phases {
				watchScale(win, all, v, len(phases), course, l, &own)
			}
		}
	}
	for _, p := range []struct{ from, to **float64 }{{&own.MinimumH, &out.MinimumH}, {&own.CautionH, &out.CautionH}, {&own.ClearAreaH, &out.ClearAreaH}} {
		if *p.from != nil {
			earliest(p.to, origin+**p.from)
		}
	}
}

// withoutJumps returns the sag with jumps taken out that stand out from the
// differences about them and stay: medians of three readings before and
// after differ by most of the jump.
func withoutJumps(sag []float64) []float64 {
	out := make([]float64, len(sag))
	copy(out, sag)
	if len(sag) < 12 {
		return out
	}
	d := make([]float64, len(sag)-1)
	for i := range d {
		d[i] = sag[i+1] - sag[i]
	}
	var shift, sigma, middle float64
	for i := 1; i < len(sag); i++ {
		if i%8 == 1 {
			near := d[max(0, i-41):min(len(d), i+8)]
			middle, sigma = lsq.Median(near), lsq.MADScale*lsq.MAD(near)
		}
		jump := d[i-1] - middle
		if i >= 3 && i+3 <= len(sag) && math.Abs(jump) > 8*sigma && sigma > 0 {
			step := lsq.Median(sag[i:i+3]) - lsq.Median(sag[i-3:i])
			if math.Abs(step) > 0.7*math.Abs(jump) {
				shift += jump
			}
		}
		out[i] = sag[i] - shift
	}
	return out
}

// window is one window's rate.
type window struct {
	endH, rate, last float64 // h, mm/h, mm
}

// windows cuts the record, from phase on, into windows of w hours that do not overlap and
// have a robust slope each; windows with too few readings are left out.
func windows(age, sag []float64, w, phase float64) []window {
	var out []window
	i := 0
	for k := math.Floor((age[0] - phase) / w); i < len(age); k++ {
		var x, y []float64
		for ; i < len(age) && age[i]-phase < (k+1)*w; i++ {
			x, y = append(x, age[i]), append(y, sag[i])
		}
		if k <= 0 || len(x) < 4 || x[len(x)-1]-x[0] < 0.6*w {
			continue // the first window holds the fast begin
		}
		x, y = thin(x, y, 24)
		withoutExtremes(x, y)
		if s, ok := slope(x, y); ok {
			out = append(out, window{x[len(x)-1], s, y[len(y)-1]})
		}
	}
	return out
}

// withoutExtremes takes the steepest rise and the steepest fall between
// neighbours out of y, down to the middle of all: whatever a single knock did
// is in one of them, and leaving both out favours neither side.
func withoutExtremes(x, y []float64) {
	n := len(y) - 1
	if n < 5 {
		return
	}
	d := make([]float64, n)
	for i := range d {
		d[i] = (y[i+1] - y[i]) / (x[i+1] - x[i])
	}
	middle := lsq.Median(d)
	up, down := 0, 0
	for i, v := range d {
		if v > d[up] {
			up = i
		}
		if v < d[down] {
			down = i
		}
	}
	for _, k := range []int{up, down} {
		shift := (d[k] - middle) * (x[k+1] - x[k])
		for i := k + 1; i <= n; i++ {
			y[i] -= shift
		}
	}
}

// slope is Theil and Sen's.
func slope(x, y []float64) (float64, bool) {
	l, err := lsq.TheilSen(x, y, 1.96)
	return l.Slope, err == nil
}

// watchScale looks at windows of one length w that do not overlap, all being
// those at any of several phases, and keeps the earliest findings.
func watchScale(win, all []window, w float64, phases int, course *course, l Limits, out *Acceleration) {
	for i := 3; i < len(win); i++ {
		end := win[i].endH
		a, b := win[i-1].rate, win[i].rate
		least, leastAt := course.least(win[i-2].endH)
		if b < cautionRatio*max(least, 0) { // far the most, and quickly told
			continue
		}
		// What the sag did until then tells what it would go on to do: judged
		// windows are no part of it.
		steady, ok := course.until(min(end/beforeEnd, win[i-2].endH))
		if !ok {
			continue
		}
		base := max(steady.rate(win[i-2].endH-w, win[i-2].endH), least, 0)
		if b < cautionRatio*base {
			continue
		}
		u := max(scatter(all, steady, w, phases), oneStep*l.ResolutionMM/w)
		if b-base < standOut(end)*u || a-base < begun*u {
			continue
		}
		earliest(&out.CautionH, end)
		if out.MinimumH == nil || leastAt < *out.MinimumH {
			m := leastAt
			out.MinimumH = &m
		}
		// The rate at the window's end, were it to rise on as it did.
		last := b + max(b-a, 0)/2
		soon := l.SagMM > 0 && win[i].last+24*b > l.SagMM
		if last > clearRatio*base || soon {
			earliest(&out.ClearAreaH, end)
		}
	}
}

func earliest(p **float64, v float64) {
	if *p == nil || v < **p {
		*p = &v
	}
}

// scatter is the standard deviation by which windows' rates, at whatever
// phase, left the steady course while it was found: what daily cycles, weather
// and noise do. By the median, so that knocks do not hide an acceleration;
// infinite where too few windows tell.
func scatter(all []window, steady *steady, w float64, phases int) float64 {
	n := sort.Search(len(all), func(i int) bool { return all[i].endH > steady.endH })
	apart := float64(n) / float64(phases) // windows that do not overlap
	if apart < leastHistory {
		return math.Inf(1)
	}
	from := max(0, n-40*phases)
	stride := max((n-from)/120, 1)
	var d []float64
	for i := from; i < n; i += stride {
		d = append(d, math.Abs(all[i].rate-steady.rate(all[i].endH-w, all[i].endH)))
	}
	return lsq.MADScale * lsq.Median(d) * (1 + 1/apart)
}
