package creep

import (
	"math"
	"math/rand/v2"
	"testing"
)

// Two gauges with their own load histories share one law; what they have in
// common in their residuals must widen the uncertainty.
func TestJointFit(t *testing.T) {
	p := ladder()
	p.coarse = true
	in := p.input()
	rng := rand.New(rand.NewPCG(8, 8))
	second := Series{Name: "quarter", TimeH: in.Series[0].TimeH, U: in.Series[0].U, ZeroU: 0.0005}
	for _, c := range p.steps {
		second.Changes = append(second.Changes, Change{AtH: c.AtH, RampH: c.RampH, Newton: 0.7 * c.Newton})
	}
	for _, at := range second.TimeH {
		second.SagMM = append(second.SagMM, 0.7*p.truth(at)+p.noise*rng.NormFloat64()+0.0003)
	}
	in.Series = append(in.Series, second)
	in.Drifts = []Drift{{Name: "drift of quarter", Series: 1}}
	alone, err := FitLaw(Input{Series: in.Series[:1], FullH: in.FullH, EndH: in.EndH, LoadN: in.LoadN}, Power)
	if err != nil {
		t.Fatal(err)
	}
	both, err := FitLaw(in, Power)
	if err != nil {
		t.Fatal(err)
	}
	n, own := param(t, both, "n"), param(t, alone, "n")
	if math.Abs(n.Value-p.n) > 4*n.U || n.U > own.U {
		t.Errorf("n %g u %g, alone %g u %g", n.Value, n.U, own.Value, own.U)
	}
	for _, x := range both.Nuisance {
		want := 0.0
		if x.Kind == "zero" {
			want = 0.0003
		}
		if math.Abs(x.Value-want) > 4*x.U {
			t.Errorf("%s %g u %g, true %g", x.Name, x.Value, x.U, want)
		}
	}
	// The same gauge twice is worth no more than once.
	in.Series[1] = in.Series[0]
	in.Drifts = nil
	twice, err := FitLaw(in, Power)
	if err != nil {
		t.Fatal(err)
	}
	if r := param(t, twice, "n").U / own.U; r < 0.95 || r > 1.1 {
		t.Errorf("counted twice, u of n is %.2f of itself", r)
	}
}

// The same input gives the same bits, although families run side by side.
func TestRerunsAreBitEqual(t *testing.T) {
	p := ladder()
	p.coarse = true
	p.temperature, p.lag = -0.0025, 1.5
	var first *Analysis
	for range 2 {
		a, err := Analyse(p.input(), Options{TimesH: readTimes, ForecastH: []float64{1000}})
		if err != nil {
			t.Fatal(err)
		}
		if first == nil {
			first = a
			continue
		}
		for i, c := range a.Candidates {
			if math.Float64bits(c.AICc) != math.Float64bits(first.Candidates[i].AICc) {
				t.Errorf("%s: %v and %v", c.Model, c.AICc, first.Candidates[i].AICc)
			}
		}
		if math.Float64bits(a.Forecast[0].Sag.U) != math.Float64bits(first.Forecast[0].Sag.U) {
			t.Errorf("forecasts differ: %v %v", a.Forecast[0], first.Forecast[0])
		}
	}
}
