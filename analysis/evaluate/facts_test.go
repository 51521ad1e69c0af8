package evaluate

import "math"

// powerSag is the sag of the demo's law, 1 + 0.085 t^0.23 with t in hours,
// per unit of elastic sag.
func powerSag(s float64) float64 { return 1 + 0.085*math.Pow(s/3600, 0.23) }

// full returns facts in which nothing is missing: a plank under one central
// load for 400 days and a recovery of 30 days, read at every moment that the
// built-in rules ask for.
func full() *Facts {
	f := &Facts{
		Span: Measured(640, 0.5), Width: Measured(100, 0.05), Depth: Measured(40, 0.02),
		SecondMoment: Measured(100*40*40*40/12.0, 900), SectionModulus: Measured(100*40*40/6.0, 40),
		Supports: Exactly(2), SupportsMeasured: Exactly(2), GaugeOffCentre: Measured(0.5, 0.2), LoadOffCentre: Measured(0.5, 0.2),
		Gauges: Exactly(3), Resolution: Exactly(0.001),
		Load: Measured(200, 0.1), LoadPlaces: Exactly(1), LoadSteps: Exactly(1), LoadRamp: Measured(2, 0.2),
		Stress: Measured(1.2, 0.01), Strength: Measured(40, 1),
		Duration: Exactly(400 * 86400), RecoveryDuration: Exactly(30 * 86400),
		TemperatureMin: Measured(22.5, 0.2), TemperatureMax: Measured(23.5, 0.2), HumidityMin: Measured(0.46, 0.01), HumidityMax: Measured(0.54, 0.01),
		InitialSag: Measured(powerSag(60), 0.001), InitialAfter: Exactly(60), EndSag: Measured(powerSag(400*86400), 0.002), GreatestSag: Measured(1.04, 0.001),
		ForecastSag: Measured(powerSag(4000*86400), 0.05), ForecastAfter: Exactly(4000 * 86400), PermanentSet: Measured(0.01, 0.02),
		LimitSag: Exactly(6), LimitSpanOverSag: Exactly(100),
		Details: map[string]string{
			"design_load": "100 N", "kdef_material": "Solid timber", "service_class": "1", "sample_size": "30", "sample_failures": "0",
			"shelf_load": "3.1 kPa", "shelf_hold": "7 d", "shelf_span_over_sag": "200",
		},
	}
	for _, m := range Moments(BuiltIn()) {
		f.Sag = append(f.Sag, Reading{AfterS: m.AfterS, Quantity: Quantity{Value: powerSag(m.AfterS), U: 0.001}})
		f.Recovered = append(f.Recovered, Reading{AfterS: m.AfterS, Quantity: Quantity{Value: 0.9, U: 0.002}})
		f.ReadAt = append(f.ReadAt, m.AfterS*1.001)
	}
	return f
}

// ruled returns the built-in rule of this name.
func ruled(name string) []*Rule {
	rules, unknown := Pick([]string{name}, nil)
	if len(unknown) > 0 {
		panic("no rule " + name)
	}
	return rules
}

// only is the outcome of one clause.
func only(list []Outcome, clause string) Outcome {
	for _, o := range list {
		if o.Clause == clause {
			return o
		}
	}
	panic("no clause " + clause)
}
