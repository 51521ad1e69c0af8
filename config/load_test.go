package config

import "testing"

func TestLoadWholeRig(t *testing.T) {
	r, err := LoadRig("testdata/slat.yaml")
	if err != nil {
		t.Fatal(err)
	}
	if len(r.Details) != 2 || r.Details[0] != (Detail{"Moisture", "11.2 %"}) || r.Details[1] != (Detail{"batch", "7/4"}) {
		t.Errorf("details lost their case or order: %v", r.Details)
	}
	if s := r.Supports[1].At; s.Value != 600 || s.U != 0.5 || s.Shown != "600.0(5) mm" {
		t.Errorf("right support at %+v", s)
	}
	if g := r.Gauges[0]; g.Calibration.Gain.Value != 1.0004 || g.Calibration.Date != "2026-09-14" || g.SerialNumber != "1187" || g.Sees != "beam" {
		t.Errorf("gauge %+v, calibration %+v", g, g.Calibration)
	}
	if w := r.Plan[1].Set; len(w) != 1 || w[0].Load != "pan" || w[0].Weight.Mass.Value != 12.4 || w[0].Weight.Shown != "12.40 kg" {
		t.Errorf("plan[l1].set = %+v", w)
	}
	if r.Frames[1].Units["MM"] != "mm" || r.Frames[1].Request != "?\r" || r.Frames[1].Longest != 256 {
		t.Errorf("frame asked = %+v", r.Frames[1])
	}
	if r.Forecast[1].Value != 31557600 || *r.Record.Sampling.Every != (Duration{Quantity{Value: 1, Shown: "1 s"}}) {
		t.Errorf("forecast %v, sampling %+v", r.Forecast, r.Record.Sampling)
	}
	if l := r.Loads[0].Lever; l == nil || l.Value != 1 {
		t.Errorf("lever default %v", l)
	}
}
