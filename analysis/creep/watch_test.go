package creep

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"testing"
)

// hold is a simulated hold of one load: sag read every 15 min.
type hold struct {
	age, sag []float64
}

// daily is what compensation leaves of a daily cycle: a tenth of 2 K at
// 2.5 um/K, and of a humidity cycle, with amplitudes that change from day to
// day, plus white noise and a wander.
func (h *hold) add(rng *rand.Rand, untilH float64, law func(t float64) float64) {
	var wander float64
	amplitude, phase := 0.0005*(1+rng.Float64()), 6.28*rng.Float64()
	day := 1.0
	for t := 0.25; t < untilH; t += 0.25 {
		if math.Mod(t, 24) < 0.25 {
			day = 1 + 0.3*rng.NormFloat64()
		}
		d := math.Exp(-0.25 / 3)
		wander = d*wander + 0.0005*math.Sqrt(1-d*d)*rng.NormFloat64()
		h.age = append(h.age, t)
		h.sag = append(h.sag, law(t)+day*amplitude*math.Sin(2*math.Pi*t/24+phase)+wander+0.0005*rng.NormFloat64())
	}
}

type lead struct {
	tests, inTime int
	medianLead    float64 // h before collapse
	missed        []string
}

// failures simulates tests that end in a break: primary creep, then from
// onset on a rate that grows as 1/(time left).
func failures(t *testing.T, tests int) lead {
	t.Helper()
	out := lead{tests: tests}
	var leads []float64
	for k := range tests {
		rng := rand.New(rand.NewPCG(uint64(k), 1234))
		life := 240 * math.Pow(9, rng.Float64()) // 10 to 90 days, h
		onset := life * (0.5 + 0.3*rng.Float64())
		n, d1 := 0.15+0.2*rng.Float64(), 0.5+0.7*rng.Float64() // mm
		rate := d1 * n * math.Pow(onset, n-1)
		var h hold
		h.add(rng, life-0.5, func(x float64) float64 {
			if x < onset {
				return d1 * math.Pow(x, n)
			}
			return d1*math.Pow(onset, n) + rate*(life-onset)*math.Log((life-onset)/(life-x))
		})
		w := Watch(h.age, h.sag, Limits{})
		switch {
		case w.ClearAreaH == nil:
			out.missed = append(out.missed, fmt.Sprintf("%d: life %.0f h, onset %.0f h, none", k, life, onset))
		case *w.ClearAreaH < onset:
			out.missed = append(out.missed, fmt.Sprintf("%d: life %.0f h, onset %.0f h, too early at %.0f h", k, life, onset, *w.ClearAreaH))
		case *w.ClearAreaH > (onset+life)/2:
			out.missed = append(out.missed, fmt.Sprintf("%d: life %.0f h, onset %.0f h, late at %.0f h, middle %.0f h", k, life, onset, *w.ClearAreaH, (onset+life)/2))
			leads = append(leads, life-*w.ClearAreaH)
		default:
			out.inTime++
			leads = append(leads, life-*w.ClearAreaH)
		}
	}
	slices.Sort(leads)
	if len(leads) > 0 {
		out.medianLead = leads[len(leads)/2]
	}
	return out
}

// soundTests simulates 90-day tests in primary creep with knocks that nobody
// took out and one small load change, and returns those that raised either
// warning. Even tests have a knock every fortnight or so.
func soundTests(t *testing.T, tests int) (warned []string) {
	t.Helper()
	for k := range tests {
		rng := rand.New(rand.NewPCG(uint64(k), 4321))
		n, d1 := 0.15+0.2*rng.Float64(), 0.5+0.7*rng.Float64()
		type jump struct{ at, size float64 }
		var jumps []jump
		for at := 24 * 14 * rng.ExpFloat64(); at < 2160; at += 24 * 14 * rng.ExpFloat64() {
			jumps = append(jumps, jump{at, 0.05 * rng.NormFloat64()})
		}
		change, share := 2160*rng.Float64(), 0.02*rng.Float64()
		var h hold
		h.add(rng, 2160, func(x float64) float64 {
			w := d1 * math.Pow(x, n)
			if x > change {
				w += share * (10 + d1*math.Pow(x-change, n))
			}
			for _, j := range jumps {
				if x > j.at {
					w += j.size
				}
			}
			return w
		})
		if w := Watch(h.age, h.sag, Limits{ChangesH: []float64{change}}); w.CautionH != nil {
			clear := -1.0
			if w.ClearAreaH != nil {
				clear = *w.ClearAreaH
			}
			warned = append(warned, fmt.Sprintf("%d: caution %.0f h clear %.0f h, change %.0f h, knocks %v", k, *w.CautionH, clear, change, jumps))
		}
	}
	return warned
}

// The campaign runs 500 of each; here enough to see a rule that is off.
func TestWatch(t *testing.T) {
	t.Parallel()
	w := failures(t, 20)
	t.Logf("clear-area in time in %d of %d, median lead %.1f h; missed: %v", w.inTime, w.tests, w.medianLead, w.missed)
	if w.inTime < 18 {
		t.Errorf("clear-area in time in %d of %d", w.inTime, w.tests)
	}
	sound := soundTests(t, 4)
	t.Logf("warned: %v", sound)
	if len(sound) > 0 {
		t.Errorf("%d sound tests of 4 raised a warning", len(sound))
	}
}

func TestWatchProjectsTheLimit(t *testing.T) {
	var h hold
	for x := 0.25; x < 30*24; x += 0.25 {
		w := math.Pow(x, 0.25)
		if x >= 480 {
			w = math.Pow(480, 0.25) * (1 + 0.25*1.35*(x-480)/480)
		}
		// A micrometre-like ripple stands for what daily cycles leave.
		h.age, h.sag = append(h.age, x), append(h.sag, w+1e-4*math.Sin(2*math.Pi*x/24))
	}
	none, near := Watch(h.age, h.sag, Limits{}), Watch(h.age, h.sag, Limits{SagMM: 5.28})
	if none.CautionH == nil || none.ClearAreaH != nil {
		t.Errorf("without a limit: %+v", none)
	}
	if near.ClearAreaH == nil {
		t.Error("a limit a day away raised nothing")
	}
}
