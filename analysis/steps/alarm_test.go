package steps

import (
	"math"
	"math/rand/v2"
	"testing"
)

// month draws an undisturbed test: thirty days, four to eight gauges and a
// reference, daily temperature on all of them, humidity drift, resolution and
// noise. days shortens it for the plain tests; the sampling is a reading every
// two minutes, as the bins of a month hold them.
func month(seed uint64, days float64) *world {
	rng := rand.New(rand.NewPCG(seed, 9))
	w := plank()
	w.seed = seed
	w.every, w.length = 120, days*86400
	res := []float64{0.001, 0.002, 0.01}[rng.IntN(3)]
	noise := res * (0.1 + rng.Float64())
	n := 4 + rng.IntN(5)
	w.gauges = []wgauge{{at: 0}, {at: w.span}}
	for len(w.gauges) < n {
		w.gauges = append(w.gauges, wgauge{at: 250 + 1600*rng.Float64()})
	}
	w.gauges = append(w.gauges, wgauge{at: 1000, sees: "reference"})
	for i := range w.gauges {
		w.gauges[i].res, w.gauges[i].noise = res, noise
	}
	w.daily = 0.02 * rng.Float64()
	w.drift = 0.03 * rng.NormFloat64()
	w.changes = []wchange{
		{at: 3600 + 7200*rng.Float64(), late: 20 * rng.NormFloat64(), newton: []float64{100 + 200*rng.Float64(), 150}, name: "s1"},
	}
	return w
}

// Undisturbed tests raise no alarm, however sunny the afternoons.
func TestCalm(t *testing.T) {
	false1, years := 0, 0.0
	for i := range calmDrawn {
		w := month(5000+uint64(i), calmDays)
		f := w.find(t)
		years += calmDays / 365.25 * float64(len(w.gauges))
		if len(f.Disturbances) > 0 || len(f.Steps) != 2 {
			false1++
			t.Logf("seed %d: %d steps,%s", 5000+i, len(f.Steps), tell(f))
		}
	}
	t.Logf("%d of %d undisturbed tests of %g days raised an alarm, in %.1f gauge-years", false1, calmDrawn, float64(calmDays), years)
	if float64(false1) > 0.005*calmDrawn {
		t.Errorf("%d of %d (at most 5 in 1,000)", false1, calmDrawn)
	}
}

// foul adds one disturbance of at least ten times max(noise, res/sqrt 12) and
// two counts to a calm test, and names it.
func foul(seed uint64, days float64) (*world, Kind, float64) {
	w := month(seed, days)
	rng := rand.New(rand.NewPCG(seed, 11))
	least := max(10*max(w.gauges[0].noise, w.gauges[0].res/math.Sqrt(12)), 2*w.gauges[0].res)
	size := least * (1 + 9*rng.Float64())
	if rng.IntN(2) == 0 {
		size = -size
	}
	when := w.length * (0.3 + 0.6*rng.Float64())
	g := 2 + rng.IntN(len(w.gauges)-3)
	switch rng.IntN(8) {
	case 0:
		w.happenings = []happening{{gauge: g, from: when, to: when + 120*(1+3*rng.Float64()), by: size}}
		return w, Spike, when
	case 1:
		w.happenings = []happening{{gauge: g, from: when, by: size}}
		return w, GaugeKnock, when
	case 2:
		for i := range w.gauges {
			w.happenings = append(w.happenings, happening{gauge: i, from: when, by: size * (1 + 0.2*rng.Float64())})
		}
		return w, BenchKnock, when
	case 3:
		w.happenings = []happening{{gauge: g, from: when, zero: true}}
		return w, ZeroPressed, when
	case 4:
		// The greatest sag of any gauge shows at least the least size.
		best := 0.0
		for i := range w.gauges[:len(w.gauges)-1] {
			best = max(best, w.sagPer(w.gauges[i].at, w.loads[0]))
		}
		n := w.changes[0].newton
		w.changes = append(w.changes, wchange{at: when, late: math.NaN(), newton: []float64{n[0] + size/best, n[1]}})
		return w, LoadChanged, when
	case 5:
		w.happenings = []happening{{gauge: g, from: when, to: when + 86400, inch: true}}
		return w, UnitKey, when
	case 6:
		w.silent = [][2]float64{{when, when + 2400 + 7200*rng.Float64()}}
		return w, GapKind, when
	default:
		w.fallSupport, w.fallAt = math.Abs(size), when
		return w, SupportShift, when
	}
}

// One disturbance is found and named right, or left undecided with the truth
// among its candidates.
func TestFoul(t *testing.T) {
	found, named, undecided := 0, 0, 0
	for i := range foulDrawn {
		w, kind, when := foul(9000+uint64(i), calmDays)
		f := w.find(t)
		hit, right, open := false, false, false
		for _, d := range f.Disturbances {
			if math.Abs(seconds(d.From-epoch)-when) > 3*w.every+600 {
				continue
			}
			hit = true
			right = right || d.Kind == kind
			for _, c := range d.Candidates {
				open = open || d.Kind == Undecided && c == kind
			}
		}
		if hit {
			found++
		}
		switch {
		case right:
			named++
		case open:
			named++
			undecided++
		default:
			t.Logf("seed %d: %s at %.0f s came out as%s", 9000+i, kind, when, tell(f))
		}
	}
	t.Logf("of %d disturbances %d found, %d named right (%d of them undecided with the truth among the candidates)", foulDrawn, found, named, undecided)
	n := float64(foulDrawn)
	if float64(found) < 0.99*n || float64(named) < 0.98*n || float64(undecided) > 0.1*n {
		t.Errorf("found %d, named %d, undecided %d of %d (want 99 %%, 98 %%, at most 10 %%)", found, named, undecided, foulDrawn)
	}
}
