package steps

import (
	"math"
	"math/rand/v2"
	"testing"

	"gaugelog/analysis/history"
)

// month is a drawn test of some weeks: four to eight gauges and a reference,
// every reading kept at one a second, daily temperature and slow humidity on
// all of them, resolution, noise, beam, creep and places drawn, one marked
// load. It may hold one disturbance; what it was is the truth it is judged by.
type month struct {
	*world
	rng     *rand.Rand
	climate []func(t float64) float64 // by gauge, mm
	swell   func(t float64) float64   // relative change of all sags
	faults  []fault
	settles settling
	least   float64 // the size a disturbance must have, mm

	kind     Kind
	from, to float64 // of the disturbance, s
}

// fault disturbs one gauge from an instant on, to another or for good (to 0).
type fault struct {
	gauge    int
	from, to float64
	by       float64
	what     string // "" (by), zero, inch, freeze, stop
}

// settling is a support that goes down by mm between two instants.
type settling struct {
	right    bool
	from, to float64
	mm       float64
}

func (s settling) at(t float64) float64 {
	switch {
	case s.mm == 0 || t <= s.from:
		return 0
	case t >= s.to:
		return s.mm
	}
	f := (t - s.from) / (s.to - s.from)
	return s.mm * (1 - math.Exp(-3*f)) / (1 - math.Exp(-3)) // fast, then slower
}

// drawMonth draws an undisturbed test.
func drawMonth(seed uint64, days float64) *month {
	rng := rand.New(rand.NewPCG(seed, 9))
	w := &world{seed: seed, every: 1, length: days * 86400, compliance: 5e-5 * math.Pow(10, rng.Float64())}
	m := &month{world: w, rng: rng}
	w.span = 600 + 2400*rng.Float64()
	w.creep, w.power = 0.02+0.15*rng.Float64(), 0.15+0.2*rng.Float64()
	w.loads = []float64{w.span * (0.25 + 0.2*rng.Float64()), w.span * (0.55 + 0.2*rng.Float64())}
	res := []float64{0.001, 0.002, 0.005, 0.01}[rng.IntN(4)]
	sd := res * (0.1 + rng.Float64())
	n := 4 + rng.IntN(5)
	w.gauges = []wgauge{{at: 0}, {at: w.span}}
	for i := 2; i < n; i++ {
		// One in each equal part of the span, so that no two stand on one place.
		part := w.span * 0.8 / float64(n-2)
		w.gauges = append(w.gauges, wgauge{at: w.span*0.1 + part*(float64(i-2)+0.1+0.8*rng.Float64())})
	}
	if rng.IntN(4) == 0 {
		w.gauges[n-1].at = -w.span * (0.05 + 0.1*rng.Float64()) // an overhang
	}
	for i := range 2 {
		if rng.IntN(3) == 0 {
			w.gauges[i].sees = "seat"
		}
	}
	w.gauges = append(w.gauges, wgauge{at: w.span / 2, sees: "reference"})
	for i := range w.gauges {
		w.gauges[i].res, w.gauges[i].noise = res, sd
		if rng.IntN(3) == 0 {
			w.gauges[i].sense = "up"
		}
	}
	newton := []float64{100 + 200*rng.Float64(), 150}
	begin := 3600 + 7200*rng.Float64()
	w.changes = []wchange{{at: begin, late: 20 * rng.NormFloat64(), newton: newton, ramp: 10 * rng.Float64() * rng.Float64(), name: "s1"}}
	w.ei = 1
	deepest := 0.0
	for i := range w.gauges {
		deepest = max(deepest, newton[0]*w.sagPer(w.gauges[i].at, w.loads[0])+newton[1]*w.sagPer(w.gauges[i].at, w.loads[1]))
	}
	w.ei = deepest / (1 + 9*rng.Float64())
	m.least = max(10*max(sd, res/math.Sqrt(12)), 2*res)
	m.drawClimate()
	return m
}

// drawClimate draws daily temperature, its weather, sunny afternoons and slow
// humidity.
func (m *month) drawClimate() {
	rng := m.rng
	wave := func(day, phase float64) func(float64) float64 {
		return func(t float64) float64 { return math.Sin(2*math.Pi*t/(86400*day) + phase) }
	}
	angle := func() float64 { return 2 * math.Pi * rng.Float64() }
	phase := angle()
	daily, sun, damp := 0.02*rng.Float64(), 0.01*rng.Float64(), 0.03*rng.NormFloat64()
	weather, slow, slower := wave(3+4*rng.Float64(), angle()), wave(6+8*rng.Float64(), angle()), wave(15+20*rng.Float64(), angle())
	for range m.gauges {
		lag, share, wet := 3600*rng.Float64(), 1+0.15*rng.NormFloat64(), 1+0.1*rng.NormFloat64()
		m.climate = append(m.climate, func(t float64) float64 {
			day := math.Sin(2*math.Pi*(t-lag)/86400 + phase)
			noon := max(0, day)
			return share*(daily*day*(0.7+0.3*weather(t))+sun*noon*noon*noon*noon*max(0, weather(t)+0.3)) +
				wet*damp*(slower(t)+0.2*slow(t))
		})
	}
	swell := 0.008 * rng.Float64()
	m.swell = func(t float64) float64 { return 1 + swell*(0.5*slow(t)+0.2*wave(1, phase-0.8)(t)) }
}

// level is the sag a perfect gauge would show, and its own disturbances.
func (m *month) level(g int, t float64) float64 {
	gross, net := m.sag(g, t)
	v := 3 + gross + net*(m.swell(t)-1) + m.climate[g](t)
	if d := m.settles.at(t); d != 0 && m.gauges[g].sees != "reference" {
		x := m.gauges[g].at / m.span
		if !m.settles.right {
			x = 1 - x
		}
		v += d * x
	}
	for _, f := range m.faults {
		if f.gauge == g && f.what == "" && t > f.from && (f.to == 0 || t <= f.to) {
			v += f.by
		}
	}
	return v
}

// shows returns what a gauge's faults make of its indication; nil for nothing.
func (m *month) shows(g int, sign float64) func(t, v float64) (float64, bool) {
	for _, q := range m.faults {
		if q.gauge != g || q.what == "" {
			continue
		}
		res := m.gauges[g].res
		held := math.Round(sign*m.level(g, q.from)/res) * res
		// An inch display has about the resolution of the millimetre one.
		inches := map[float64]float64{0.001: 0.00005, 0.002: 0.0001, 0.005: 0.0002, 0.01: 0.0005}[res]
		active := func(t float64) bool { return t > q.from && (q.to == 0 || t <= q.to) }
		return func(t, v float64) (float64, bool) {
			switch {
			case !active(t):
			case q.what == "zero":
				return v - held, false
			case q.what == "inch":
				return math.Round(v/25.4/inches) * inches, true
			case q.what == "freeze":
				return held, false
			case q.what == "stop":
				return sign * min(sign*v, sign*held), false
			}
			return v, false
		}
	}
	return nil
}

// stream is the test as a source of readings.
func (m *month) stream() *stream {
	s := &stream{seed: m.seed, every: m.every, length: m.length, silent: m.silent}
	for _, c := range m.changes {
		s.sharp = append(s.sharp, c.at)
	}
	if q := m.temporaryLoad; q[0] != 0 {
		s.sharp = append(s.sharp, q[1], q[2])
	}
	if m.settles.mm != 0 {
		s.sharp = append(s.sharp, m.settles.from, m.settles.to)
	}
	for g, gg := range m.gauges {
		q := streamGauge{noise: gg.noise, res: gg.res, per: 1 / gg.res, sign: 1, phase: m.every * float64(g) / float64(len(m.gauges))}
		if gg.sense == "up" {
			q.sign = -1
		}
		q.level = func(t float64) float64 { return m.level(g, t) }
		q.shows = m.shows(g, q.sign)
		for _, f := range m.faults {
			if f.gauge == g {
				q.sharp = append(q.sharp, f.from, f.to)
			}
		}
		s.gauges = append(s.gauges, q)
	}
	return s
}

// given is the test as the finder gets it.
func (m *month) given() (*history.History, Options) {
	rig := m.rig()
	return history.FromSource(history.Given{Rig: rig, Marks: m.marked(rig)}, m.stream()), Options{Influence: m.influence()}
}

// find lets the finder at it.
func (m *month) find(t *testing.T) *Findings {
	t.Helper()
	f, err := Find(m.given())
	if err != nil {
		t.Fatal(err)
	}
	return f
}
