package metrics_test

import (
	"io"
	"net/http/httptest"
	"os"
	"regexp"
	"strings"
	"testing"
	"time"

	"github.com/prometheus/client_golang/prometheus/testutil"
	"go.uber.org/goleak"

	"gaugelog/ingest/desk/desktest"
	"gaugelog/ingest/metrics"
	"gaugelog/ingest/segment"
)

func TestMain(m *testing.M) { goleak.VerifyTestMain(m) }

func TestScrape(t *testing.T) {
	w := desktest.New(t, desktest.Options{})
	handler := metrics.Handler(nil, w.Desk)
	var text string
	want := []string{
		`gaugelog_instrument_reading_age_seconds{gauge="mid",rig="slat-3"} \d`,
		`gaugelog_instrument_reading_age_seconds{gauge="air",rig="slat-3"} \d`,
		`gaugelog_instrument_silent{gauge="mid",rig="slat-3"} 0`,
		`gaugelog_instrument_indication_meters{gauge="mid",rig="slat-3"} 0\.001[45]`,
		`gaugelog_instrument_travel_left_meters{gauge="mid",rig="slat-3"} 0\.011`,
		`gaugelog_probe_temperature_celsius{probe="air",rig="slat-3"} (19|2[01])`,
		`gaugelog_probe_humidity_ratio{probe="air",rig="slat-3"} 0\.[45]`,
		`gaugelog_stored_readings_total{rig="slat-3"} [1-9]`,
		`gaugelog_dropped_readings_total{rig="slat-3"} 0`,
		`gaugelog_disk_free_bytes{rig="slat-3"} [1-9]`,
		`gaugelog_sync_age_seconds{rig="slat-3"} \d`,
		`gaugelog_queue_readings{rig="slat-3"} \d`,
		`gaugelog_waiting_readings{rig="slat-3"} \d`,
		`go_goroutines \d`,
	}
	missing := ""
	for deadline := time.Now().Add(10 * time.Second); time.Now().Before(deadline); time.Sleep(100 * time.Millisecond) {
		r := httptest.NewRecorder()
		handler.ServeHTTP(r, httptest.NewRequest("GET", "/metrics", nil))
		b, err := io.ReadAll(r.Result().Body)
		if err != nil || r.Code != 200 {
			t.Fatalf("%d %v", r.Code, err)
		}
		text, missing = string(b), ""
		for _, line := range want {
			if !regexp.MustCompile(`(?m)^` + strings.ReplaceAll(strings.ReplaceAll(line, "{", `\{`), "}", `\}`)).MatchString(text) {
				missing = line
			}
		}
		if missing == "" {
			break
		}
	}
	if missing != "" {
		t.Errorf("no line like %s in\n%s", missing, text)
	}
	w.Hush("mid", true)
	for deadline := time.Now().Add(10 * time.Second); ; time.Sleep(100 * time.Millisecond) {
		r := httptest.NewRecorder()
		handler.ServeHTTP(r, httptest.NewRequest("GET", "/metrics", nil))
		if strings.Contains(r.Body.String(), `gaugelog_alarms{cause="silent",level="abnormal",rig="slat-3"} 1`) {
			break
		}
		if time.Now().After(deadline) {
			t.Fatal("a silent gauge is never counted among the alarms")
		}
	}
}

// The names and helps pass the linter of that ecosystem's own library.
func TestNamesFollowTheConventions(t *testing.T) {
	w := desktest.New(t, desktest.Options{})
	problems, err := testutil.CollectAndLint(metrics.NewCollector(w.Desk))
	if err != nil {
		t.Fatal(err)
	}
	for _, p := range problems {
		t.Errorf("%s: %s", p.Metric, p.Text)
	}
}

func TestSyncsAreMeasured(t *testing.T) {
	root, err := os.OpenRoot(t.TempDir())
	if err != nil {
		t.Fatal(err)
	}
	defer root.Close()
	syncs := metrics.NewSyncs()
	fsys := syncs.Over(segment.OSFS(root, segment.OSOptions{}), "slat-3")
	w, err := segment.NewWriter(fsys, segment.ReadingsDir, 1, segment.WriterOptions{Header: segment.Header{Run: "r", Boot: "b", Rig: strings.Repeat("0", 64)}})
	if err != nil {
		t.Fatal(err)
	}
	if err := w.Close(segment.ClockState{}); err != nil {
		t.Fatal(err)
	}
	r := httptest.NewRecorder()
	metrics.Handler(syncs).ServeHTTP(r, httptest.NewRequest("GET", "/metrics", nil))
	if !regexp.MustCompile(`gaugelog_sync_duration_seconds_count\{rig="slat-3"\} [1-9]`).MatchString(r.Body.String()) {
		t.Errorf("no sync was measured:\n%s", r.Body.String())
	}
}
