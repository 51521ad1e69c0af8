package forward

import (
	"bytes"
	"fmt"
	"net/http"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"testing"
	"time"

	"gaugelog/analysis/history/historytest"
	"gaugelog/ingest/segment"
)

// BenchmarkBesideCurl forwards a run to a real InfluxDB, and has one curl post
// the very same batches to it, one after the other over one connection. It
// prints the table.
//
//	go test -run '^$' -bench BesideCurl -benchtime 1x ./ingest/forward
func BenchmarkBesideCurl(b *testing.B) {
	path, err := exec.LookPath("influxd")
	if err != nil {
		b.Skip("influxd is not installed")
	}
	dir, addr := b.TempDir(), freePort(b)
	conf := filepath.Join(dir, "conf")
	text := fmt.Sprintf("reporting-disabled = true\nbind-address = %q\n[meta]\ndir = %q\n[data]\ndir = %q\nwal-dir = %q\n[http]\nbind-address = %q\nlog-enabled = false\n",
		freePort(b), dir+"/meta", dir+"/data", dir+"/wal", addr)
	if err := os.WriteFile(conf, []byte(text), 0o644); err != nil {
		b.Fatal(err)
	}
	p := &process{t: b, ping: "http://" + addr + "/ping", make: func() *exec.Cmd { return exec.Command(path, "-config", conf) }}
	p.start()
	defer p.kill()
	root, err := os.OpenRoot(b.TempDir())
	if err != nil {
		b.Fatal(err)
	}
	defer root.Close()
	fsys := segment.OSFS(root, segment.OSOptions{SyncOnCloseOnly: true})
	run := historytest.Run{Gauges: 16, Readings: 500_000, Duration: 30 * 24 * time.Hour, Compress: true}
	if err := run.Write(fsys); err != nil {
		b.Fatal(err)
	}
	for b.Loop() {
		database := fmt.Sprint("lab", time.Now().UnixNano())
		for _, name := range []string{database, database + "c"} {
			resp, err := http.Post("http://"+addr+"/query?q=CREATE+DATABASE+"+name, "", nil)
			if err != nil {
				b.Fatal(err)
			}
			resp.Body.Close()
		}
		ours, lines, batches := forwarded(b, fsys, "http://"+addr+"/write?db="+database)
		curl := curled(b, batches, "http://"+addr+"/write?precision=ns&db="+database+"c")
		fmt.Printf("| %d lines in %d batches | lines/s |\n|---|---|\n| forward | %.0f |\n| curl | %.0f |\n", lines, len(batches),
			float64(lines)/ours.Seconds(), float64(lines)/curl.Seconds())
		b.ReportMetric(curl.Seconds()/ours.Seconds(), "of-curl")
	}
}

// keeping keeps the batches that were sent, gzipped as they were.
type keeping struct{ batches [][]byte }

func (k *keeping) RoundTrip(r *http.Request) (*http.Response, error) {
	var b bytes.Buffer
	if _, err := b.ReadFrom(r.Body); err != nil {
		return nil, err
	}
	k.batches = append(k.batches, b.Bytes())
	r.Body = struct {
		*bytes.Reader
		closer
	}{bytes.NewReader(b.Bytes()), closer{}}
	return http.DefaultTransport.RoundTrip(r)
}

type closer struct{}

func (closer) Close() error { return nil }

func forwarded(b *testing.B, fsys segment.FS, address string) (took time.Duration, lines int64, batches [][]byte) {
	b.Helper()
	k := &keeping{}
	began := time.Now()
	got, err := forwardRun(b, b.Context(), fsys, b.TempDir(), address, "", func(o *Options) {
		o.Lines, o.Wait, o.Client = 0, sleep, &http.Client{Transport: k}
	})
	if err != nil || got.Refused > 0 {
		b.Fatal(got, err)
	}
	return time.Since(began), got.Sent, k.batches
}

// curled posts the batches by one curl, one after the other.
func curled(b *testing.B, batches [][]byte, address string) time.Duration {
	b.Helper()
	dir := b.TempDir()
	var config bytes.Buffer
	for i, batch := range batches {
		file := filepath.Join(dir, fmt.Sprintf("%06d.gz", i))
		if err := os.WriteFile(file, batch, 0o644); err != nil {
			b.Fatal(err)
		}
		if i > 0 {
			config.WriteString("next\n")
		}
		fmt.Fprintf(&config, "url = %q\ndata-binary = \"@%s\"\nheader = \"Content-Encoding: gzip\"\nfail\nsilent\nshow-error\n", address, file)
	}
	file := filepath.Join(dir, "config")
	if err := os.WriteFile(file, config.Bytes(), 0o644); err != nil {
		b.Fatal(err)
	}
	began := time.Now()
	if out, err := exec.Command("curl", "--config", file).CombinedOutput(); err != nil {
		b.Fatalf("%v: %s", err, out)
	}
	return time.Since(began)
}

// BenchmarkBacklog forwards a run of many segments to a server that takes
// everything at once, and tells the heap at its largest: what is in memory does
// not grow with what waits.
func BenchmarkBacklog(b *testing.B) {
	for _, n := range []int{1_000_000, 4_000_000} {
		b.Run(fmt.Sprint(n), func(b *testing.B) {
			root, err := os.OpenRoot(b.TempDir())
			if err != nil {
				b.Fatal(err)
			}
			defer root.Close()
			fsys := segment.OSFS(root, segment.OSOptions{SyncOnCloseOnly: true})
			if err := (historytest.Run{Gauges: 16, Readings: n, Duration: 365 * 24 * time.Hour, Compress: true}).Write(fsys); err != nil {
				b.Fatal(err)
			}
			for b.Loop() {
				most := uint64(0)
				client := &http.Client{Transport: nowhere{}}
				runtime.GC()
				got, err := forwardRun(b, b.Context(), fsys, b.TempDir(), "http://localhost/write?db=lab", "", func(o *Options) {
					o.Lines, o.Client = 0, client
					o.Tell = func(Notice) {
						var m runtime.MemStats
						runtime.ReadMemStats(&m)
						most = max(most, m.HeapInuse)
					}
				})
				if err != nil || got.Sent < int64(n) {
					b.Fatal(got, err)
				}
				b.ReportMetric(float64(most)/1e6, "MB-at-most")
				b.ReportMetric(float64(got.Sent)/b.Elapsed().Seconds(), "lines/s")
			}
		})
	}
}

// nowhere takes every body at once.
type nowhere struct{}

func (nowhere) RoundTrip(r *http.Request) (*http.Response, error) {
	return &http.Response{StatusCode: http.StatusNoContent, Status: "204 No Content", Body: http.NoBody, Request: r}, nil
}
