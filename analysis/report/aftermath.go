package report

import (
	"fmt"
	"math"

	"gaugelog/analysis"
)

// creep is the law, its times and its forecast.
func (b *builder) creep() Section {
	c := b.r.Creep
	s := Section{ID: "creep", Title: "Creep"}
	if c.Gauge == "" {
		s.Blocks = append(s.Blocks, Paragraph{"No creep was worked out: " + b.whyMissing("creep") + "."})
		return s
	}
	s.Lead = fmt.Sprintf("Gauge %s in step %s; the sag %s after full load is the reference of every ratio.", c.Gauge, c.Step, span(c.InitialAfterS))
	for _, make := range []func() (Figure, bool){b.creepFigure, b.complianceFigure, b.rateFigure} {
		if f, ok := make(); ok {
			s.Blocks = append(s.Blocks, f)
		}
	}
	if len(c.After) > 0 {
		s.Blocks = append(s.Blocks, b.afterTable())
	}
	if c.Model == "" {
		s.Blocks = append(s.Blocks, Paragraph{"No law was fitted: " + b.whyMissing("creep") + "."})
		return s
	}
	s.Blocks = append(s.Blocks, b.lawTable())
	if f, ok := b.residualFigure(); ok {
		s.Blocks = append(s.Blocks, f)
	}
	if f, ok := b.warmthFigure(); ok {
		s.Blocks = append(s.Blocks, f)
	}
	if f := c.Fit; f != nil {
		s.Blocks = append(s.Blocks, Paragraph{fmt.Sprintf(
			"The law leaves residuals of %s %s (rms) over %d points; neighbouring residuals correlate by %s, so the points count as %s independent ones.",
			significant(f.RMSmm*b.factor("mm"), 2), b.u.of("mm"), f.N, fixed(f.Lag1, 2), fixed(f.NEffective, 0))})
	}
	if len(c.Forecast) > 0 {
		s.Blocks = append(s.Blocks, b.forecastTable())
	}
	if len(c.Candidates) > 0 {
		s.Blocks = append(s.Blocks, b.modelTable())
	}
	return s
}

func (b *builder) factor(unit string) float64 { f, _ := b.u.convert(unit); return f }

func (b *builder) afterTable() Table {
	t := Table{Caption: "Sag and creep at the asked times", Columns: []Column{
		{Name: "After full load", Text: true}, {Name: "Sag", Unit: b.u.of("mm")}, {Name: "u", Unit: b.u.of("mm")},
		{Name: "Relative creep"}, {Name: "Creep coefficient"}, {Name: "Single-load equivalent"}, {Name: "Rate", Unit: b.u.of("mm/d")},
		{Name: "Air", Unit: b.temperatureUnit()}, {Name: "Humidity", Unit: "%"}, {Name: "Source", Text: true}}}
	for _, a := range b.r.Creep.After {
		from := "readings"
		if a.Modelled {
			from = "law"
		}
		var equivalent *analysis.Q
		for i := range b.r.Creep.Equivalent {
			if b.r.Creep.Equivalent[i].AfterS == a.AfterS {
				equivalent = &b.r.Creep.Equivalent[i].Relative
			}
		}
		t.Rows = append(t.Rows, []string{span(a.AfterS), b.cell(&a.Sag), b.cellU(&a.Sag), b.cell(a.Relative), b.cell(a.Coefficient), b.cell(equivalent), b.rateAt(a.AfterS), b.celsiusAt(a.AfterS), b.humidityAt(a.AfterS), from})
	}
	t.Says = "Relative creep: sag over initial sag of the same step; coefficient: that less 1; single-load equivalent: what one load placed alone would show, from the law; rate: the law's slope. Air: the first probe that reads it."
	return t
}

func (b *builder) lawTable() Table {
	c := b.r.Creep
	t := Table{Caption: "The law: " + lawWords(c.Model), Columns: []Column{{Name: "Parameter", Text: true}, {Name: "Value", Text: true}}}
	for _, k := range sortedKeys(c.Parameters) {
		q := c.Parameters[k]
		t.Rows = append(t.Rows, []string{k, b.with(&q)})
	}
	if c.Rate != nil {
		t.Rows = append(t.Rows, []string{"rate at the step's end (" + c.Method + ")", b.with(c.Rate)})
	}
	if c.Stage != "" {
		t.Rows = append(t.Rows, []string{"stage", b.stageWords()})
	}
	t.Says = "Sag of the creep gauge per newton of total load in the creep step's pattern, t in hours, over the whole load history by superposition."
	return t
}

func lawWords(model string) string {
	switch model {
	case "power":
		return "d0 + d1 t^n"
	case "log":
		return "d0 + d1 ln(1 + t/tau)"
	case "standard-solid":
		return "d0 + d1 (1 − exp(−t/tau))"
	case "burgers":
		return "d0 + d1 (1 − exp(−t/tau)) + flow t"
	case "kelvin-chain":
		return "d0 + sum of dj (1 − exp(−t/tauj))"
	}
	return model
}

func (b *builder) forecastTable() Table {
	mm := b.u.of("mm")
	t := Table{Caption: "Forecast", Columns: []Column{
		{Name: "After full load", Text: true}, {Name: "Sag", Unit: mm}, {Name: "Lower 95 %", Unit: mm}, {Name: "Upper 95 %", Unit: mm},
		{Name: "Decades beyond the data"}, {Name: "Standing", Text: true}}}
	f := b.factor("mm")
	for _, p := range b.r.Creep.Forecast {
		lo, hi, standing := "–", "–", forecastWords(p.Label)
		if p.Lo95 != nil && p.Hi95 != nil {
			d := decimalsFor((*p.Hi95 - *p.Lo95) * f / 4)
			lo, hi = fixed(*p.Lo95*f, d), fixed(*p.Hi95*f, d)
		}
		if p.Refused != "" {
			standing = p.Refused
		}
		t.Rows = append(t.Rows, []string{span(p.AfterS), b.cell(p.Sag), lo, hi, fixed(p.Decades, 2), standing})
	}
	t.Says = "The limits hold the law's and the gauge's uncertainty; a law that does not fit this material beyond the data is not in them."
	return t
}

// modelTable holds the laws against each other, with what each would forecast.
func (b *builder) modelTable() Table {
	c := b.r.Creep
	t := Table{Caption: "The laws compared", Columns: []Column{
		{Name: "Law", Text: true}, {Name: "Sag per load", Text: true}, {Name: "AICc less the best"}, {Name: "Weight"}}}
	var shown []analysis.Forecast
	for _, f := range c.Forecast {
		if len(f.ByModel) > 0 {
			shown = append(shown, f)
			t.Columns = append(t.Columns, Column{Name: "Sag at " + span(f.AfterS), Unit: b.u.of("mm")})
		}
	}
	best := math.Inf(1)
	for _, m := range c.Candidates {
		best = min(best, m.AICc)
	}
	for _, m := range c.Candidates {
		name := m.Model
		if name == c.Model {
			name += " (chosen)"
		}
		row := []string{name, lawWords(m.Model), fixed(m.AICc-best, 1), fixed(m.Weight, 3)}
		for _, f := range shown {
			cell := "–"
			for _, v := range f.ByModel {
				if v.Model == m.Model {
					cell = b.cell(&v.Sag)
				}
			}
			row = append(row, cell)
		}
		t.Rows = append(t.Rows, row)
	}
	t.Says = "AICc: the corrected Akaike criterion; the weight is what the readings alone say for a law among these. Where laws that fit alike forecast apart, no forecast is safe."
	return t
}

// recovery is what came back after unloading.
func (b *builder) recovery() Section {
	s := Section{ID: "recovery", Title: "Recovery"}
	c := b.r.Creep
	if len(c.Recovery) == 0 {
		s.Blocks = append(s.Blocks, Paragraph{"No recovery was worked out: no unloading with readings at the asked times was found."})
		return s
	}
	t := Table{Caption: "After unloading", Columns: []Column{
		{Name: "After unloading", Text: true}, {Name: "Recovered share"}, {Name: "u"}, {Name: "Still sagged", Unit: b.u.of("mm")}, {Name: "u", Unit: b.u.of("mm")}}}
	for _, r := range c.Recovery {
		t.Rows = append(t.Rows, []string{span(r.AfterS), b.cell(&r.Recovered), b.cellU(&r.Recovered), b.cell(&r.Residual), b.cellU(&r.Residual)})
	}
	t.Says = "Shares are of the sag just before unloading."
	s.Blocks = append(s.Blocks, t)
	if c.PermanentSet != nil {
		s.Blocks = append(s.Blocks, Paragraph{"Permanent set, what the law of the loading part does not explain: " + b.with(c.PermanentSet) + "."})
	}
	return s
}

// surroundings is temperature, humidity, drift and supports.
func (b *builder) surroundings() Section {
	s := Section{ID: "surroundings", Title: "Surroundings, drift and supports"}
	if f, ok := b.ambientFigure(); ok {
		s.Blocks = append(s.Blocks, f)
	} else {
		s.Blocks = append(s.Blocks, Paragraph{"Neither temperature nor humidity was recorded; their part in the sag is not known."})
	}
	if f, ok := b.overlayFigure(); ok {
		s.Blocks = append(s.Blocks, f)
	}
	if f, ok := b.driftFigure(); ok {
		s.Blocks = append(s.Blocks, f)
	}
	t := Table{Caption: "Answers to the surroundings and drift", Columns: []Column{{Name: "Gauge", Text: true}, {Name: "What", Text: true}, {Name: "Value", Text: true}, {Name: "Lag", Text: true}}}
	for _, d := range b.r.Drift.Temperature {
		t.Rows = append(t.Rows, []string{d.Gauge, "temperature", b.with(&d.Coefficient), b.lag(d)})
	}
	for _, d := range b.r.Drift.Humidity {
		t.Rows = append(t.Rows, []string{d.Gauge, "humidity", b.with(&d.Coefficient), b.lag(d)})
	}
	for _, d := range b.r.Drift.Gauges {
		t.Rows = append(t.Rows, []string{d.Gauge, "own drift", b.with(&d.Rate), ""})
	}
	if len(t.Rows) > 0 {
		t.Says = "Fitted with the law; where u is as large as the value, nothing was seen."
		s.Blocks = append(s.Blocks, t)
	}
	if t, ok := b.soakTable(); ok {
		s.Blocks = append(s.Blocks, t)
	}
	if f, ok := b.soakFigure(); ok {
		s.Blocks = append(s.Blocks, f)
	}
	sup := Table{Caption: "Settlement of the supports", Columns: []Column{{Name: "Support", Text: true}, {Name: "Settlement", Text: true}}}
	for _, p := range b.r.Supports {
		words := "not measured: no gauge there"
		if p.Measured && p.Settlement != nil {
			words = b.with(p.Settlement)
		}
		sup.Rows = append(sup.Rows, []string{p.Name, words})
	}
	if len(sup.Rows) > 0 {
		sup.Says = "From the baseline to the end of the run; taken out of every net sag."
		s.Blocks = append(s.Blocks, sup)
	}
	return s
}

func (b *builder) lag(d analysis.AmbientTerm) string {
	if d.LagH == nil {
		return "not to be told: at its bound"
	}
	return b.with(d.LagH)
}
