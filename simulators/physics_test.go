package simulators

import (
	"math"
	"math/rand/v2"
	"testing"

	"gaugelog/simulators/creep"
	"gaugelog/simulators/statics"
)

// laws are one of each kind.
var laws = map[string]creep.Law{
	"none":     {},
	"power":    {Power: []creep.Power{{Amplitude: 0.085, N: 0.23}}},
	"steep":    {Power: []creep.Power{{Amplitude: 0.3, N: 0.1}}},
	"log":      {Log: []creep.Delayed{{Amplitude: 0.05, Tau: 60}}},
	"burgers":  {Kelvin: []creep.Delayed{{Amplitude: 0.2, Tau: 7200}}, Flow: 1e-7},
	"chain":    {Kelvin: []creep.Delayed{{Amplitude: 0.1, Tau: 300}, {Amplitude: 0.1, Tau: 30000}, {Amplitude: 0.2, Tau: 3e6}}},
	"tertiary": {Power: []creep.Power{{Amplitude: 0.085, N: 0.23}}, Tertiary: creep.Tertiary{Amplitude: 0.01, From: 2e5, Growth: 1e5}},
}

func plank(t testing.TB, law creep.Law) *beam {
	t.Helper()
	l, err := statics.New([]statics.Support{{At: 300}, {At: 2400}})
	if err != nil {
		t.Fatal(err)
	}
	return &beam{layout: l, bending: 7.554e9, shear: 3.281e6, law: law, compliance: []float64{2.5e-4, 2.5e-4}, crushing: []float64{0, 1e-4}}
}

// TestInterpolation compares what is read from the grid with the closed form
// at random instants: below 0.05 micrometre once the load hangs.
func TestInterpolation(t *testing.T) {
	loads := []*pusher{
		{where: statics.Load{From: 1000, To: 1000}, changes: []change{{3600, 3602, 180}, {4000, 4003, 150}, {5e5, 5e5 + 2, -330}}},
		{where: statics.Load{From: 1500, To: 1900}, changes: []change{{3800, 3802, 200}}},
	}
	shifts := []shift{{support: 1, from: 7000, to: 7600, by: 0.4}}
	tl := &timeline{loads: loads, shifts: shifts}
	v := view{seat: -1, terms: []viewTerm{{1300, 1}}}
	r := rand.New(rand.NewPCG(1, 2))
	for name, law := range laws {
		b := plank(t, law)
		res := newResponse(b, loads, nil, shifts, tl.moments(), 6e5, []view{v})
		worst := 0.0
		for range 20000 {
			from := []float64{3602, 3802, 4003, 7600, 5e5 + 2}[r.IntN(5)]
			at := from + math.Exp(r.Float64()*math.Log(9e4))
			want := b.shifted(v, shifts, at)
			for _, l := range loads {
				creeping, rigid := b.effect(v, l.where)
				want += creeping*b.spread(l, at) + rigid*l.force(at)
			}
			got := res.curves[0].at(res.grid, res.grid.find(at, 0), at)
			worst = math.Max(worst, math.Abs(got-want))
		}
		t.Logf("%s: %.2g mm, %d nodes", name, worst, len(res.grid.times))
		if worst > 5e-5 {
			t.Errorf("%s: interpolation is off by up to %.3g mm", name, worst)
		}
	}
}

// TestSprings checks the springs' forces against the flexibility method done
// by hand: at once the springs solve w = w0/(1 + k c), and later each stays
// -k times what its own place shows.
func TestSprings(t *testing.T) {
	loads := []*pusher{{where: statics.Load{From: 1350, To: 1350}, changes: []change{{100, 100.05, 300}}}}
	tl := &timeline{loads: loads}
	v := view{seat: -1, terms: []viewTerm{{1350, 1}}}
	for _, k := range []float64{0.02, 5, 40} {
		b := plank(t, creep.Law{})
		creeping, rigid := b.effect(v, statics.Load{From: 1350, To: 1350})
		c := creeping + rigid
		res := newResponse(b, loads, []spring{{at: 1350, stiffness: k}}, nil, tl.moments(), 1e5, []view{v})
		got := res.curves[0].at(res.grid, res.grid.find(5e4, 0), 5e4)
		if want := 300 * c / (1 + k*c); math.Abs(got-want) > 1e-9 {
			t.Errorf("k %g: %.12g mm, want %.12g", k, got, want)
		}
	}
	// With a Kelvin law the spring and the beam come to rest where the spring
	// holds the fully crept beam: w = w1/(1 + k c1), c1 the final compliance.
	b := plank(t, creep.Law{Kelvin: []creep.Delayed{{Amplitude: 0.5, Tau: 1000}}})
	creeping, rigid := b.effect(v, statics.Load{From: 1350, To: 1350})
	c := creeping*1.5 + rigid
	res := newResponse(b, loads, []spring{{at: 1350, stiffness: 5}}, nil, tl.moments(), 1e6, []view{v})
	got := res.curves[0].at(res.grid, res.grid.find(9e5, 0), 9e5)
	if want := 300 * c / (1 + 5*c); math.Abs(got-want) > 1e-5 {
		t.Errorf("crept: %.9g mm, want %.9g", got, want)
	}
}

// TestFriction: the plunger's friction holds back on the way down and turns
// when the load goes.
func TestFriction(t *testing.T) {
	b := plank(t, creep.Law{})
	loads := []*pusher{{where: statics.Load{From: 1350, To: 1350}, changes: []change{{100, 102, 300}, {200, 202, 50}, {300, 302, -350}}}}
	tl := &timeline{loads: loads}
	f := b.frictions(loads, []spring{{at: 1300, friction: 0.2}}, tl.moments())
	if len(f) != 1 || len(f[0].changes) != 2 {
		t.Fatalf("frictions %+v", f)
	}
	for at, want := range map[float64]float64{50: 0, 150: -0.2, 250: -0.2, 350: 0.2} {
		if got := f[0].force(at); math.Abs(got-want) > 1e-12 {
			t.Errorf("at %g s: %g N, want %g", at, got, want)
		}
	}
}

// TestLag compares the lagged swing with a step-by-step first-order filter
// once that has settled.
func TestLag(t *testing.T) {
	room := TruthSwing{Mean: 20, Swing: 2, Trend: 0.3, Peak: 3600}.swing()
	c := newClimate(-0.0025, room, 5400)
	const dt = 5.0
	filtered := room.at(-40 * 86400)
	for at := -40 * 86400.0; at < 2*86400; at += dt {
		filtered += (1 - math.Exp(-dt/5400)) * (room.at(at+dt/2) - filtered)
		if at >= 0 {
			want := -0.0025 * (filtered - 20)
			if got := c.at(at + dt); math.Abs(got-want) > 1e-6 {
				t.Fatalf("at %g s: %.8f mm, filter %.8f", at+dt, got, want)
			}
		}
	}
}
