package creep

import (
	"errors"
	"math"
	"math/rand/v2"
	"testing"
)

// plan is a made test: loads as in a ladder, a hold, an unloading.
type plan struct {
	d0, d1, n   float64
	steps       []Change
	full, end   float64 // h; end is the unloading, or the last reading
	last        float64
	noise       float64 // mm, of one bin
	temperature float64 // mm/K, 0: none
	lag         float64
	seed        uint64
	coarse      bool // 10 bins a decade instead of 20
}

func ladder() plan {
	ramp := 20.0 / 3600
	return plan{d0: 0.0219, d1: 0.0219 * 0.085, n: 0.23,
		steps: []Change{{0, ramp, 49, 0}, {0.1, ramp, 147, 0}, {0.2, ramp, 147, 0}, {0.3, ramp, 147, 0}, {168, ramp, -490, 0}},
		full:  0.3 + ramp, end: 168, last: 192, noise: 0.0005, seed: 1}
}

// truth evaluates the power law by midpoint sums over the ramps, which is
// other mathematics than the package's closed forms.
func (p plan) truth(t float64) float64 {
	var sag float64
	for _, c := range p.steps {
		const parts = 200
		for k := range parts {
			age := t - c.AtH - c.RampH*(float64(k)+0.5)/parts
			if age > 0 {
				sag += c.Newton / parts * (p.d0 + p.d1*math.Pow(age, p.n))
			}
		}
	}
	return sag
}

func (p plan) temperatureAt(t float64) float64 { return 20 + 2*math.Cos(2*math.Pi*t/24) }

// lagged is the exact periodic answer of a first-order lag.
func (p plan) lagged(t float64) float64 {
	w := 2 * math.Pi / 24
	a := 1 / math.Sqrt(1+w*w*p.lag*p.lag)
	return 20 + 2*a*math.Cos(w*t-math.Atan(w*p.lag))
}

// times are bins: 20 a decade after each change, at most maxGap apart.
func (p plan) times() []float64 {
	var out []float64
	for t := -0.5; t < -0.02; t += 0.05 {
		out = append(out, t)
	}
	for i, c := range p.steps {
		next := p.last
		if i+1 < len(p.steps) {
			next = p.steps[i+1].AtH
		}
		begin := c.AtH + c.RampH
		for age := 5.0 / 3600; begin+age < next; {
			out = append(out, begin+age)
			if p.coarse {
				age += min(age*0.259, 3)
			} else {
				age += min(age*0.122, 1)
			}
		}
	}
	return out
}

func (p plan) input() Input {
	rng := rand.New(rand.NewPCG(p.seed, 7))
	s := Series{Name: "mid", Changes: p.steps}
	for _, t := range p.times() {
		w := p.truth(t) + p.noise*rng.NormFloat64()
		if p.temperature != 0 {
			w += p.temperature * (p.lagged(t) - 20)
		}
		s.TimeH, s.SagMM, s.U = append(s.TimeH, t), append(s.SagMM, w), append(s.U, max(p.noise, 1e-4))
	}
	in := Input{Series: []Series{s}, FullH: p.full, EndH: p.end, LoadN: 490}
	if p.temperature != 0 {
		a := Ambient{Name: "temperature"}
		for t := -60.0; t <= p.last; t += 0.1 {
			a.TimeH, a.Value = append(a.TimeH, t), append(a.Value, p.temperatureAt(t))
		}
		in.Ambient = []Ambient{a}
		// The baseline read at the temperature then, not at 20.
		base := p.temperature * (p.lagged(-0.25) - 20)
		for i := range s.SagMM {
			in.Series[0].SagMM[i] -= base
		}
	}
	return in
}

func param(t *testing.T, f *Fit, name string) Parameter {
	t.Helper()
	for _, p := range f.Parameters {
		if p.Name == name {
			return p
		}
	}
	t.Fatalf("no parameter %s in %+v", name, f.Parameters)
	return Parameter{}
}

func hasNote(notes []Note, code string) bool {
	for _, n := range notes {
		if n.Code == code {
			return true
		}
	}
	return false
}

func TestPowerLadderIsRecovered(t *testing.T) {
	for _, temperature := range []float64{0, -0.0025} {
		p := ladder()
		p.temperature, p.lag = temperature, 1.5
		f, err := FitLaw(p.input(), Power)
		if err != nil {
			t.Fatal(err)
		}
		n, d0, d1 := param(t, f, "n"), param(t, f, "d0"), param(t, f, "d1")
		t.Logf("n %.5f(%.5f) d0 %.6f(%.6f) d1 %.6f(%.6f), rms %.6f, N %d worth %.0f, slow %.6f, lags %v, notes %v",
			n.Value, n.U, d0.Value, d0.U, d1.Value, d1.U, f.RMSmm, f.N, f.NEffective, f.SlowMM, f.Lags, f.Notes)
		if math.Abs(n.Value-p.n) > 0.005 || math.Abs(n.Value-p.n) > 4*n.U {
			t.Errorf("n %g u %g, true %g", n.Value, n.U, p.n)
		}
		for _, c := range []struct {
			q    Parameter
			true float64
		}{{d0, p.d0}, {d1, p.d1}} {
			if math.Abs(c.q.Value-c.true) > 4*c.q.U {
				t.Errorf("%s %g u %g, true %g", c.q.Name, c.q.Value, c.q.U, c.true)
			}
		}
		for _, at := range []float64{p.full + 1.0/60, p.full + 24, 167, 168.1, 190} {
			if d := f.At(at) - p.truth(at); math.Abs(d) > 0.001 {
				t.Errorf("sag at %g h is wrong by %g mm", at, d)
			}
		}
		if temperature != 0 {
			if k := f.Nuisance[0]; math.Abs(k.Value-temperature) > 4*k.U || k.U > 0.0003 {
				t.Errorf("temperature %g u %g, true %g", k.Value, k.U, temperature)
			}
			if l := f.Lags[0]; math.Abs(l.Value-1.5) > 4*l.U {
				t.Errorf("lag %g u %g, true 1.5", l.Value, l.U)
			}
		}
	}
}

func TestOffsetIsAParameter(t *testing.T) {
	p := ladder()
	in := p.input()
	for i, at := range in.Series[0].TimeH {
		if at >= 90 {
			in.Series[0].SagMM[i] += 0.062
		}
	}
	in.Offsets = []Offset{{Name: "knock", AtH: 90}}
	f, err := FitLaw(in, Power)
	if err != nil {
		t.Fatal(err)
	}
	if k := f.Nuisance[0]; math.Abs(k.Value-0.062) > 4*k.U {
		t.Errorf("offset %g u %g, true 0.062", k.Value, k.U)
	}
	if n := param(t, f, "n"); math.Abs(n.Value-0.23) > 0.005 {
		t.Errorf("n %g", n.Value)
	}
}

func TestTooFewIsAnError(t *testing.T) {
	in := ladder().input()
	s := &in.Series[0]
	s.TimeH, s.SagMM, s.U = s.TimeH[:12], s.SagMM[:12], s.U[:12]
	if _, err := FitLaw(in, Power); !errors.Is(err, ErrTooFew) {
		t.Errorf("got %v", err)
	}
	in = ladder().input()
	in.Series[0].U[3] = 0
	if _, err := FitLaw(in, Power); err == nil {
		t.Error("an uncertainty of 0 was taken")
	}
}

func TestBoundIsSaid(t *testing.T) {
	p := ladder()
	p.n = 1.1 // sags faster than any power law of the family may
	f, err := FitLaw(p.input(), Power)
	if err != nil {
		t.Fatal(err)
	}
	if !param(t, f, "n").AtBound || !hasNote(f.Notes, "n-at-bound") {
		t.Errorf("n %+v, notes %v", param(t, f, "n"), f.Notes)
	}
}

func TestOneReadingADay(t *testing.T) {
	p := ladder()
	p.last, p.end = 90*24, 90*24
	p.steps = p.steps[:4]
	rng := rand.New(rand.NewPCG(3, 3))
	in := Input{FullH: p.full, EndH: p.end, LoadN: 490, Series: []Series{{Name: "mid", Changes: p.steps}}}
	s := &in.Series[0]
	for d := range 90 {
		at := 9 + 24*float64(d)
		s.TimeH, s.SagMM, s.U = append(s.TimeH, at), append(s.SagMM, p.truth(at)+0.002*rng.NormFloat64()), append(s.U, 0.002)
	}
	f, err := FitLaw(in, Power)
	if err != nil {
		t.Fatal(err)
	}
	if !hasNote(f.Notes, "sparse-readings") {
		t.Errorf("notes %v", f.Notes)
	}
	if n := param(t, f, "n"); math.Abs(n.Value-p.n) > 4*n.U {
		t.Errorf("n %g u %g", n.Value, n.U)
	}
}
