package creep

import (
	"fmt"
	"math"

	"gaugelog/analysis/lsq"
)

// Label says how far a forecast may be trusted.
type Label string

// The labels, by decades of time beyond the data.
const (
	Plain       Label = "plain"       // to half a decade
	Caution     Label = "caution"     // to one decade
	Informative Label = "informative" // to two decades, or forced: not for acceptance
	Refused     Label = "refused"     // beyond two decades
)

// Forecast is the sag of the creep gauge had the creep step's load stayed.
type Forecast struct {
	AfterH float64 // after full load of the creep step, h
	// Decades beyond the data: log10 of AfterH over the time observed.
	Decades float64
	Label   Label
	// Refused is the reason, empty where a figure stands.
	Refused string
	Sag     Value   // mm, averaged over the laws; u is all of the parts below
	Lo, Hi  float64 // 95 % limits, mm
	// UWithin is the laws' own, UBetween the spread between them, UResidual
	// the correlated wander of the readings about the law, mm.
	UWithin, UBetween, UResidual float64
	ByModel                      []ByModel
}

// ByModel is one law's own forecast, mm.
type ByModel struct {
	Model Model
	Sag   Value
}

// MayStop is what more time would buy for one forecast.
type MayStop struct {
	MoreH     float64
	ForecastH float64
	// U is the forecast's standard uncertainty, mm, Width that of its 95 %
	// interval; the spread between laws is taken as it is now, so both are rather
	// too wide than too narrow.
	U, Width float64
}

// label says how a forecast decades beyond the data is to be read, rounded
// to a hundredth of a decade: 1680 h after 167.7 h is one decade.
func label(decades float64) Label {
	decades = math.Round(decades*100) / 100
	switch {
	case decades <= 0.5:
		return Plain
	case decades <= 1:
		return Caution
	case decades <= 2:
		return Informative
	}
	return Refused
}

// steady returns the creep gauge's load history up to the creep step, which
// then stays.
func (in *Input) steady() []Change {
	c := in.Series[0].Changes
	n := 0
	for n < len(c) && c[n].AtH < in.EndH-1e-3 {
		n++
	}
	return c[:n]
}

// sagSteady is the sag at tH had the load stayed.
func (f *Fit) sagSteady(tH float64, steady []Change) Value {
	v, g := f.gradient(tH, steady)
	return Value{v, lsq.PropagateU(f.inner, g)}
}

func (a *Analysis) forecast(in *Input, o Options) {
	_, observed, _ := in.span()
	steady := in.steady()
	for _, after := range o.ForecastH {
		f := Forecast{AfterH: after, Decades: math.Log10(after / observed), ByModel: []ByModel{}}
		f.Label = label(f.Decades)
		if f.Label == Refused {
			switch {
			case !o.Beyond:
				f.Refused = fmt.Sprintf("%.1f decades beyond the data; no law can be trusted beyond two, for which the load must have hung for %s (--beyond forces it)", f.Decades, daysWords(after/100))
			case a.admissibleLaws() < 2:
				f.Refused = fmt.Sprintf("%.1f decades beyond the data, and only one law to set side by side", f.Decades)
			default:
				f.Label = Informative
			}
		}
		if f.Refused == "" {
			a.fillForecast(&f, in.FullH+after, steady)
		}
		a.Forecast = append(a.Forecast, f)
	}
}

// daysWords says a time of hours in words, in days from one on.
func daysWords(h float64) string {
	if h < 24 {
		return fmt.Sprintf("%.3g h", h)
	}
	return fmt.Sprintf("%.3g d", h/24)
}

func (a *Analysis) admissibleLaws() (n int) {
	for _, c := range a.Candidates {
		if c.Admissible {
			n++
		}
	}
	return n
}

func (a *Analysis) fillForecast(f *Forecast, tH float64, steady []Change) {
	at := func(fit *Fit) Value { return fit.sagSteady(tH, steady) }
	f.Sag.Value, f.UWithin, f.UBetween = a.average(at)
	f.UResidual = a.Best.SlowMM
	f.Sag.U = math.Sqrt(f.UWithin*f.UWithin + f.UBetween*f.UBetween + f.UResidual*f.UResidual)
	k := a.Best.Coverage()
	f.Lo, f.Hi = f.Sag.Value-k*f.Sag.U, f.Sag.Value+k*f.Sag.U
	for _, c := range a.Candidates {
		if c.Admissible {
			f.ByModel = append(f.ByModel, ByModel{Model: c.Model, Sag: at(c.Fit)})
		}
	}
}
