package main

import (
	"context"
	"io"
	"net/http"
	"regexp"
	"strings"
	"testing"
	"time"

	"github.com/prometheus/client_golang/prometheus/testutil/promlint"
)

// scrape asks for the metrics once and again, as a monitoring server does, until
// the recording ends, and gives the last whole answer.
func scrape(ctx context.Context, address string) (last string) {
	for {
		if req, err := http.NewRequestWithContext(ctx, http.MethodGet, address, nil); err == nil {
			if resp, err := http.DefaultClient.Do(req); err == nil {
				b, err := io.ReadAll(resp.Body)
				if resp.Body.Close(); err == nil && resp.StatusCode == http.StatusOK && strings.HasPrefix(resp.Header.Get("Content-Type"), "text/plain") {
					last = string(b)
				}
			}
		}
		select {
		case <-ctx.Done():
			http.DefaultClient.CloseIdleConnections()
			return last
		case <-time.After(200 * time.Millisecond):
		}
	}
}

// wantMetrics holds what was scraped from two rigs that record and forward to
// the conventions of that ecosystem, by its own linter, and to be all there.
func wantMetrics(t *testing.T, text string) {
	t.Helper()
	problems, err := promlint.New(strings.NewReader(text)).Lint()
	if err != nil {
		t.Fatalf("%v in\n%s", err, text)
	}
	for _, p := range problems {
		t.Errorf("%s: %s", p.Metric, p.Text)
	}
	for _, want := range []string{
		`gaugelog_instrument_reading_age_seconds\{gauge="[^"]+",rig="[^"]+"\} \d`, // per gauge: its age
		`gaugelog_instrument_silent\{gauge="[^"]+",rig="[^"]+"\} [01]`,
		`gaugelog_port_frames_total\{port="[^"]+",rig="[^"]+"\} [1-9]`, // frames
		`gaugelog_port_rejected_frames_total\{port="[^"]+",rig="[^"]+"\} \d`,
		`gaugelog_port_reconnects_total\{port="[^"]+",rig="[^"]+"\} \d`,
		`gaugelog_port_received_bytes_total\{port="[^"]+",rig="[^"]+"\} [1-9]`,
		`gaugelog_disk_free_bytes\{rig="[^"]+"\} [1-9]`,
		`gaugelog_disk_fault\{rig="[^"]+"\} 0`,
		`gaugelog_sync_age_seconds\{rig="[^"]+"\} \d`,
		`gaugelog_sync_duration_seconds_bucket\{rig="[^"]+",le="\+Inf"\} [1-9]`, // how long a sync takes
		`gaugelog_sync_duration_seconds_count\{rig="[^"]+"\} [1-9]`,
		`gaugelog_queue_readings\{rig="[^"]+"\} \d`,
		`gaugelog_waiting_readings\{rig="[^"]+"\} \d`,
		`gaugelog_stored_readings_total\{rig="[^"]+"\} [1-9]`,
		`gaugelog_dropped_readings_total\{rig="[^"]+"\} 0`,
		`gaugelog_clock_synchronized\{rig="[^"]+"\} [01]`,
		`gaugelog_forward_segments_behind\{rig="[^"]+"\} \d`, // what is still to be sent
		`gaugelog_forward_sent_lines_total\{rig="[^"]+"\} [1-9]`,
		`gaugelog_forward_refused_lines_total\{rig="[^"]+"\} 0`,
		`gaugelog_forward_unset_readings_total\{rig="[^"]+"\} \d`,
		`gaugelog_forward_retries_total\{rig="[^"]+"\} \d`,
		`gaugelog_forward_held\{rig="[^"]+"\} 0`,
		`process_resident_memory_bytes [1-9]`,
		`go_goroutines [1-9]`,
	} {
		if !regexp.MustCompile(`(?m)^` + want).MatchString(text) {
			t.Errorf("no line like %s in\n%s", want, text)
		}
	}
}
