//go:build campaign && linux

package main

import (
	"encoding/json"
	"math"
	"os/exec"
	"path/filepath"
	"testing"
)

// TestSurviveRigsFromServers looks at the demo's run in its folder and on real
// servers. InfluxDB, which holds words, shows what the folder shows: the sag to
// the last digit, the rate to within half a percent, for its windows' middles
// stand for the medians of their instants. VictoriaMetrics shows as much but for
// the step's name, if it is given the rig file.
func TestSurviveRigsFromServers(t *testing.T) {
	needTool(t, "influxd", "victoria-metrics")
	program, run := buildProgram(t), filepath.Join(t.TempDir(), "demo")
	do(t, program, "demo", "--into", run)
	influx, victoria := newInflux(t), newVictoria(t)
	influx.create(t, "lab")
	do(t, program, "forward", run, "--to", "http://"+influx.address+"/write?db=lab")
	do(t, program, "forward", run, "--to", "http://"+victoria+"/write")
	get(t, "http://"+victoria+"/internal/force_flush")
	look := func(args ...string) rigRow {
		t.Helper()
		out, err := exec.Command(program, append([]string{"rigs", "--json"}, args...)...).Output()
		if err != nil {
			t.Fatalf("rigs %v: %v", args, err)
		}
		var rows []rigRow
		if err := json.Unmarshal(out, &rows); err != nil || len(rows) != 1 {
			t.Fatalf("%s: %v", out, err)
		}
		return rows[0]
	}
	folder := look(run)
	for name, r := range map[string]rigRow{"InfluxDB": look("http://" + influx.address + "/query?db=lab"),
		"VictoriaMetrics": look("http://"+victoria+"/api/v1/export", "--rig", filepath.Join(run, "rig.yaml"))} {
		if r.State != "ended" || r.Specimen != folder.Specimen || r.Gauge != folder.Gauge || r.LastSeen != folder.LastSeen || !r.SenseKnown || *r.SagLimit != *folder.SagLimit {
			t.Errorf("%s: %+v\nfolder %+v", name, r, folder)
		}
		if math.Abs(*r.Sag-*folder.Sag) > 1e-9 || math.Abs(*r.Rate / *folder.Rate - 1) > 0.005 {
			t.Errorf("%s: sag %v, rate %v; folder %v, %v", name, *r.Sag, *r.Rate, *folder.Sag, *folder.Rate)
		}
		if name == "InfluxDB" && (r.Step != folder.Step || *r.DaysToGo != *folder.DaysToGo) {
			t.Errorf("%s: step %s, %v days; folder %s, %v", name, r.Step, *r.DaysToGo, folder.Step, *folder.DaysToGo)
		}
	}
	if r := look("http://" + victoria + "/api/v1/export"); r.SenseKnown || math.Abs(*r.Sag-math.Abs(*folder.Sag)) > 0.001 { // nor its gain
		t.Errorf("without a rig file: %+v", r)
	}
}
