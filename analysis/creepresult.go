package analysis

import (
	"cmp"
	"math"
	"slices"

	"gaugelog/analysis/creep"
	"gaugelog/analysis/history"
	"gaugelog/config"
)

// emptyCreep is the section of a run that shows no creep.
func emptyCreep(rig *config.Rig) Creep {
	return Creep{
		Parameters: map[string]Q{}, Candidates: []Candidate{}, After: []After{}, Equivalent: []Equivalent{},
		Recovery: []Recovery{}, Forecast: []Forecast{}, MayStop: []MayStop{}, InitialAfterS: rig.Read.InitialAfter.Value,
	}
}

// creepOptions are the times the rig asks for.
func creepOptions(rig *config.Rig) creep.Options {
	o := creep.Options{}
	for _, t := range rig.Read.Times {
		o.TimesH = append(o.TimesH, t.Value/3600)
	}
	for _, t := range rig.Forecast {
		o.ForecastH = append(o.ForecastH, t.Value/3600)
	}
	return o
}

// drawnForecasts are times between the data's end and the farthest forecast
// within two decades, h, so that the plot's line beyond the data is smooth.
func drawnForecasts(rig *config.Rig, lastH float64) []float64 {
	far := 0.0
	for _, t := range rig.Forecast {
		if h := t.Value / 3600; h <= 100*lastH {
			far = max(far, h)
		}
	}
	var out []float64
	const n = 16
	for i := 1; i < n && far > lastH; i++ {
		out = append(out, lastH*math.Pow(far/lastH, float64(i)/n))
	}
	return out
}

func valueQ(v creep.Value, unit string) Q { return quantity(v.Value, v.U, unit) }

func valueQOrNil(v *creep.Value, unit string) *Q {
	if v == nil || math.IsNaN(v.Value) {
		return nil
	}
	q := valueQ(*v, unit)
	return &q
}

// creepOf renders the creep analysis.
func creepOf(r *Result, h *history.History, t *creepTask, own instrument, shared common, step string, a *creep.Analysis) Creep {
	c := emptyCreep(h.Rig)
	c.Gauge, c.Step = h.Rig.Gauges[t.gauge].Name, step
	c.Acceleration = Acceleration{
		MinimumTime: t.instantOf(a.Acceleration.MinimumH), CautionTime: t.instantOf(a.Acceleration.CautionH),
		ClearAreaTime: t.instantOf(a.Acceleration.ClearAreaH),
	}
	if a.Best == nil { // a warning needs no law
		c.After, c.Stage = afterWithoutLaw(r, t, own), string(a.Stage)
		c.Forecast = forecastsOf(h, t, own, a)
		return c
	}
	c.Model = string(a.Best.Model)
	for _, p := range a.Best.Parameters {
		c.Parameters[p.Name] = shared.parameter(p)
	}
	for _, m := range a.Candidates {
		if m.Fit != nil && !math.IsNaN(m.AICc) && !math.IsInf(m.AICc, 0) {
			c.Candidates = append(c.Candidates, Candidate{Model: string(m.Model), AICc: m.AICc, Weight: m.Weight})
		}
	}
	initial := initialOf(a)
	for _, v := range a.After {
		sag := valueQ(v.Sag, "mm")
		c.After = append(c.After, After{
			AfterS: secondsOf(v.AfterH), Sag: *own.widen(&sag, t.gauge), Modelled: v.Modelled,
			Relative: own.relative(v.Relative, t.gauge, initial), Coefficient: own.coefficient(v.Coefficient, t.gauge, initial),
		})
	}
	for _, v := range a.Equivalent {
		c.Equivalent = append(c.Equivalent, Equivalent{AfterS: secondsOf(v.AfterH), Relative: *own.relative(&v.Value, t.gauge, initial)})
	}
	c.Rate, c.Method, c.Stage = shared.sagRate(valueQOrNil(a.Rate, "mm/d")), a.Method, string(a.Stage)
	if !t.below {
		c.Recovery = recoveryOf(t, own, a)
		c.PermanentSet = valueQOrNil(a.PermanentSet, "mm")
	}
	c.Forecast = forecastsOf(h, t, own, a)
	c.MayStop = mayStopOf(own, t.gauge, a)
	f := a.Best
	c.Fit = &CreepFit{RMSmm: f.RMSmm, N: f.N, NEffective: f.NEffective, Lag1: f.Lag1}
	for _, p := range f.Parameters {
		// A Kelvin chain's elements may be 0 without anything being amiss.
		c.Fit.AtBound = c.Fit.AtBound || p.AtBound && f.Model != creep.KelvinChain
	}
	return c
}

// recoveryOf renders what came back. Where less hung in the end than at the
// baseline (see steps.Findings.BelowBaseline), what is left of the sag is no
// measure of recovery, for the beam rises above its zero: creepOf leaves it out.
func recoveryOf(t *creepTask, own instrument, a *creep.Analysis) []Recovery {
	out := []Recovery{}
	before := beforeUnloading(a)
	for _, v := range a.Recovery {
		left := valueQ(v.Residual, "mm")
		out = append(out, Recovery{AfterS: secondsOf(v.AfterH), Recovered: *own.share(v.Share, t.gauge, before), Residual: *own.widen(&left, t.gauge)})
	}
	return out
}

// initialOf is the sag that relative creep divides by, mm; 0 where none was read.
func initialOf(a *creep.Analysis) float64 {
	for _, v := range a.After {
		if v.Relative != nil && v.Relative.Value != 0 {
			return v.Sag.Value / v.Relative.Value
		}
	}
	return 0
}

// beforeUnloading is the sag that recovery divides by, mm.
func beforeUnloading(a *creep.Analysis) float64 {
	for _, v := range a.Recovery {
		if left := 1 - v.Share.Value; left != 0 {
			return v.Residual.Value / left
		}
	}
	return 0
}

// relative widens a ratio to the initial sag; at the initial sag's own time it
// is 1 by definition and keeps no uncertainty.
func (n instrument) relative(v *creep.Value, g int, initial float64) *Q {
	q := valueQOrNil(v, "1")
	if q == nil || q.Value == 1 {
		return q
	}
	return n.ratio(q, g, initial)
}

// coefficient is relative less 1 with the same uncertainty.
func (n instrument) coefficient(v *creep.Value, g int, initial float64) *Q {
	q := valueQOrNil(v, "1")
	if q == nil || q.Value == 0 {
		return q
	}
	q.Value++
	n.ratio(q, g, initial)
	q.Value--
	return q
}

// share widens a recovered share: 1 less a ratio of sags.
func (n instrument) share(v creep.Value, g int, before float64) *Q {
	q := valueQ(v, "1")
	q.Value = 1 - q.Value
	n.ratio(&q, g, before)
	q.Value = 1 - q.Value
	return &q
}

// secondsOf turns hours back into the seconds they came from.
func secondsOf(h float64) float64 { return math.Round(h*3600*1e6) / 1e6 }

func (t *creepTask) instantOf(h *float64) *string {
	if h == nil {
		return nil
	}
	s := instant(t.origin + int64(*h*float64(hour)))
	return &s
}

// forecastsOf renders the forecasts that the rig asks for; those behind them
// are for the plot.
func forecastsOf(h *history.History, t *creepTask, own instrument, a *creep.Analysis) []Forecast {
	out := []Forecast{}
	for i, v := range a.Forecast[:min(len(a.Forecast), len(h.Rig.Forecast))] {
		out = append(out, forecastOf(h.Rig, own, t.gauge, i, v))
	}
	return out
}

// forecastOf renders a forecast; its limits take the gauge's own uncertainty
// in by the same coverage factor.
func forecastOf(rig *config.Rig, own instrument, gauge, i int, v creep.Forecast) Forecast {
	f := Forecast{AfterS: secondsOf(v.AfterH), Decades: v.Decades, Label: string(v.Label), Refused: v.Refused, ByModel: []ByModel{}}
	if i < len(rig.Forecast) {
		f.After = rig.Forecast[i].Shown
	}
	if v.Refused == "" {
		q := valueQ(v.Sag, "mm")
		k := 2.0
		if v.Sag.U > 0 {
			k = (v.Hi - v.Lo) / (2 * v.Sag.U)
		}
		own.widen(&q, gauge)
		lo, hi := v.Lo, v.Hi
		if q.U != nil {
			lo, hi = q.Value-k**q.U, q.Value+k**q.U
		}
		f.Sag, f.Lo95, f.Hi95 = &q, &lo, &hi
	}
	for _, m := range v.ByModel {
		f.ByModel = append(f.ByModel, ByModel{Model: string(m.Model), Sag: valueQ(m.Sag, "mm")})
	}
	return f
}

// mayStopOf renders what time bought and would buy, with the gauge's own
// uncertainty as in the forecast itself.
func mayStopOf(own instrument, gauge int, a *creep.Analysis) []MayStop {
	out := []MayStop{}
	for _, v := range append(slices.Clone(a.Shrunk), a.MayStop...) {
		far := Q{}
		for _, f := range a.Forecast {
			if f.AfterH == v.ForecastH {
				far = valueQ(creep.Value{Value: f.Sag.Value, U: v.U}, "mm")
			}
		}
		width := v.Width
		if own.widen(&far, gauge); far.U != nil && v.U > 0 {
			width *= *far.U / v.U
		}
		out = append(out, MayStop{MoreS: secondsOf(v.MoreH), ForecastAfterS: secondsOf(v.ForecastH), ForecastWidth: quantity(width, 0, "mm")})
	}
	return out
}

// afterWithoutLaw is the creep gauge's sag at the times asked for where no law
// was found: as the step has it, not compensated for temperature.
func afterWithoutLaw(r *Result, t *creepTask, own instrument) []After {
	out := []After{}
	if t.step >= len(r.Steps) || t.gauge >= len(r.Steps[t.step].Gauges) {
		return out
	}
	g := r.Steps[t.step].Gauges[t.gauge]
	for _, at := range g.SagAt {
		v := After{AfterS: at.AfterS, Sag: at.Sag}
		if i := g.Initial; i != nil && i.Value != 0 {
			q := quantity(at.Sag.Value/i.Value, 0, "1")
			if at.AfterS != r.Creep.InitialAfterS {
				own.ratio(&q, t.gauge, i.Value)
			}
			c := q
			c.Value--
			v.Relative, v.Coefficient = &q, &c
		}
		out = append(out, v)
	}
	return out
}

// lawPoints is how many points of the law a plot gets within the data.
const lawPoints = 120

// addLaw draws the law with its band, and beyond the data as far as the
// forecasts reach that were not refused.
func addLaw(r *Result, h *history.History, t *creepTask, a *creep.Analysis) {
	r.Series.CreepFullS, r.Series.CreepEndS = seconds(t.full-h.First), seconds(t.end-h.First)
	if a.Best == nil {
		return
	}
	last := (t.in.EndH - t.in.FullH) * 3600
	first := math.Min(5, last/10)
	for i := range lawPoints {
		after := first * math.Pow(last/first, float64(i)/float64(lawPoints-1))
		at := t.in.FullH + after/3600
		lo, hi := a.Best.Band(at)
		if v := a.Best.At(at); !math.IsNaN(v + lo + hi) {
			r.Series.Law = append(r.Series.Law, LawPoint{AfterS: after, SagMM: v, Lo95: lo, Hi95: hi})
		}
	}
	addCreepPoints(r, t, a.Best)
	slices.SortFunc(a.Forecast, func(x, y creep.Forecast) int { return cmp.Compare(x.AfterH, y.AfterH) })
	for _, f := range a.Forecast {
		if f.Refused == "" && f.AfterH*3600 > last {
			r.Series.Law = append(r.Series.Law, LawPoint{AfterS: f.AfterH * 3600, SagMM: f.Sag.Value, Lo95: f.Lo, Hi95: f.Hi, Beyond: true})
		}
	}
}

// addCreepPoints keeps the bins of the creep step, every k-th of very many.
func addCreepPoints(r *Result, t *creepTask, best *creep.Fit) {
	if len(best.TimeH) == 0 || len(best.CompensatedMM) == 0 || len(best.ResidualMM) == 0 {
		return
	}
	hours, sag, rest := best.TimeH[0], best.CompensatedMM[0], best.ResidualMM[0]
	stride := max((len(hours)+mostPoints-1)/mostPoints, 1)
	for i := 0; i < min(len(hours), len(sag), len(rest)); i += stride {
		if at := hours[i]; at > t.in.FullH && at <= t.in.EndH && !math.IsNaN(sag[i]+rest[i]) {
			r.Series.Creep = append(r.Series.Creep, CreepPoint{AfterS: (at - t.in.FullH) * 3600, CompensatedMM: sag[i], ResidualMM: rest[i]})
		}
	}
}
