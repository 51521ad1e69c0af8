package creep

import (
	"errors"
	"fmt"
	"math"
	"sync"

	"gaugelog/analysis/lsq"
)

// Options says which times to report.
type Options struct {
	// TimesH are the reading times after full load, h.
	TimesH []float64
	// ForecastH are times after full load of the creep step, h.
	ForecastH []float64
	// Beyond allows forecasts more than two decades beyond the data.
	Beyond bool
	// MoreH are the further durations of the may-stop table, h; nil: 24, 168
	// and 720 (a day, a week, thirty days).
	MoreH []float64
}

// Candidate is one family that was tried.
type Candidate struct {
	Model Model
	AICc  float64
	// Weight is Akaike's among the admissible families; they sum to 1.
	Weight float64
	// Delta is AICc less that of the best admissible family.
	Delta      float64
	Admissible bool
	Fit        *Fit
}

// Analysis is all this package says of a creep step.
type Analysis struct {
	// Best is the admissible fit of least AICc. Nil where none could be made:
	// Notes say why.
	Best       *Fit
	Candidates []Candidate
	// Distinguishable is false where the second-best family is within 2 of
	// the best in AICc: the readings do not choose between them.
	Distinguishable bool
	After           []Reading
	Equivalent      []Relative
	Recovery        []Recovered
	// PermanentSet is what the law of the loading part does not explain of
	// the sag left at the end of the recovery, mm; nil without an unloading.
	PermanentSet *Value
	// LoadingOnly is true where the recovery contradicts the law of the
	// loading part, so that the law was fitted to the loading part alone.
	LoadingOnly bool
	Rate        *Value // mm/d, at the end of the creep step
	Method      string // of the rate: law | local
	Stage       Stage
	// Acceleration's times are counted from the caller's origin, h.
	Acceleration Acceleration
	Forecast     []Forecast
	MayStop      []MayStop
	// Shrunk is how the interval of the same forecast shrank as the test went
	// on: MoreH negative, counted back from the end of the step.
	Shrunk []MayStop
	Notes  []Note
}

// Relative is a ratio a time after loading.
type Relative struct {
	AfterH float64
	Value
}

// Analyse fits every family and draws what follows. An error is bad input
// only; readings that fix no law give an Analysis with Notes and no Best.
func Analyse(in Input, o Options) (*Analysis, error) {
	if err := in.validate(); err != nil {
		return nil, err
	}
	in.compact()
	a := &Analysis{}
	unload := in.unloading()
	var whole, loading []*Fit
	var apart sync.WaitGroup // what does not wait for a law
	if unload != nil {
		part := in.until(unload.AtH)
		apart.Go(func() { loading = new(Analysis).fitAll(&part) })
	}
	apart.Go(func() { a.Acceleration = in.watch() })
	whole = a.fitAll(&in)
	apart.Wait()
	if unload == nil {
		loading = whole
		a.note("no-unloading", "the beam was not unloaded: no recovery, no permanent set, and the law is not checked against a recovery")
	}
	a.choose(whole)
	if unload != nil && a.Best != nil {
		a.recover(&in, loading, *unload, o)
	}
	if a.LoadingOnly {
		a.choose(loading)
	}
	if a.Best == nil {
		a.withoutLaw(&in, o)
		return a, nil
	}
	a.remarks()
	a.read(&in, o)
	a.stage(&in)
	a.forecast(&in, o)
	a.mayStop(&in, o)
	return a, nil
}

// withoutLaw says what can be said where no law fits: the forecasts are
// refused, but a warning of acceleration stands.
func (a *Analysis) withoutLaw(in *Input, o Options) {
	if a.Acceleration.CautionH != nil {
		a.Stage = Tertiary
	}
	_, observed, n := in.span()
	for _, after := range o.ForecastH {
		f := Forecast{AfterH: after, Label: Refused, Refused: "no law was found for these readings", ByModel: []ByModel{}}
		if n > 0 {
			f.Decades = math.Log10(after / observed)
		}
		a.Forecast = append(a.Forecast, f)
	}
}

func (a *Analysis) note(code, format string, args ...any) {
	a.Notes = append(a.Notes, Note{Code: code, Text: fmt.Sprintf(format, args...)})
}

// unloading returns the change that ends the creep step of the creep gauge,
// nil where the load stays to the end of the record.
func (in *Input) unloading() *Change {
	for _, c := range in.Series[0].Changes {
		if c.Newton < 0 && c.AtH >= in.EndH-1e-3 && c.AtH < in.Series[0].TimeH[len(in.Series[0].TimeH)-1] {
			return &c
		}
	}
	return nil
}

// until returns the input without what came at or after tH.
func (in *Input) until(tH float64) Input {
	out := *in
	out.Series = append([]Series(nil), in.Series...)
	for i := range out.Series {
		s := &out.Series[i]
		n := 0
		for n < len(s.TimeH) && s.TimeH[n] < tH {
			n++
		}
		s.TimeH, s.SagMM, s.U = s.TimeH[:n], s.SagMM[:n], s.U[:n]
		if s.N != nil {
			s.N = s.N[:n]
		}
		k := 0
		for k < len(s.Changes) && s.Changes[k].AtH < tH {
			k++
		}
		s.Changes = s.Changes[:max(k, 1)]
		if s.Parts != nil {
			s.Parts = s.Parts[:len(s.Changes)]
		}
	}
	out.EndH = min(in.EndH, tH)
	return out
}

// fitAll fits the families that the readings allow, in the order of Models:
// first the power law, which finds the lags, then the others side by side.
func (a *Analysis) fitAll(in *Input) []*Fit {
	models := Models()
	fits, errs := make([]*Fit, len(models)), make([]error, len(models))
	fits[0], errs[0] = fitLaw(in, models[0], nil)
	if errors.Is(errs[0], ErrTooFew) {
		a.note("no-law", "%v", errs[0])
		return nil
	}
	var wait sync.WaitGroup
	for i := 1; i < len(models); i++ {
		wait.Go(func() { fits[i], errs[i] = fitLaw(in, models[i], fits[0]) })
	}
	wait.Wait()
	var out []*Fit
	for i, f := range fits {
		switch {
		case errors.Is(errs[i], lsq.ErrRank):
			a.note("not-identifiable", "%s: %v", models[i], errs[i])
		case errs[i] != nil:
			a.note("no-law", "%s: %v", models[i], errs[i])
		default:
			out = append(out, f)
		}
	}
	return out
}

// choose sets Candidates, Best and Distinguishable.
func (a *Analysis) choose(fits []*Fit) {
	a.Best, a.Candidates, a.Distinguishable = nil, nil, false
	level(fits)
	for _, f := range fits {
		if f.admissible() && (a.Best == nil || f.AICc < a.Best.AICc) {
			a.Best = f
		}
	}
	if a.Best == nil {
		if len(fits) > 0 {
			a.note("no-law", "no law that sags steadily under a steady load fits these readings")
		}
		return
	}
	var sum float64
	second := math.MaxFloat64
	for _, f := range fits {
		c := Candidate{Model: f.Model, AICc: f.AICc, Delta: f.AICc - a.Best.AICc, Admissible: f.admissible(), Fit: f}
		if c.Admissible {
			c.Weight = math.Exp(-c.Delta / 2)
			sum += c.Weight
			if f != a.Best {
				second = min(second, c.Delta)
			}
		}
		a.Candidates = append(a.Candidates, c)
	}
	for i := range a.Candidates {
		a.Candidates[i].Weight /= sum
	}
	a.Distinguishable = second >= 2
}

// level makes AICc comparable: the observations are counted, and gauges
// that repeat each other discounted, as by the law that fits best.
func level(fits []*Fit) {
	var best *Fit
	for _, f := range fits {
		if f.admissible() && (best == nil || f.deviance < best.deviance) {
			best = f
		}
	}
	if best == nil {
		return
	}
	for _, f := range fits {
		f.AICc = f.aicc(best.effectiveBins(), best.shared)
	}
}

// remarks gathers the notes of the best fit.
func (a *Analysis) remarks() {
	a.Notes = append(a.Notes, a.Best.Notes...)
	if !a.Distinguishable && len(a.Candidates) > 1 {
		a.note("not-distinguishable", "the readings do not choose between %s and the next-best law; forecasts are their weighted average", a.Best.Model)
	}
}

// average returns the weighted mean over admissible laws of a figure, its
// uncertainty within the laws and that between them.
func (a *Analysis) average(figure func(f *Fit) Value) (mean, within, between float64) {
	for _, c := range a.Candidates {
		mean += c.Weight * zeroWeight(c, figure).Value
	}
	for _, c := range a.Candidates {
		v := zeroWeight(c, figure)
		within += c.Weight * v.U * v.U
		between += c.Weight * (v.Value - mean) * (v.Value - mean)
	}
	return mean, math.Sqrt(within), math.Sqrt(between)
}

// zeroWeight leaves out laws without weight, whose figures may be wild.
func zeroWeight(c Candidate, figure func(f *Fit) Value) Value {
	if c.Weight == 0 {
		return Value{}
	}
	return figure(c.Fit)
}
