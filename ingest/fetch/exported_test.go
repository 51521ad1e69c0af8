package fetch

import (
	"fmt"
	"net/http"
	"strconv"
	"strings"
	"testing"
)

// values is a server that keeps numbers only; more is added to what it exports.
func values(t *testing.T, more string) *scripted {
	t.Helper()
	const first, last = 1790000000000, 1790000120000
	return serve(t, func(w http.ResponseWriter, r *http.Request) string {
		q := r.URL.Query()
		switch r.URL.Path {
		case "/api/v1/label/run/values":
			return `{"status":"success","data":["run-1"]}`
		case "/api/v1/query":
			if !strings.Contains(q.Get("query"), `"indication_`) && !strings.Contains(q.Get("query"), `"load_`) && !strings.Contains(more, strings.Split(q.Get("query"), `"`)[1][:5]) {
				return `{"status":"success","data":{"result":[]}}`
			}
			at := first
			if strings.HasPrefix(q.Get("query"), "max") {
				at = last
			}
			return fmt.Sprintf(`{"status":"success","data":{"result":[{"metric":{},"value":[1,"%d.%03d"]}]}}`, at/1000, at%1000)
		}
		match := q.Get("match[]")
		out := ""
		of := func(m map[string]string, v []any, at []int64) {
			m["run"], m["rig"], m["db"] = "run-1", "strip", "lab"
			if name := m["__name__"]; strings.Contains(match, `"`+name[:strings.IndexByte(name, '_')]+`_`) {
				out += metric(m, v, at)
			}
		}
		of(map[string]string{"__name__": "indication_mm", "gauge": "mid"}, []any{1, 1.5, 1.5, 2}, []int64{first, first + 60000, first + 60000, last})
		of(map[string]string{"__name__": "indication_shown", "gauge": "mid"}, []any{0.0625}, []int64{first + 60000})
		of(map[string]string{"__name__": "load_newton", "name": "pan"}, []any{9.8}, []int64{first + 1})
		of(map[string]string{"__name__": "load_n", "name": "pan"}, []any{7}, []int64{first + 1})
		if strings.Contains(match, "touch") || strings.Contains(match, "withdraw") {
			out += more
		}
		return out
	})
}

// TestValues joins the fields of a point again, counts a value once that is
// held twice, and says what is lost.
func TestValues(t *testing.T) {
	s := values(t, "")
	sum, lines, err := fetchFrom(t, t.Context(), s.URL+"/api/v1/export", "", nil)
	if err != nil {
		t.Fatal(err)
	}
	all := strings.Join(lines, "\n")
	if sum.Readings != 3 || sum.Marks != 1 || !strings.Contains(sum.Lost, "millisecond") {
		t.Errorf("%+v\n%s", sum, all)
	}
	for _, want := range []string{"mid 1 1790000000000000000", "mid 2 1790000120000000000", "load[{name pan}] [{n 7} {newton 9.8}] 1790000000001000000", "names of steps"} {
		if !strings.Contains(all, want) {
			t.Errorf("%q does not stand in\n%s", want, all)
		}
	}
	for _, r := range s.asked {
		if r.Method != http.MethodGet {
			t.Errorf("%s %s", r.Method, r.URL)
		}
		if from, err := strconv.ParseFloat(r.URL.Query().Get("start"), 64); r.URL.Path == "/api/v1/export" && (err != nil || from < 1790000000) {
			t.Errorf("asked %s", r.URL)
		}
	}
}

// TestWordsGone: a run in which something was withdrawn or done to a gauge is
// refused where the server cannot say what.
func TestWordsGone(t *testing.T) {
	for name, want := range map[string]string{"touch_n": "a gauge was touched", "withdraw_n": "was withdrawn"} {
		s := values(t, metric(map[string]string{"__name__": name, "gauge": "mid", "run": "run-1"}, []any{1}, []int64{1790000000500}))
		if _, _, err := fetchFrom(t, t.Context(), s.URL+"/api/v1/export", "", nil); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%s: %v, want %q", name, err, want)
		}
	}
}

// TestExportGoesWrong: broken answers are errors, and nothing is left behind.
func TestExportGoesWrong(t *testing.T) {
	for _, c := range []struct{ name, path, answer, want string }{
		{"cut inside a line", "/api/v1/export", `{"metric":{"__name__":"indication_mm"},"values":[1,`, "breaks off"},
		{"a portal's page", "/api/v1/export", "<html>", "breaks off"},
		{"no value", "/api/v1/export", `{"metric":{"__name__":"indication_mm","gauge":"mid"},"values":["x"],"timestamps":[1790000000000]}`, "breaks off"},
		{"no list of runs", "/api/v1/label/run/values", "<html>", "no answer of such a server"},
		{"no run", "/api/v1/label/run/values", `{"data":[]}`, "holds no run"},
		{"no extent", "/api/v1/query", "<html>", "no answer of such a server"},
		{"nothing", "/api/v1/query", `{"data":{"result":[]}}`, "holds no reading"},
	} {
		t.Run(c.name, func(t *testing.T) {
			inner := values(t, "")
			s := serve(t, func(w http.ResponseWriter, r *http.Request) string {
				if r.URL.Path == c.path {
					return c.answer
				}
				inner.Config.Handler.ServeHTTP(w, r)
				return ""
			})
			if _, _, err := fetchFrom(t, t.Context(), s.URL+"/api/v1/export", "", nil); err == nil || !strings.Contains(err.Error(), c.want) {
				t.Errorf("%v, want %q", err, c.want)
			}
		})
	}
}
