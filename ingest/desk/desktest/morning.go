package desktest

import (
	"math"
	"strings"
	"testing"
	"time"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/ingest"
	"gaugelog/ingest/alarm"
	"gaugelog/ingest/desk"
	"gaugelog/ingest/rollup"
)

// Morning is a snapshot with something in everything that is shown, made by hand
// so that it is always the same, with a desk to word it.
func Morning(t testing.TB) (*desk.Desk, *desk.Snapshot) {
	t.Helper()
	rig, err := config.Parse("rig.yaml", []byte(strings.Replace(RigText, "%TITLE%", "Slat 3, larch", 1)))
	if err != nil {
		t.Fatal(err)
	}
	dir, err := ingest.OpenDir(t.TempDir(), ingest.DirOptions{Create: true})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { dir.Close() })
	d, err := desk.New(desk.Options{Name: "slat-3", Rig: rig, FS: dir.FS(), Status: func() *ingest.Status { return nil }, Gravity: 9.81})
	if err != nil {
		t.Fatal(err)
	}
	at := time.Date(2026, 3, 10, 7, 14, 5, 0, time.UTC)
	f := func(v float64) *float64 { return &v }
	loaded := at.Add(-8 * 24 * time.Hour)
	wall := at.UnixNano()
	s := &desk.Snapshot{At: at, Status: &ingest.Status{
		At: device.Instant{Wall: wall}, Run: "run-3", SyncAge: 4 * time.Second, Stored: 123456, DiskFree: 12_300_000_000, ClockSynchronised: true,
		Last: []ingest.Last{
			{Name: "mid", Seen: true, Wall: wall - 4e8, Age: 4e8, MM: 5.812},
			{Name: "quarter", Seen: true, Wall: wall - 240e9, Age: 240e9, MM: 8.21, Silent: true},
			{Name: "seat"},
			{Name: "air", Probe: true, Seen: true, Wall: wall - 1e9, Age: 1e9, Celsius: 20.31, HumidityPercent: math.NaN()},
		}}}
	for i, l := range s.Status.Last[:3] {
		s.Gauges = append(s.Gauges, desk.Gauge{Last: l, Sees: rig.Gauges[i].Sees, Resolution: 0.001})
	}
	s.Probes = s.Status.Last[3:]
	mid := &s.Gauges[0]
	mid.Sag, mid.Day, mid.Trend = f(4.312), f(0.031), &desk.Trend{Over: 24 * time.Hour, Last: 0.031, Before: 0.044}
	mid.TravelLeft, mid.TravelShare, mid.RunsOut = f(6.888), f(6.888/12.7), at.Add(222*24*time.Hour)
	s.Loads = desk.Loads{Now: []ingest.LoadValue{{Name: "pan", Newton: 121.6, Shown: "12.40 kg"}}, Newton: 121.6, Step: "l1", Since: loaded, Found: true, First: loaded, Planned: 1, Ends: loaded.Add(14 * 24 * time.Hour)}
	s.Marks = []ingest.Mark{
		{ID: "m1", Time: loaded.UnixNano(), Step: "l1", By: "mo", Loads: []ingest.LoadValue{{Name: "pan", Shown: "12.40 kg"}}},
		{ID: "m2", Time: at.Add(-time.Hour).UnixNano(), Note: "moved the lamp"}, {Withdraw: "m2", Why: "another rig"},
	}
	s.Withdrawn = ingest.Withdrawn(s.Marks)
	s.Outlook = &desk.Outlook{At: at.Add(-20 * time.Second).UnixNano(), Gauge: "mid", Step: "l1", StepFull: loaded.UnixNano(), Rate: f(0.0305), RateU: f(0.0012), Stage: "primary",
		Sag:          []desk.NetSag{{Gauge: "mid", MM: 4.3085, U: f(0.0041)}},
		Forecasts:    []desk.Forecast{{After: "30 d", At: loaded.Add(720 * time.Hour).UnixNano(), MM: 4.61, Lo: f(4.58), Hi: f(4.65), Label: "caution"}, {After: "1 a", At: loaded.Add(8766 * time.Hour).UnixNano(), Label: "refused", Refused: "more than two decades of time beyond the data"}},
		MayStop:      []desk.MayStop{{WidthMM: 0.07}, {More: 7 * 24 * time.Hour, WidthMM: 0.045}},
		Disturbances: []desk.Disturbance{{Kind: "gauge-knock", Gauges: []string{"mid"}, From: at.Add(-5 * time.Hour).UnixNano(), Size: f(-0.012), Treated: "taken out"}, {Kind: "bench-knock", From: at.Add(-50 * time.Hour).UnixNano()}}}
	s.Alarms = []alarm.Alarm{{ID: 3, Cause: "silent", Subject: "quarter", Level: alarm.Abnormal, Text: "nothing has come from it since 10 Mar 07:10:05", Advice: alarm.Advice("silent"), Raised: at.Add(-3 * time.Minute)}}
	s.PastAlarms = []alarm.Alarm{{ID: 1, Cause: "disk", Level: alarm.Abnormal, Text: "300 MB are free", Raised: at.Add(-30 * time.Hour), Over: at.Add(-29 * time.Hour), Seen: at.Add(-29 * time.Hour), SeenBy: "mo"}}
	s.Curves = curves(rig, loaded, at)
	return d, s
}

// curves are bins of a beam that creeps by the logarithm of time.
func curves(rig *config.Rig, loaded, at time.Time) *desk.Curves {
	b := rollup.NewBook("mid", "quarter", "seat", "air temperature", "air humidity")
	b.SetOrigin(loaded.UnixNano())
	for t := loaded.Add(-30 * time.Minute); t.Before(at); t = t.Add(time.Duration(1+t.Sub(loaded).Abs().Seconds()/50) * time.Second) {
		sag := 0.0
		if d := t.Sub(loaded).Seconds(); d > 0 {
			sag = 3.2 * (1 + 0.07*math.Log10(1+d/20))
		}
		b.Add(0, t.UnixNano(), 1.5+sag)
		b.Add(1, t.UnixNano(), 11.2-0.69*sag)
		b.Add(3, t.UnixNano(), 20+0.01*t.Sub(loaded).Hours())
	}
	c := &desk.Curves{Origin: loaded, Width: time.Duration(b.Series[0].Whole.Width)}
	for i := range b.Series {
		curve := desk.Curve{Name: b.Series[i].Name, Sign: 1}
		for _, bin := range b.Series[i].Whole.Bins {
			if bin.N > 0 {
				curve.Whole = append(curve.Whole, bin)
			}
		}
		for _, bin := range b.Series[i].Since {
			if bin.N > 0 {
				curve.Since = append(curve.Since, bin)
			}
		}
		switch i {
		case 0:
			curve.Baseline = 1.5
		case 1:
			curve.Baseline, curve.Sign = 11.2, -1
		case 3:
			curve.Kind = desk.CelsiusCurve
		case 4:
			curve.Kind = desk.HumidityCurve
		}
		c.Series = append(c.Series, curve)
	}
	return c
}
