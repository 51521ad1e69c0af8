package main

import (
	"bytes"
	"fmt"
	"math"
	"net/http"
	"net/http/httptest"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"gaugelog/config"
)

const rigsFromText = `specimen:
  name: strip
  section: {shape: rectangle, width: 20 mm, depth: 5 mm}
  length: 500 mm
supports: [{name: l, at: 0 mm}, {name: r, at: 500 mm}]
gauges: [{name: mid, at: 250 mm, sense: up, resolution: 0.01 mm}, {name: fixed, at: 0 mm, sees: reference, sense: up, resolution: 0.01 mm}]
loads: [{name: pan, at: 250 mm}]
plan: [{step: zero, hold: 1 h}, {step: l1, set: {pan: 1 kg}, hold: 4 d}]
limits: {sag: 6 mm}
`

// rigsServer is a server of tables that holds one run: an hour of zero step,
// two days of load; the gauge's sense is up, so that its indication falls from
// 5 to 2.9 mm and on by 0.1 mm a day. brief is what was forwarded of the rig
// file, last the last reading.
func rigsServer(t *testing.T, brief string, last int64, ended bool) string {
	t.Helper()
	first := last - 2*86400e9
	tags := `"tags":{"rig":"strip","run":"r-1"}`
	table := func(name, tags, columns, rows string) string {
		return fmt.Sprintf(`{"results":[{"statement_id":0,"series":[{"name":%q,%s,"columns":[%s],"values":[%s]}]}]}`, name, tags, columns, rows)
	}
	s := httptest.NewServer(http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		q := r.URL.Query().Get("q")
		answer := `{"results":[{"statement_id":0}]}`
		switch {
		case strings.HasPrefix(q, `SELECT last("mm")`):
			answer = table("indication", tags, `"time","last"`, fmt.Sprintf("[%d,2.8]", last))
		case strings.HasPrefix(q, `SELECT first("mm")`):
			answer = table("indication", tags, `"time","first"`, fmt.Sprintf("[%d,5]", first))
		case strings.HasPrefix(q, `SELECT last("brief")`) && brief != "":
			answer = table("rig", tags, `"time","last"`, fmt.Sprintf("[%d,%q]", last, brief))
		case strings.HasPrefix(q, `SHOW TAG KEYS FROM "load"`):
			answer = table("load", `"x":0`, `"tagKey"`, `["name"],["rig"],["run"]`)
		case strings.HasPrefix(q, `SHOW FIELD KEYS FROM "load"`):
			answer = table("load", `"x":0`, `"fieldKey","fieldType"`, `["newton","float"],["step","string"]`)
		case strings.HasPrefix(q, `SELECT * FROM "load"`):
			answer = table("load", tags, `"time","name","newton","step"`, fmt.Sprintf(`[%d,"pan",9.8,"l1"]`, first+3600e9))
		case strings.HasPrefix(q, `SHOW TAG KEYS FROM "event"`):
			answer = table("event", `"x":0`, `"tagKey"`, `["gauge"],["kind"],["rig"],["run"]`)
		case strings.HasPrefix(q, `SHOW FIELD KEYS FROM "event"`):
			answer = table("event", `"x":0`, `"fieldKey","fieldType"`, `["detail","string"],["n","integer"]`)
		case strings.HasPrefix(q, `SELECT * FROM "event"`):
			rows := fmt.Sprintf(`[%d,"","started","",1],[%d,"mid","alarm-raised","sag: too much",1]`, first, first+7200e9)
			if ended {
				rows += fmt.Sprintf(`,[%d,"","stopped","",1]`, last)
			}
			answer = table("event", tags, `"time","gauge","kind","detail","n"`, rows)
		case strings.HasPrefix(q, `SELECT median("mm")`):
			answer = ""
			for i, mm := range []float64{2.8, 2.9, 5} {
				answer += fmt.Sprintf(`{"results":[{"statement_id":%d,"series":[{"name":"indication","tags":{"gauge":"mid"},"columns":["time","median"],"values":[[1,%g]]},{"name":"indication","tags":{"gauge":"fixed"},"columns":["time","median"],"values":[[1,%g]]}]}]}`, i, mm, float64(i))
			}
		}
		fmt.Fprintln(w, answer)
	}))
	t.Cleanup(s.Close)
	return s.URL + "/query?db=lab"
}

// TestRigsFromServer: what a server tells is what the folder would, given the
// rig file, forwarded or named; without it the sense stays open, and is said.
func TestRigsFromServer(t *testing.T) {
	whole, err := config.Parse("rig.yaml", []byte(rigsFromText))
	if err != nil {
		t.Fatal(err)
	}
	file := filepath.Join(t.TempDir(), "rig.yaml")
	if err := os.WriteFile(file, []byte(rigsFromText), 0o644); err != nil {
		t.Fatal(err)
	}
	now, long := time.Now().UnixNano(), time.Now().Add(-time.Hour).UnixNano()
	for _, c := range []struct {
		name, address, rig, state string
		known                     bool
	}{
		{"forwarded with the readings", rigsServer(t, whole.Brief(), now, false), "", "sending", true},
		{"named", rigsServer(t, "", long, false), file, "silent", true},
		{"not known", rigsServer(t, "", long, true), "", "ended", false},
	} {
		t.Run(c.name, func(t *testing.T) {
			f := rigsFlags{}
			if c.rig != "" {
				f.rigs = []string{c.rig}
			}
			rows, err := lookAtAll(t.Context(), []string{c.address}, f)
			if err != nil || len(rows) != 1 {
				t.Fatal(rows, err)
			}
			r := rows[0]
			if r.State != c.state || r.SenseKnown != c.known || r.Run != "r-1" || r.Specimen != "strip" || r.Step != "l1" || len(r.Alarms) != 1 || r.Alarms[0] != "sag: too much" {
				t.Errorf("%+v", r)
			}
			near := func(what string, got *float64, want, within float64) {
				if got == nil || math.Abs(*got-want) > within {
					t.Errorf("%s %v, want %g", what, got, want)
				}
			}
			if near("sag", r.Sag, 2.2, 1e-9); !c.known {
				if r.SagText() != "±2.200" || r.DaysToGo != nil {
					t.Errorf("%s, %v", r.SagText(), r.DaysToGo)
				}
				return
			}
			near("rate", r.Rate, 0.1*24/(24-1./6), 1e-3)
			near("days to go", r.DaysToGo, 4-47./24, 1e-6)
			if r.Gauge != "mid" || r.SagText() != "2.200 of 6" {
				t.Errorf("%s %s", r.Gauge, r.SagText())
			}
		})
	}
}

// TestRigsPageFromServer: the page is one file and shows the runs of servers.
func TestRigsPageFromServer(t *testing.T) {
	rows, err := lookAtAll(t.Context(), []string{rigsServer(t, "", time.Now().UnixNano(), false)}, rigsFlags{})
	if err != nil {
		t.Fatal(err)
	}
	var b bytes.Buffer
	if err := rigsPage.Execute(&b, rows); err != nil {
		t.Fatal(err)
	}
	for _, want := range []string{"<td>r-1<td>strip<td>sending<td>", "±2.200", "sag: too much", `class="alarm"`, "Suspended loads hurt people"} {
		if !strings.Contains(b.String(), want) {
			t.Errorf("no %q in\n%s", want, b.String())
		}
	}
	if strings.Contains(b.String(), "http") {
		t.Error("the page refers to something outside itself")
	}
}

// TestRigsFromServerRefused: an address that is none, and a server without runs.
func TestRigsFromServerRefused(t *testing.T) {
	empty := httptest.NewServer(http.HandlerFunc(func(w http.ResponseWriter, _ *http.Request) {
		fmt.Fprint(w, `{"results":[{"statement_id":0}]}`)
	}))
	defer empty.Close()
	for address, want := range map[string]string{"http://lab/": "none to read from", "http://a:b@lab/query?db=x": "token file",
		"http://lab/query": "no database", empty.URL + "/query?db=lab": "holds no run"} {
		if _, err := lookAtAll(t.Context(), []string{address}, rigsFlags{}); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%s: %v, want %q", address, err, want)
		}
	}
}
