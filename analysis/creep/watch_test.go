package creep

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"testing"
)

// room is a simulated room and how a gauge answers to it: temperature and
// humidity in daily cycles whose size changes from day to day, on weather that
// wanders over some days, each felt through a first-order lag.
type room struct {
	timeH, celsius, humidity []float64
	felt                     []float64 // mm, at timeH
}

func newRoom(rng *rand.Rand, untilH float64) room {
	var r room
	const step = 0.5
	kT, kH := -0.0025*(0.5+rng.Float64()), 0.0004*(0.5+rng.Float64())
	lagT, lagH := 0.7+3*rng.Float64(), 8+24*rng.Float64()
	phase := 6.28 * rng.Float64()
	size, weatherT, weatherH := 1.0, 0.0, 0.0
	var t0, h0 float64
	for t := -24.0; t <= untilH+step; t += step {
		if math.Mod(t+24, 24) < step {
			size = math.Abs(1 + 0.3*rng.NormFloat64())
		}
		d := math.Exp(-step / 72)
		weatherT = d*weatherT + 0.8*math.Sqrt(1-d*d)*rng.NormFloat64()
		weatherH = d*weatherH + 3*math.Sqrt(1-d*d)*rng.NormFloat64()
		w := 2*math.Pi*t/24 + phase
		c, h := 20+2*size*math.Cos(w)+weatherT, 55-4*size*math.Cos(w+0.8)+weatherH
		if len(r.timeH) == 0 {
			t0, h0 = c, h
		} else {
			t0 += (1 - math.Exp(-step/lagT)) * (c - t0)
			h0 += (1 - math.Exp(-step/lagH)) * (h - h0)
		}
		r.timeH, r.celsius, r.humidity = append(r.timeH, t), append(r.celsius, c), append(r.humidity, h)
		r.felt = append(r.felt, kT*(t0-20)+kH*(h0-55))
	}
	return r
}

// hold is a simulated hold of one load as the fit gets it: bins 20 a decade,
// at most an hour apart, in a room, with noise and a wander.
type hold struct {
	in   Input
	room room
}

// newHold simulates until untilH; creep is the sag beyond the elastic, mm.
func newHold(rng *rand.Rand, untilH float64, creep func(t float64) float64) hold {
	const elastic, load = 10.0, 490.0
	h := hold{room: newRoom(rng, untilH)}
	s := Series{Name: "mid", Changes: []Change{{Newton: load}}, ZeroU: 0.0005}
	wander, before := 0.0, -1.0
	add := func(t, sag float64) {
		d := math.Exp(-(t - before) / 3)
		wander, before = d*wander+0.0005*math.Sqrt(1-d*d)*rng.NormFloat64(), t
		sag += interpolate(h.room.timeH, h.room.felt, t) - interpolate(h.room.timeH, h.room.felt, -0.25)
		s.TimeH, s.U = append(s.TimeH, t), append(s.U, 0.0005)
		s.SagMM = append(s.SagMM, sag+wander+0.0005*rng.NormFloat64())
	}
	for t := -0.5; t < -0.02; t += 0.1 {
		add(t, 0)
	}
	for t := 1.0 / 60; t < untilH; t += min(0.122*t, 1) {
		add(t, elastic+creep(t))
	}
	h.in = Input{Series: []Series{s}, LoadN: load, EndH: untilH, Ambient: []Ambient{
		{Name: "temperature", TimeH: h.room.timeH, Value: h.room.celsius},
		{Name: "humidity", TimeH: h.room.timeH, Value: h.room.humidity, LagH: [2]float64{6, 240}},
	}}
	return h
}

// seenAt is what the analysis says at an instant, by the readings until then.
func (h hold) seenAt(t *testing.T, untilH float64) Acceleration {
	t.Helper()
	in := h.in.until(untilH)
	return in.watch()
}

type lead struct {
	tests, inTime int
	medianLead    float64 // h before collapse
	missed        []string
}

// failures simulates tests that end in a break: primary creep, then from
// onset on a rate that grows as 1/(time left). Each is judged by its readings
// up to the middle between onset and collapse, as a live analysis would.
func failures(t *testing.T, first uint64, tests int) lead {
	t.Helper()
	out := lead{tests: tests}
	var leads []float64
	for k := range tests {
		seed := first + uint64(k)
		rng := rand.New(rand.NewPCG(seed, 1234))
		life := 240 * math.Pow(9, rng.Float64()) // 10 to 90 days, h
		onset := life * (0.5 + 0.3*rng.Float64())
		n, d1 := 0.15+0.2*rng.Float64(), 0.5+0.7*rng.Float64() // mm
		rate := d1 * n * math.Pow(onset, n-1)
		middle := (onset + life) / 2
		h := newHold(rng, middle, func(x float64) float64 {
			if x < onset {
				return d1 * math.Pow(x, n)
			}
			return d1*math.Pow(onset, n) + rate*(life-onset)*math.Log((life-onset)/(life-x))
		})
		w := h.seenAt(t, middle)
		said := fmt.Sprintf("test %d: life %.0f h, onset %.0f h, middle %.0f h, ", seed, life, onset, middle)
		switch {
		case w.ClearAreaH == nil:
			caution := "nothing"
			if w.CautionH != nil {
				caution = fmt.Sprintf("caution at %.0f h alone", *w.CautionH)
			}
			out.missed = append(out.missed, said+caution)
		case *w.ClearAreaH < onset:
			out.missed = append(out.missed, said+fmt.Sprintf("too early at %.0f h", *w.ClearAreaH))
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
// warning at any of several instants a live analysis looks at them.
func soundTests(t *testing.T, first uint64, tests int) (warned []string) {
	t.Helper()
	for k := range tests {
		seed := first + uint64(k)
		rng := rand.New(rand.NewPCG(seed, 4321))
		n, d1 := 0.15+0.2*rng.Float64(), 0.5+0.7*rng.Float64()
		type jump struct{ at, size float64 }
		var jumps []jump
		for at := 24 * 14 * rng.ExpFloat64(); at < 2160; at += 24 * 14 * rng.ExpFloat64() {
			jumps = append(jumps, jump{at, 0.05 * rng.NormFloat64()})
		}
		change, share := 24+2136*rng.Float64(), 0.02*rng.Float64()
		h := newHold(rng, 2160, func(x float64) float64 {
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
		h.in.Series[0].Changes = append(h.in.Series[0].Changes, Change{AtH: change, Newton: share * 490})
		for _, day := range []float64{1.5, 2.5, 4, 8, 16, 32, 90} {
			w := h.seenAt(t, 24*day)
			if w.CautionH == nil {
				continue
			}
			said := fmt.Sprintf("test %d on day %.1f: caution at %.0f h", seed, day, *w.CautionH)
			if w.ClearAreaH != nil {
				said += fmt.Sprintf(", clear-area at %.0f h", *w.ClearAreaH)
			}
			warned = append(warned, said+fmt.Sprintf(", load change at %.0f h, knocks %.3g", change, jumps))
			break
		}
	}
	return warned
}

// The campaign runs 500 of each; here enough to see a rule that is off.
func TestWatch(t *testing.T) {
	t.Parallel()
	w := failures(t, 50000, 12)
	t.Logf("clear-area in time in %d of %d, median lead %.1f h; missed: %v", w.inTime, w.tests, w.medianLead, w.missed)
	if w.inTime < 11 {
		t.Errorf("clear-area in time in %d of %d", w.inTime, w.tests)
	}
	sound := soundTests(t, 50000, 3)
	t.Logf("warned: %v", sound)
	if len(sound) > 0 {
		t.Errorf("%d sound tests of 3 raised a warning", len(sound))
	}
}

func TestWatchProjectsTheLimit(t *testing.T) {
	var age, sag []float64
	for x := 0.25; x < 30*24; x += 0.25 {
		w := math.Pow(x, 0.25)
		if x >= 480 {
			w = math.Pow(480, 0.25) * (1 + 0.25*1.3*(x-480)/480)
		}
		// A micrometre-like ripple stands for what daily cycles leave.
		age, sag = append(age, x), append(sag, w+1e-4*math.Sin(2*math.Pi*x/24))
	}
	none, near := Watch(age, sag, Limits{}), Watch(age, sag, Limits{SagMM: 5.28})
	if none.CautionH == nil || none.ClearAreaH != nil {
		t.Errorf("without a limit: %+v", none)
	}
	if near.ClearAreaH == nil {
		t.Error("a limit a day away raised nothing")
	}
}
