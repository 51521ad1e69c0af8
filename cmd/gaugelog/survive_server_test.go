//go:build campaign && linux

package main

import (
	"bytes"
	"encoding/json"
	"fmt"
	"io"
	"net"
	"net/http"
	"net/url"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"syscall"
	"testing"
	"time"

	"github.com/influxdata/line-protocol/v2/lineprotocol"
)

// point is one number of one series as a server should give it back.
type point struct {
	ns    int64
	value float64
}

// recordedRun makes a run with the built program: several gauges, compressed
// and plain segments, marks, events.
func recordedRun(t *testing.T) (run string) {
	t.Helper()
	program := buildProgram(t)
	f := newFeeder(t, 3, 50)
	dir := t.TempDir()
	rig, ports := f.write(t, dir, "{sampling: all, sync: 200 ms, roll: {size: 16 kB}}")
	run = filepath.Join(dir, "run")
	p := start(t, program, "record", rig, "--into", run, "--ports", ports, "--quiet")
	p.says(t, "recording", 30*time.Second)
	time.Sleep(time.Second)
	do(t, program, "mark", run, "pan", "12.40 kg", "--by", `A "B" C, D=E`)
	do(t, program, "mark", run, "--note", `said "go", then #2 \ over`)
	time.Sleep(4 * time.Second)
	if err := p.end(t, syscall.SIGTERM); err != nil {
		t.Fatalf("%v\n%s", err, p.err.String())
	}
	return run
}

// texts are the run's line-protocol files as they are, unpacked where compressed.
func texts(t *testing.T, run string) map[string][]byte {
	t.Helper()
	out := map[string][]byte{}
	f := &found{}
	for _, n := range segmentNumbers(t, run) {
		name := filepath.Join(run, "readings", fmt.Sprintf("%06d.lp", n))
		out[name] = readSegment(t, name, f)
	}
	if f.packed == 0 {
		t.Fatal("no segment is compressed")
	}
	for _, name := range []string{"marks.lp", "events.lp"} {
		text, err := os.ReadFile(filepath.Join(run, name))
		if err != nil {
			t.Fatal(err)
		}
		out[name] = text
	}
	return out
}

// series collects every number in texts, by "measurement_field{tags}".
func series(t *testing.T, texts map[string][]byte) map[string][]point {
	t.Helper()
	out := map[string][]point{}
	for name, text := range texts {
		d := lineprotocol.NewDecoderWithBytes(text)
		for d.Next() {
			measurement, err := d.Measurement()
			if err != nil {
				t.Fatalf("%s: %v", name, err)
			}
			var tags []string
			numbers := map[string]float64{}
			for {
				k, v, err := d.NextTag()
				if err != nil {
					t.Fatalf("%s: %v", name, err)
				}
				if k == nil {
					break
				}
				tags = append(tags, string(k)+"="+string(v))
			}
			for {
				k, v, err := d.NextField()
				if err != nil {
					t.Fatalf("%s: %v", name, err)
				}
				if k == nil {
					break
				}
				switch x := v.Interface().(type) {
				case float64:
					numbers[string(k)] = x
				case int64:
					numbers[string(k)] = float64(x)
				}
			}
			at, err := d.Time(lineprotocol.Nanosecond, time.Time{})
			if err != nil {
				t.Fatalf("%s: %v", name, err)
			}
			for field, v := range numbers {
				key := string(measurement) + "_" + field + "{" + strings.Join(tags, ",") + "}"
				out[key] = append(out[key], point{at.UnixNano(), v})
			}
		}
	}
	for _, points := range out {
		slices.SortFunc(points, func(a, b point) int { return int(a.ns - b.ns) })
	}
	return out
}

func freePort(t *testing.T) string {
	t.Helper()
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	defer l.Close()
	return l.Addr().String()
}

// post sends body and wants one of the codes of success.
func post(t *testing.T, url string, body []byte) {
	t.Helper()
	r, err := http.Post(url, "text/plain; charset=utf-8", bytes.NewReader(body))
	if err != nil {
		t.Fatal(err)
	}
	defer r.Body.Close()
	if said, _ := io.ReadAll(r.Body); r.StatusCode/100 != 2 {
		t.Fatalf("%s answers %s: %s", url, r.Status, said)
	}
}

func get(t *testing.T, url string) []byte {
	t.Helper()
	r, err := http.Get(url)
	if err != nil {
		t.Fatal(err)
	}
	defer r.Body.Close()
	body, err := io.ReadAll(r.Body)
	if err != nil || r.StatusCode != http.StatusOK {
		t.Fatalf("%s answers %s, %v: %s", url, r.Status, err, body)
	}
	return body
}

func waitForServer(t *testing.T, url string) {
	t.Helper()
	waitFor(t, 60*time.Second, url, func() bool {
		r, err := http.Get(url)
		if err != nil {
			return false
		}
		r.Body.Close()
		return r.StatusCode/100 == 2
	})
}

// TestSurviveInfluxDB writes a run's files unchanged, comments and all, to a
// real InfluxDB 1.x and wants every number back under its stamp.
func TestSurviveInfluxDB(t *testing.T) {
	needTool(t, "influxd")
	run := recordedRun(t)
	texts := texts(t, run)
	dir, http := t.TempDir(), freePort(t)
	config := fmt.Sprintf("reporting-disabled = true\nbind-address = %q\n[meta]\ndir = %q\n[data]\ndir = %q\nwal-dir = %q\n[http]\nbind-address = %q\n",
		freePort(t), dir+"/meta", dir+"/data", dir+"/wal", http)
	if err := os.WriteFile(dir+"/influxdb.conf", []byte(config), 0o644); err != nil {
		t.Fatal(err)
	}
	start(t, "influxd", "-config", dir+"/influxdb.conf")
	base := "http://" + http
	waitForServer(t, base+"/ping")
	post(t, base+"/query?q="+url.QueryEscape("CREATE DATABASE lab"), nil)
	for _, text := range texts {
		post(t, base+"/write?db=lab", text)
	}
	total := 0
	for key, want := range series(t, texts) {
		got := askInflux(t, base, key)
		if !slices.Equal(got, want) {
			t.Errorf("%s: %d points back, %d written, or they differ", key, len(got), len(want))
		}
		total += len(got)
	}
	if total < 500 {
		t.Errorf("only %d numbers came back", total)
	}
	t.Logf("%d files unchanged, %d numbers back with their nanoseconds", len(texts), total)
}

// askInflux selects one field of one series.
func askInflux(t *testing.T, base, key string) (out []point) {
	t.Helper()
	name, tags, _ := strings.Cut(strings.TrimSuffix(key, "}"), "{")
	measurement, field, _ := strings.Cut(name, "_")
	q := fmt.Sprintf("SELECT %q FROM %q", field, measurement)
	for i, tag := range strings.Split(tags, ",") {
		if k, v, ok := strings.Cut(tag, "="); ok {
			q += []string{" WHERE ", " AND "}[min(i, 1)] + fmt.Sprintf("%q = '%s'", k, v)
		}
	}
	if measurement == "event" && !strings.Contains(tags, "gauge=") {
		q += ` AND "gauge" = ''`
	}
	var answer struct {
		Results []struct {
			Error  string
			Series []struct{ Values [][2]json.Number }
		}
	}
	d := json.NewDecoder(bytes.NewReader(get(t, base+"/query?db=lab&epoch=ns&q="+url.QueryEscape(q))))
	d.UseNumber()
	if err := d.Decode(&answer); err != nil || len(answer.Results) != 1 || answer.Results[0].Error != "" {
		t.Fatalf("%s: %v %+v", q, err, answer)
	}
	for _, s := range answer.Results[0].Series {
		for _, v := range s.Values {
			ns, err1 := v[0].Int64()
			x, err2 := v[1].Float64()
			if err1 != nil || err2 != nil {
				t.Fatalf("%s: %v", q, v)
			}
			out = append(out, point{ns, x})
		}
	}
	return out
}

// TestSurviveVictoriaMetrics does so with a real VictoriaMetrics, which keeps
// milliseconds and no texts.
func TestSurviveVictoriaMetrics(t *testing.T) {
	needTool(t, "victoria-metrics")
	run := recordedRun(t)
	texts := texts(t, run)
	http := freePort(t)
	start(t, "victoria-metrics", "-storageDataPath="+t.TempDir(), "-httpListenAddr="+http, "-retentionPeriod=100y")
	base := "http://" + http
	waitForServer(t, base+"/health")
	for _, text := range texts {
		post(t, base+"/write", text)
	}
	// What was just written is found a few seconds later.
	until := fmt.Sprint("&start=0&end=", time.Now().Add(time.Hour).Unix())
	answer, previous := []byte(nil), -1
	waitFor(t, 60*time.Second, "the last points", func() bool {
		get(t, base+"/internal/force_flush")
		time.Sleep(2 * time.Second)
		answer, previous = get(t, base+"/api/v1/export?match="+url.QueryEscape(`{__name__!=""}`)+until), len(answer)
		return len(answer) == previous
	})
	got := map[string][]point{}
	for line := range bytes.Lines(answer) {
		var s struct {
			Metric     map[string]string
			Values     []float64
			Timestamps []int64
		}
		if err := json.Unmarshal(line, &s); err != nil {
			t.Fatalf("%v: %s", err, line)
		}
		var tags []string
		for k, v := range s.Metric {
			if k != "__name__" && k != "db" {
				tags = append(tags, k+"="+v)
			}
		}
		slices.Sort(tags)
		key := s.Metric["__name__"] + "{" + strings.Join(tags, ",") + "}"
		for i := range s.Values {
			got[key] = append(got[key], point{s.Timestamps[i], s.Values[i]})
		}
	}
	total := 0
	for key, points := range series(t, texts) {
		want := make([]point, len(points))
		for i, p := range points {
			want[i] = point{p.ns / 1e6, p.value}
		}
		if back := got[key]; !slices.Equal(sorted(back), sorted(want)) {
			t.Errorf("%s: %d points back, %d written, or they differ", key, len(back), len(want))
		}
		total += len(want)
	}
	if total < 500 {
		t.Errorf("only %d numbers came back", total)
	}
	t.Logf("%d files unchanged, %d numbers back with their milliseconds", len(texts), total)
}

// sorted orders points by stamp, and by value where milliseconds are equal.
func sorted(points []point) []point {
	out := slices.Clone(points)
	slices.SortFunc(out, func(a, b point) int {
		if a.ns != b.ns {
			return int(a.ns - b.ns)
		}
		return strings.Compare(strconv.FormatFloat(a.value, 'f', 9, 64), strconv.FormatFloat(b.value, 'f', 9, 64))
	})
	return out
}

// TestSurviveOrdinaryTools checks a run with the tools of any Linux machine.
func TestSurviveOrdinaryTools(t *testing.T) {
	needTool(t, "sha256sum", "zstd", "zstdcat")
	run := recordedRun(t)
	if out := do(t, "sh", "-c", "cd "+run+" && sha256sum -c --strict SHA256SUMS"); strings.Count(out, ": OK") < 5 {
		t.Errorf("sha256sum checked too little:\n%s", out)
	}
	packed, err := filepath.Glob(filepath.Join(run, "readings", "*.zst"))
	if err != nil || len(packed) == 0 {
		t.Fatalf("%d compressed segments, %v", len(packed), err)
	}
	texts := texts(t, run)
	for _, name := range packed {
		do(t, "zstd", "-t", name)
		if out := do(t, "zstdcat", name); out != string(texts[strings.TrimSuffix(name, ".zst")]) {
			t.Errorf("zstdcat %s gives another text", name)
		}
	}
}
