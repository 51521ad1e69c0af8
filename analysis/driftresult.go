package analysis

import (
	"fmt"
	"math"

	"gaugelog/analysis/creep"
	"gaugelog/analysis/history"
)

// driftOf renders what moved the gauges beside load and creep.
func driftOf(h *history.History, t *creepTask, a *creep.Analysis, soak []Soak) Drift {
	d := Drift{Gauges: []GaugeDrift{}, Temperature: []AmbientTerm{}, Humidity: []AmbientTerm{}, Soak: soak}
	if a == nil || a.Best == nil {
		return d
	}
	for _, n := range a.Best.Nuisance {
		name := h.Rig.Gauges[t.gauges[n.Series]].Name
		switch n.Kind {
		case "ambient":
			what := t.record[n.Ambient]
			unit := map[surrounding]string{ofTemperature: "mm/K", ofHumidity: "mm/%"}[what]
			term := AmbientTerm{Gauge: name, Coefficient: quantity(n.Value, n.U, unit)}
			// A lag that ran to its bound, as it does where nothing answers, is no figure.
			if n.Ambient < len(a.Best.Lags) && !a.Best.Lags[n.Ambient].AtBound {
				lag := quantity(a.Best.Lags[n.Ambient].Value, a.Best.Lags[n.Ambient].U, "h")
				term.LagH = &lag
			}
			switch what {
			case ofTemperature:
				d.Temperature = append(d.Temperature, term)
			case ofHumidity:
				d.Humidity = append(d.Humidity, term)
			}
		case "drift":
			d.Gauges = append(d.Gauges, GaugeDrift{Gauge: name, Rate: quantity(n.Value, n.U, "mm/d")})
		}
	}
	return d
}

// driftWarnings say of every gauge's drift whether the readings told it from
// creep, and name a gauge that drifts.
func driftWarnings(h *history.History, t *creepTask, a *creep.Analysis) []Warning {
	if a.Best == nil {
		return nil
	}
	var out []Warning
	days := float64(h.Last-h.First) / 86400e9
	for _, n := range a.Best.Nuisance {
		if n.Kind != "drift" {
			continue
		}
		var stated float64
		for _, p := range t.in.Drifts {
			if p.Series == n.Series {
				stated = p.Prior.U
			}
		}
		name := h.Rig.Gauges[t.gauges[n.Series]].Name
		switch {
		case n.U > 0 && math.Abs(n.Value) > 3*max(n.U, stated):
			out = append(out, Warning{Code: "gauge-drift", Gauge: name, Text: fmt.Sprintf(
				"gauge %s drifts by %.3g\u202fmm/d (u %.1g\u202fmm/d) against the other gauges, %.3g\u202fmm over the record, more than its stated uncertainty allows; it was taken off", name, n.Value, n.U, n.Value*days)})
		case n.Series == 0 && n.U > 0.7*stated:
			out = append(out, Warning{Code: "drift-bounded", Gauge: name, Text: fmt.Sprintf(
				"a straight drift of gauge %s cannot be told from slow creep by these readings; it is held within the uncertainty the rig states of the gauge, %.2g\u202fmm over the record, and widens the law's", name, stated*days)})
		}
	}
	return out
}
