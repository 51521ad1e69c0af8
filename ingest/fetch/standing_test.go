package fetch

import (
	"fmt"
	"net/http"
	"slices"
	"strings"
	"testing"

	"gaugelog/ingest/segment"
)

// rigsTables is a server with two runs, answering as InfluxDB 1.6 does.
func rigsTables(t *testing.T, change func(query string) (string, bool)) *scripted {
	t.Helper()
	return serve(t, func(_ http.ResponseWriter, r *http.Request) string {
		q := r.URL.Query().Get("q")
		if change != nil {
			if text, ok := change(q); ok {
				return text
			}
		}
		of := func(measurement, column, a, b string) string {
			return fmt.Sprintf(`{"results":[{"statement_id":0,"series":[{"name":%q,"tags":{"rig":"b1","run":"r-2"},"columns":["time",%q],"values":[%s],"partial":false}],"partial":true}]}
{"results":[{"statement_id":0,"series":[{"name":%[1]q,"tags":{"rig":"a3","run":"r-1"},"columns":["time",%[2]q],"values":[%[4]s]}]}]}`, measurement, column, b, a)
		}
		switch {
		case strings.HasPrefix(q, `SELECT last("mm")`):
			return of("indication", "last", `[1790000009000000001,2.5]`, `[1790000008000000002,1]`)
		case strings.HasPrefix(q, `SELECT first("mm")`):
			return of("indication", "first", `[1790000000000000001,2.5]`, `[1790000001000000002,1]`)
		case strings.HasPrefix(q, `SELECT last("brief")`):
			return `{"results":[{"statement_id":0,"series":[{"name":"rig","tags":{"rig":"a3","run":"r-1"},"columns":["time","last"],"values":[[1790000005000000000,"{\"x\":1}"]]}]}]}`
		case q == `SHOW TAG KEYS FROM "load"`:
			return series1("load", `["tagKey"]`, `["name"],["rig"],["run"]`)
		case q == `SHOW FIELD KEYS FROM "load"`:
			return series1("load", `["fieldKey","fieldType"]`, `["newton","float"],["step","string"]`)
		case strings.HasPrefix(q, `SELECT * FROM "load"`):
			return `{"results":[{"statement_id":0,"series":[{"name":"load","tags":{"rig":"a3","run":"r-1"},"columns":["time","name","newton","step"],"values":[[1790000004000000000,"pan",9.8,"l1"],[1790000003000000000,"pan",0,null]]}]}]}`
		case q == `SHOW TAG KEYS FROM "event"`:
			return series1("event", `["tagKey"]`, `["gauge"],["kind"],["rig"],["run"]`)
		case q == `SHOW FIELD KEYS FROM "event"`:
			return series1("event", `["fieldKey","fieldType"]`, `["detail","string"],["n","integer"]`)
		case strings.HasPrefix(q, `SELECT * FROM "event"`):
			return `{"results":[{"statement_id":0,"series":[{"name":"event","tags":{"rig":"b1","run":"r-2"},"columns":["time","gauge","kind","detail","n"],"values":[[1790000004000000000,"mid","alarm-raised","sag: much",1]]}]}]}`
		case strings.HasPrefix(q, `SELECT median("mm")`):
			return `{"results":[{"statement_id":0,"series":[{"name":"indication","tags":{"gauge":"mid"},"columns":["time","median"],"values":[[1,1.25]]}]}]}
{"results":[{"statement_id":1}]}`
		}
		return `{"results":[{"statement_id":0}]}`
	})
}

// TestStandings: all runs' ends, marks, events and rig files come by a few
// queries, whatever the number of runs; medians by one a run.
func TestStandings(t *testing.T) {
	s := rigsTables(t, nil)
	source, err := ParseSource(s.URL+"/query?db=lab", "", false)
	if err != nil {
		t.Fatal(err)
	}
	defer source.Close()
	list, err := source.Standings(t.Context())
	if err != nil || len(list) != 2 {
		t.Fatalf("%v, %v", list, err)
	}
	a, b := list[0], list[1]
	if a.Rig != "a3" || a.Run != "r-1" || a.First != 1790000000000000001 || a.Last != 1790000009000000001 || a.Brief != `{"x":1}` {
		t.Errorf("%+v", a)
	}
	if len(a.Marks) != 2 || a.Marks[0].Time != 1790000003000000000 || a.Marks[1].Kind != segment.Load || a.Marks[1].Name != "pan" || len(a.Events) != 0 {
		t.Errorf("marks %+v, events %+v", a.Marks, a.Events)
	}
	if step, _ := a.Marks[1].Point.Value("step"); step != "l1" {
		t.Errorf("step %v", step)
	}
	if b.Rig != "b1" || b.Brief != "" || len(b.Events) != 1 || b.Events[0].Name != "alarm-raised" || b.Events[0].Point.Tag("gauge") != "mid" {
		t.Errorf("%+v", b)
	}
	if len(s.asked) > 13 {
		t.Errorf("%d queries", len(s.asked))
	}
	spans := []segment.Interval{{From: 1, To: 2}, {From: 3, To: 4}}
	m, err := source.Medians(t.Context(), []Ask{{"r-1", spans}})
	if err != nil || len(m[0]) != 2 || m[0][0]["mid"] != 1.25 || len(m[0][1]) != 0 {
		t.Errorf("%v, %v", m, err)
	}
	if q := s.asked[len(s.asked)-1].URL.Query().Get("q"); !strings.Contains(q, `time >= 1 AND time <= 2 `) || !strings.Contains(q, `time >= 3 AND time <= 4 `) {
		t.Error(q)
	}
}

// TestStandingsGoWrong: half an answer, or none, is an error.
func TestStandingsGoWrong(t *testing.T) {
	for _, c := range []struct{ query, answer, want string }{
		{`SELECT last("mm")`, `{"results":[{"statement_id":0,"error":"timeout"}]}`, "timeout"},
		{`SELECT last("mm")`, `{"results":[{"statement_id":0,"series":[{"name":"x","columns":["time","last"],"values":[["x",1]]}]}]}`, "no instant"},
		{`SELECT last("mm")`, `{"results":[{"statement_id":0,"series":[{"name":"x","columns":["time"],"values":[[1]]}]}]}`, "no row"},
		{`SELECT * FROM "event"`, ``, "breaks off"},
		{`SELECT median("mm")`, `{"results":[{"statement_id":0}]}`, "breaks off"},
		{`SELECT median("mm")`, `{"results":[{"statement_id":0}]}{"results":[{"statement_id":7,"series":[{"name":"x","columns":["time","median"],"values":[[1,1]]}]}]}`, "not asked for"},
	} {
		s := rigsTables(t, func(q string) (string, bool) { return c.answer, strings.HasPrefix(q, c.query) })
		source, err := ParseSource(s.URL+"/query?db=lab", "", false)
		if err != nil {
			t.Fatal(err)
		}
		_, err = source.Standings(t.Context())
		if err == nil {
			_, err = source.Medians(t.Context(), []Ask{{"r-1", []segment.Interval{{From: 1, To: 2}, {From: 3, To: 4}}}})
		}
		if err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: %v, want %q", c.query, err, c.want)
		}
		source.Close()
	}
}

// TestStandingsOfNumbers: a server that keeps numbers only tells instants to the
// millisecond, loads, and that an alarm is raised.
func TestStandingsOfNumbers(t *testing.T) {
	s := serve(t, func(_ http.ResponseWriter, r *http.Request) string {
		q := r.URL.Query()
		vector := func(metric, v string) string {
			return `{"status":"success","data":{"result":[{"metric":` + metric + `,"value":[1,"` + v + `"]}]}}`
		}
		switch query, match := q.Get("query"), q.Get("match[]"); {
		case strings.HasPrefix(query, "max(tlast"):
			return vector(`{"rig":"a3","run":"r-1"}`, "1790000009.001")
		case strings.HasPrefix(query, "min(tfirst"):
			return vector(`{"rig":"a3","run":"r-1"}`, "1790000000.002")
		case strings.HasPrefix(query, `quantile_over_time(0.5, indication_mm{run="r-1"}[600001ms])`):
			return vector(`{"gauge":"mid","run":"r-1"}`, "1.5")
		case strings.Contains(match, "load_"):
			return metric(map[string]string{"__name__": "load_newton", "name": "pan", "rig": "a3", "run": "r-1"}, []any{9.8, 9.8}, []int64{1790000004000, 1790000004000})
		case strings.Contains(match, "event_"):
			return metric(map[string]string{"__name__": "event_n", "kind": "alarm-raised", "gauge": "mid", "rig": "a3", "run": "r-1"}, []any{1}, []int64{1790000005000})
		}
		return ""
	})
	source, err := ParseSource(s.URL+"/api/v1/export", "", false)
	if err != nil {
		t.Fatal(err)
	}
	defer source.Close()
	list, err := source.Standings(t.Context())
	if err != nil || len(list) != 1 {
		t.Fatalf("%v, %v", list, err)
	}
	st := list[0]
	if st.First != 1790000000002e6 || st.Last != 1790000009001e6 || len(st.Marks) != 1 || st.Marks[0].Time != 1790000004e9 || len(st.Events) != 1 {
		t.Errorf("%+v", st)
	}
	m, err := source.Medians(t.Context(), []Ask{{"r-1", []segment.Interval{{From: 1790000000e9, To: 1790000600e9}}}})
	if err != nil || m[0][0]["mid"] != 1.5 {
		t.Errorf("%v, %v", m, err)
	}
	if at := s.asked[len(s.asked)-1].URL.Query().Get("time"); at != "1790000600.000" {
		t.Errorf("asked at %s", at)
	}
}

// TestSharedWindows: a span of three runs is asked for once, others run by run,
// and every median goes where it was asked for.
func TestSharedWindows(t *testing.T) {
	now, own := segment.Interval{From: 1, To: 2}, segment.Interval{From: 5, To: 6}
	asks := []Ask{{"a", []segment.Interval{now, {From: 3, To: 4}}}, {"b", []segment.Interval{now}}, {"c", []segment.Interval{own, now}}}
	windows, targets := windowsOf(asks)
	want := []window{{"", now}, {"a", segment.Interval{From: 3, To: 4}}, {"c", own}}
	if !slices.Equal(windows, want) || !slices.Equal(targets[0], []target{{0, 0}, {1, 0}, {2, 1}}) || !slices.Equal(targets[2], []target{{2, 0}}) {
		t.Fatalf("%v for %v", windows, targets)
	}
	s := serve(t, func(_ http.ResponseWriter, r *http.Request) string {
		var answers []string
		for i, q := range strings.Split(strings.TrimSuffix(r.URL.Query().Get("q"), ";"), ";") {
			var series []string
			for n, run := range []string{"a", "b", "c", "stranger"} {
				if strings.Contains(q, `"run" =`) && !strings.Contains(q, `'`+run+`'`) {
					continue
				}
				series = append(series, fmt.Sprintf(`{"name":"indication","tags":{"run":%q,"gauge":"mid"},"columns":["time","median"],"values":[[0,%d.%d]]}`, run, n, i))
			}
			answers = append(answers, fmt.Sprintf(`{"statement_id":%d,"series":[%s]}`, i, strings.Join(series, ",")))
		}
		return `{"results":[` + strings.Join(answers, ",") + `]}`
	})
	source, err := ParseSource(s.URL+"/query?db=lab", "", false)
	if err != nil {
		t.Fatal(err)
	}
	defer source.Close()
	m, err := source.Medians(t.Context(), asks)
	if err != nil {
		t.Fatal(err)
	}
	if m[0][0]["mid"] != 0.0 || m[0][1]["mid"] != 0.1 || m[1][0]["mid"] != 1.0 || m[2][0]["mid"] != 2.2 || m[2][1]["mid"] != 2.0 {
		t.Errorf("%v", m)
	}
	if len(s.asked) != 1 {
		t.Errorf("%d requests", len(s.asked))
	}
}
