package creep

import (
	"math"
	"testing"
)

var readTimes = []float64{1.0 / 60, 1, 24, 72, 167}

func TestAnalyseLadder(t *testing.T) {
	p := ladder()
	in := p.input()
	a, err := Analyse(in, Options{TimesH: readTimes, ForecastH: []float64{240, 1680, 8760, 87660}})
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range a.Candidates {
		t.Logf("%s AICc %.1f weight %.3g", c.Model, c.AICc, c.Weight)
	}
	t.Logf("rate %v %s, stage %s, set %v, loading only %v, notes %v", a.Rate, a.Method, a.Stage, a.PermanentSet, a.LoadingOnly, a.Notes)
	if a.Best.Model != Power || !a.Distinguishable {
		t.Errorf("best is %s", a.Best.Model)
	}
	if a.Stage != Primary || a.Acceleration.CautionH != nil {
		t.Errorf("stage %s, acceleration %+v", a.Stage, a.Acceleration)
	}
	for _, r := range a.After {
		want := p.truth(p.full + r.AfterH)
		if math.Abs(r.Sag.Value-want) > 4*r.Sag.U || r.Sag.U > 0.001 || r.Modelled {
			t.Errorf("after %g h: %g u %g, true %g, modelled %v", r.AfterH, r.Sag.Value, r.Sag.U, want, r.Modelled)
		}
		if rel := want / p.truth(p.full+1.0/60); math.Abs(r.Relative.Value-rel) > 1e-3 {
			t.Errorf("relative after %g h: %g, true %g", r.AfterH, r.Relative.Value, rel)
		}
	}
	for _, e := range a.Equivalent {
		want := (1 + 0.085*math.Pow(e.AfterH, 0.23)) / (1 + 0.085*math.Pow(1.0/60, 0.23))
		if math.Abs(e.Value.Value-want) > 4*e.U+1e-9 {
			t.Errorf("equivalent after %g h: %g u %g, true %g", e.AfterH, e.Value.Value, e.U, want)
		}
	}
	if len(a.Recovery) < 3 || a.PermanentSet == nil || math.Abs(a.PermanentSet.Value) > 4*a.PermanentSet.U || a.LoadingOnly {
		t.Errorf("recovery %+v, permanent set %+v", a.Recovery, a.PermanentSet)
	}
	steady := p
	steady.steps = p.steps[:4]
	for i, want := range []Label{Plain, Caution, Informative, Refused} {
		f := a.Forecast[i]
		t.Logf("%+v", f)
		if f.Label != want || (f.Refused != "") != (want == Refused) {
			t.Errorf("forecast %g h: %s, %s", f.AfterH, f.Label, f.Refused)
		}
		if truth := steady.truth(p.full + f.AfterH); f.Refused == "" && (truth < f.Lo || truth > f.Hi) {
			t.Errorf("forecast %g h: %g to %g, true %g", f.AfterH, f.Lo, f.Hi, truth)
		}
	}
	if len(a.MayStop) != 4 || len(a.Shrunk) < 4 {
		t.Errorf("may stop %v, shrunk %v", a.MayStop, a.Shrunk)
	}
	for i := 1; i < len(a.Shrunk); i++ {
		if a.Shrunk[i].Width > a.Shrunk[i-1].Width {
			t.Errorf("the interval grew with time: %v", a.Shrunk)
		}
	}
}

func TestPermanentSetIsFound(t *testing.T) {
	p := ladder()
	p.coarse = true
	in := p.input()
	for i, at := range in.Series[0].TimeH {
		if at > 168 {
			in.Series[0].SagMM[i] += 0.2
		}
	}
	a, err := Analyse(in, Options{TimesH: readTimes})
	if err != nil {
		t.Fatal(err)
	}
	if !a.LoadingOnly || a.PermanentSet == nil || math.Abs(a.PermanentSet.Value-0.2) > 0.01 || !hasNote(a.Notes, "recovery-not-linear") {
		t.Errorf("set %+v, notes %v", a.PermanentSet, a.Notes)
	}
	if n := param(t, a.Best, "n"); math.Abs(n.Value-0.23) > 0.005 {
		t.Errorf("n %g: the set bent the law", n.Value)
	}
	for i, at := range in.Series[0].TimeH {
		if at > 168 {
			in.Series[0].SagMM[i] -= 0.4
		}
	}
	if a, err = Analyse(in, Options{TimesH: readTimes}); err != nil || !hasNote(a.Notes, "recovery-overshoots") {
		t.Errorf("notes %v, %v", a.Notes, err)
	}
}

func TestMayStopWhileLoaded(t *testing.T) {
	p := ladder()
	p.coarse = true
	p.steps, p.last = p.steps[:4], 168
	p.noise = 0.002
	a, err := Analyse(p.input(), Options{ForecastH: []float64{1680}, TimesH: readTimes})
	if err != nil {
		t.Fatal(err)
	}
	t.Logf("%v %v", a.MayStop, a.Shrunk)
	if len(a.MayStop) != 4 || !hasNote(a.Notes, "no-unloading") {
		t.Fatalf("may stop %v, notes %v", a.MayStop, a.Notes)
	}
	for i := 1; i < 4; i++ {
		if !(a.MayStop[i].Width < a.MayStop[i-1].Width) {
			t.Errorf("more time buys nothing: %v", a.MayStop)
		}
	}
	now := a.Forecast[0].Hi - a.Forecast[0].Lo
	if math.Abs(a.MayStop[0].Width/now-1) > 0.05 {
		t.Errorf("width now %g, in the table %g", now, a.MayStop[0].Width)
	}
}

func TestTooShortIsSaid(t *testing.T) {
	p := ladder()
	p.steps, p.last, p.end = p.steps[:4], p.full+0.02, p.full+0.02
	a, err := Analyse(p.input(), Options{ForecastH: []float64{24}})
	if err != nil {
		t.Fatal(err)
	}
	if len(a.Notes) == 0 || !hasNote(a.Notes, "hold-too-short") && !hasNote(a.Notes, "no-law") {
		t.Errorf("notes %v", a.Notes)
	}
	for _, f := range a.Forecast {
		if f.Label != Refused {
			t.Errorf("a forecast %.1f decades on is %s", f.Decades, f.Label)
		}
	}
}

// A year read every ten minutes must fit as fast as any, and as well.
func TestManyBinsAreMerged(t *testing.T) {
	p := ladder()
	p.steps = p.steps[:4]
	p.last, p.end = 365*24, 365*24
	in := p.input()
	s := &in.Series[0]
	s.TimeH, s.SagMM, s.U = nil, nil, nil
	for at := p.full + 1.0/60; at < p.last; at += 1.0 / 6 {
		s.TimeH, s.SagMM, s.U = append(s.TimeH, at), append(s.SagMM, 490*(p.d0+p.d1*math.Pow(at-0.19, p.n))), append(s.U, 0.0005)
	}
	before := len(s.TimeH)
	a, err := Analyse(in, Options{ForecastH: []float64{20000}})
	if err != nil {
		t.Fatal(err)
	}
	if a.Best.N > mostBins || a.Best.N < mostBins/4 || len(in.Series[0].TimeH) != before {
		t.Errorf("%d bins of %d", a.Best.N, before)
	}
	if n := param(t, a.Best, "n"); math.Abs(n.Value-p.n) > 0.002 {
		t.Errorf("n %g", n.Value)
	}
}

func TestShortTemperatureIsLeftOut(t *testing.T) {
	p := ladder()
	p.steps, p.last, p.end = p.steps[:4], 30, 30
	p.temperature, p.lag = -0.0025, 1.5
	f, err := FitLaw(p.input(), Power)
	if err != nil {
		t.Fatal(err)
	}
	if len(f.Nuisance) != 0 || !hasNote(f.Notes, "ambient-short") {
		t.Errorf("%v %v", f.Nuisance, f.Notes)
	}
}
