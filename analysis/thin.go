package analysis

import (
	"math"

	"gaugelog/analysis/history"
	"gaugelog/analysis/steps"
)

// mostPoints is how many points of one gauge a plot gets.
const mostPoints = 900

// seriesOf thins the tracks for the plots. The tracks are dense where the
// beam moves and sparse where it creeps, so every k-th point keeps that.
func seriesOf(h *history.History, f *steps.Findings) Series {
	s := Series{Gauges: []GaugeSeries{}, Ambient: []ProbeSeries{}, Curve: []ElasticCurve{}, Law: []LawPoint{}, Creep: []CreepPoint{}}
	for _, t := range f.Tracks {
		g := &h.Rig.Gauges[t.Gauge]
		gs := GaugeSeries{Gauge: g.Name, Sees: g.Sees, AtMM: g.At.Value, TimeS: []float64{}, SagMM: []float64{}, RawMM: []float64{}}
		stride := (len(t.Points) + mostPoints - 1) / mostPoints
		for i, p := range t.Points {
			if i%max(stride, 1) != 0 && i != len(t.Points)-1 {
				continue
			}
			gs.TimeS = append(gs.TimeS, seconds(p.Time-h.First))
			gs.SagMM = append(gs.SagMM, p.Net)
			gs.RawMM = append(gs.RawMM, p.Raw)
		}
		s.Gauges = append(s.Gauges, gs)
	}
	for i := range h.Rig.Probes {
		s.Ambient = append(s.Ambient, probeSeries(h, i))
	}
	return s
}

func probeSeries(h *history.History, i int) ProbeSeries {
	p := ProbeSeries{Probe: h.Rig.Probes[i].Name, TimeS: []float64{}, Celsius: []float64{}, HumidityPercent: []float64{}}
	samples := h.Ambient(i)
	stride := max((len(samples)+mostPoints-1)/mostPoints, 1)
	warm, damp := true, true
	for _, a := range samples {
		warm = warm && !math.IsNaN(a.Celsius)
		damp = damp && !math.IsNaN(a.HumidityPercent)
	}
	for j := 0; j < len(samples); j += stride {
		a := samples[j]
		p.TimeS = append(p.TimeS, seconds(a.Time-h.First))
		if warm {
			p.Celsius = append(p.Celsius, a.Celsius)
		}
		if damp {
			p.HumidityPercent = append(p.HumidityPercent, a.HumidityPercent)
		}
	}
	return p
}
