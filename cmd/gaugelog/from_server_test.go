//go:build campaign && linux

package main

import (
	"encoding/json"
	"fmt"
	"math"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
)

// TestSurviveFromServers forwards the demo's run to real servers and analyses
// it from there. From InfluxDB every figure, instant and word is the folder's,
// but for the cause of a gap, which the folder's boot ids tell, and the warning
// that the run was read back. From VictoriaMetrics, whose stamps are whole
// milliseconds, every quantity is within a fiftieth of its standard uncertainty,
// and a gauge's own drift, counted from where its zero was read, within a twentieth;
// forecasts by single laws are left out, for those that the readings speak
// against have no meaning.
func TestSurviveFromServers(t *testing.T) {
	needTool(t, "influxd", "victoria-metrics")
	program, run := buildProgram(t), filepath.Join(t.TempDir(), "demo")
	do(t, program, "demo", "--into", run)
	influx, victoria := newInflux(t), newVictoria(t)
	influx.create(t, "lab")
	do(t, program, "forward", run, "--to", "http://"+influx.address+"/write?db=lab")
	do(t, program, "forward", run, "--to", "http://"+victoria+"/write")
	get(t, "http://"+victoria+"/internal/force_flush")
	rig := filepath.Join(run, "rig.yaml")
	folder := analysed(t, program, run)
	exact := analysed(t, program, "--from", "http://"+influx.address+"/query?db=lab", "--rig", rig)
	if diff := cmp.Diff(folder, exact); diff != "" {
		t.Errorf("from InfluxDB (-folder +server):\n%s", diff)
	}
	coarse := analysed(t, program, "--from", "http://"+victoria+"/api/v1/export", "--rig", rig)
	compared, worst := 0, 0.0
	withinOf(folder, coarse, "", func(path string, share float64) {
		bound := 0.02
		if strings.HasPrefix(path, ".drift.gauges") {
			bound = 0.05
		}
		if compared++; share > bound {
			t.Errorf("from VictoriaMetrics: %s differs by %.3g of its uncertainty", path, share)
		}
		worst = max(worst, share)
	})
	if compared < 200 {
		t.Errorf("only %d quantities were compared", compared)
	}
	t.Logf("%d quantities within %.3g of their uncertainty from whole milliseconds", compared, worst)
}

// analysed is the result without what only the folder or only a server can say.
func analysed(t *testing.T, program string, args ...string) map[string]any {
	t.Helper()
	out, err := exec.Command(program, append([]string{"analyse", "--json"}, args...)...).Output()
	if err != nil {
		t.Fatalf("analyse %v: %v", args, err)
	}
	var result map[string]any
	if err := json.Unmarshal(out, &result); err != nil {
		t.Fatal(err)
	}
	for _, d := range result["disturbances"].([]any) {
		if d := d.(map[string]any); d["kind"] == "gap" {
			delete(d, "evidence")
		}
	}
	result["warnings"] = slices.DeleteFunc(result["warnings"].([]any), func(w any) bool { return w.(map[string]any)["code"] == "fetched" })
	return result
}

// withinOf tells of each quantity of both results how far they lie apart, in
// standard uncertainties of the first.
func withinOf(a, b any, path string, tell func(string, float64)) {
	switch a := a.(type) {
	case map[string]any:
		other, ok := b.(map[string]any)
		if !ok {
			tell(path, math.Inf(1))
			return
		}
		value, isNumber := a["value"].(float64)
		if u, known := a["u"].(float64); isNumber && known && u > 0 {
			if got, ok := other["value"].(float64); ok {
				tell(path, math.Abs(value-got)/u)
			} else {
				tell(path, math.Inf(1))
			}
			return
		}
		for k, v := range a {
			if k != "by_model" && k != "budget" {
				withinOf(v, other[k], path+"."+k, tell)
			}
		}
	case []any:
		other, _ := b.([]any)
		if strings.HasSuffix(path, ".warnings") {
			return
		}
		if len(other) != len(a) {
			tell(path, math.Inf(1))
			return
		}
		for i := range a {
			withinOf(a[i], other[i], fmt.Sprintf("%s[%d]", path, i), tell)
		}
	}
}
