package main

import (
	"context"
	"time"

	"gaugelog/analysis"
	"gaugelog/analysis/unitsystem"
	"gaugelog/ingest/desk"
)

// outlookOf is the analysis of a run folder in the form that the live page and
// the alarms need.
func outlookOf(run string) desk.Analyse {
	return func(ctx context.Context) (*desk.Outlook, error) {
		r, err := analysis.Analyse(run, analysis.Options{Program: version()})
		if err != nil {
			return nil, err
		}
		return outlook(r), nil
	}
}

// outlook takes from a result what concerns the present.
func outlook(r *analysis.Result) *desk.Outlook {
	o := &desk.Outlook{
		At: nanoseconds(&r.Run.Last), Gauge: r.Creep.Gauge, Step: r.Creep.Step, Stage: r.Creep.Stage,
		Caution:   nanoseconds(r.Creep.Acceleration.CautionTime),
		ClearArea: nanoseconds(r.Creep.Acceleration.ClearAreaTime),
	}
	if q := r.Creep.Rate; q != nil {
		o.Rate, o.RateU = &q.Value, q.U
	}
	var full int64 // of the creep step
	for i, s := range r.Steps {
		if s.Step == r.Creep.Step {
			full = nanoseconds(s.Start.Full)
		}
		if i < len(r.Steps)-1 {
			continue
		}
		o.StepFull = nanoseconds(s.Start.Full)
		for _, g := range s.Gauges {
			if g.Final != nil {
				o.Sag = append(o.Sag, desk.NetSag{Gauge: g.Gauge, MM: g.Final.Value, U: g.Final.U})
			}
		}
	}
	for _, f := range r.Creep.Forecast {
		d := desk.Forecast{After: f.After, At: full + int64(f.AfterS*1e9), Lo: f.Lo95, Hi: f.Hi95, Label: f.Label, Refused: f.Refused}
		if f.Sag != nil {
			d.MM = f.Sag.Value
		} else if d.Refused == "" {
			d.Refused = "no figure"
		}
		o.Forecasts = append(o.Forecasts, d)
	}
	for _, m := range r.Creep.MayStop {
		if n := len(r.Steps); n > 0 && r.Steps[n-1].Step != r.Creep.Step {
			break // what it would have bought, had the load stayed, is for the report
		}
		o.MayStop = append(o.MayStop, desk.MayStop{More: time.Duration(m.MoreS * float64(time.Second)), WidthMM: m.ForecastWidth.Value})
	}
	for _, d := range r.Disturbances {
		b := desk.Disturbance{Kind: d.Kind, Gauges: d.Gauges, From: nanoseconds(&d.From), To: nanoseconds(d.To), Treated: unitsystem.Text("si", d.Treated)}
		if d.Size != nil {
			b.Size = &d.Size.Value
		}
		if d.Load != nil {
			b.Load = &d.Load.Value
		}
		o.Disturbances = append(o.Disturbances, b)
	}
	return o
}

// nanoseconds reads an instant of the result; 0 where there is none.
func nanoseconds(text *string) int64 {
	if text == nil {
		return 0
	}
	t, err := time.Parse(time.RFC3339Nano, *text)
	if err != nil {
		return 0
	}
	return t.UnixNano()
}
