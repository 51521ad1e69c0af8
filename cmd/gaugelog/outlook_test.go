package main

import (
	"testing"
	"time"

	"github.com/google/go-cmp/cmp"

	"gaugelog/analysis"
	"gaugelog/ingest/desk"
)

// The page gets from a result what concerns the present: the last step's sag,
// the creep step's forecast, the disturbances and the warnings of failure.
func TestOutlookOfAResult(t *testing.T) {
	text := func(s string) *string { return &s }
	f := func(v float64) *float64 { return &v }
	loaded, bare := "2026-03-02T08:00:00Z", "2026-03-03T08:00:00.5Z"
	at := func(s string) int64 {
		v, err := time.Parse(time.RFC3339Nano, s)
		if err != nil {
			t.Fatal(err)
		}
		return v.UnixNano()
	}
	r := &analysis.Result{
		Run: analysis.Run{Last: "2026-03-03T09:00:00Z"},
		Steps: []analysis.Step{
			{Step: "zero"},
			{Step: "l1", Start: analysis.Start{Full: &loaded}, Gauges: []analysis.StepGauge{{Gauge: "mid", Final: &analysis.Q{Value: 4}}}},
			{Step: "bare", Start: analysis.Start{Full: &bare}, Gauges: []analysis.StepGauge{{Gauge: "mid", Final: &analysis.Q{Value: 0.7, U: f(0.004)}}, {Gauge: "seat"}}},
		},
		Creep: analysis.Creep{Gauge: "mid", Step: "l1", Stage: "primary", Rate: &analysis.Q{Value: 0.03, U: f(0.001)},
			Acceleration: analysis.Acceleration{CautionTime: &bare},
			Forecast: []analysis.Forecast{
				{After: "1 h", AfterS: 3600, Sag: &analysis.Q{Value: 4.5}, Lo95: f(4.4), Hi95: f(4.6), Label: "plain"},
				{After: "1 a", AfterS: 31557600, Label: "refused", Refused: "too far"},
			},
			MayStop: []analysis.MayStop{{MoreS: 60, ForecastWidth: analysis.Q{Value: 0.2}}}},
		Disturbances: []analysis.Disturbance{{Kind: "bench-knock", Gauges: []string{"mid"}, From: loaded, To: text(bare), Size: &analysis.Q{Value: -0.01}, Load: &analysis.Q{Value: 3}, Treated: "taken out"}},
	}
	want := &desk.Outlook{
		At: at("2026-03-03T09:00:00Z"), Gauge: "mid", Step: "l1", StepFull: at(bare), Stage: "primary", Rate: f(0.03), RateU: f(0.001), Caution: at(bare),
		Sag: []desk.NetSag{{Gauge: "mid", MM: 0.7, U: f(0.004)}},
		Forecasts: []desk.Forecast{{After: "1 h", At: at(loaded) + 3600e9, MM: 4.5, Lo: f(4.4), Hi: f(4.6), Label: "plain"},
			{After: "1 a", At: at(loaded) + 31557600e9, Label: "refused", Refused: "too far"}},
		Disturbances: []desk.Disturbance{{Kind: "bench-knock", Gauges: []string{"mid"}, From: at(loaded), To: at(bare), Size: f(-0.01), Load: f(3), Treated: "taken out"}},
	}
	if d := cmp.Diff(want, outlook(r)); d != "" {
		t.Error(d)
	}
	// While the load hangs, what more time buys belongs to it.
	r.Steps = r.Steps[:2]
	if d := cmp.Diff([]desk.MayStop{{More: time.Minute, WidthMM: 0.2}}, outlook(r).MayStop); d != "" {
		t.Error(d)
	}
}
