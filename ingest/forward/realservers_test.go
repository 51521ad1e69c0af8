package forward

import (
	"context"
	"encoding/json"
	"fmt"
	"io"
	"net"
	"net/http"
	"net/url"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

// program finds a server's program, which the continuous checks must have.
func program(t testing.TB, name string) string {
	t.Helper()
	path, err := exec.LookPath(name)
	if err != nil {
		if os.Getenv("GAUGELOG_CI") == "1" {
			t.Fatalf("%s is not installed", name)
		}
		t.Skipf("%s is not installed (apt-get install influxdb victoria-metrics)", name)
	}
	return path
}

func freePort(t testing.TB) string {
	t.Helper()
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	defer l.Close()
	return l.Addr().String()
}

// process is a server that can be killed and started anew on the same data.
type process struct {
	t    testing.TB
	make func() *exec.Cmd
	ping string
	cmd  *exec.Cmd
}

func (p *process) start() {
	p.t.Helper()
	p.cmd = p.make()
	if err := p.cmd.Start(); err != nil {
		p.t.Fatal(err)
	}
	for deadline := time.Now().Add(30 * time.Second); ; time.Sleep(50 * time.Millisecond) {
		if resp, err := http.Get(p.ping); err == nil {
			resp.Body.Close()
			return
		}
		if time.Now().After(deadline) {
			p.t.Fatalf("%s does not answer at %s", p.cmd.Path, p.ping)
		}
	}
}

func (p *process) kill() {
	_ = p.cmd.Process.Kill()
	_ = p.cmd.Wait()
}

func get(t *testing.T, address string, q url.Values) []byte {
	t.Helper()
	resp, err := http.Get(address + "?" + q.Encode())
	if err != nil {
		t.Fatal(err)
	}
	defer resp.Body.Close()
	b, err := io.ReadAll(resp.Body)
	if err != nil || resp.StatusCode != http.StatusOK {
		t.Fatalf("%s: %s: %s, %v", address, resp.Status, b, err)
	}
	return b
}

// interrupted forwards a run while the server and the forwarder are ended in
// turn, then to the end.
func interrupted(t *testing.T, p *process, n int, address string) {
	fsys, state := runOf(t, n)
	for i := range 6 {
		ctx, stop := context.WithTimeout(t.Context(), time.Duration(10+i*30)*time.Millisecond)
		done := make(chan struct{})
		go func() {
			defer close(done)
			_, _ = forwardRun(t, ctx, fsys, state, address, "", func(o *Options) { o.Wait = sleep; o.Lines = 2000 })
		}()
		if i%2 == 1 {
			time.Sleep(time.Duration(5+i*10) * time.Millisecond)
			p.kill()
			<-done
			p.start()
		}
		<-done
		stop()
	}
	got, err := forwardRun(t, t.Context(), fsys, state, address, "", func(o *Options) { o.Wait = sleep; o.Lines = 2000 })
	if err != nil || got.Refused > 0 {
		t.Fatalf("%+v, %v", got, err)
	}
}

// checksum is the sum of the readings' values in thousandths.
func checksum(n int) (sum int64) {
	for i := range n {
		sum += int64(i%2001 - 1000)
	}
	return sum
}

// TestInfluxDB: on a version 1 server every reading is there exactly once.
func TestInfluxDB(t *testing.T) {
	path, dir, addr := program(t, "influxd"), t.TempDir(), freePort(t)
	conf := filepath.Join(dir, "conf")
	text := fmt.Sprintf("reporting-disabled = true\nbind-address = %q\n[meta]\ndir = %q\n[data]\ndir = %q\nwal-dir = %q\n[http]\nbind-address = %q\nlog-enabled = false\n",
		freePort(t), dir+"/meta", dir+"/data", dir+"/wal", addr)
	if err := os.WriteFile(conf, []byte(text), 0o644); err != nil {
		t.Fatal(err)
	}
	p := &process{t: t, ping: "http://" + addr + "/ping", make: func() *exec.Cmd { return exec.Command(path, "-config", conf) }}
	p.start()
	defer func() { p.kill() }()
	if _, err := http.Post("http://"+addr+"/query?q=CREATE+DATABASE+lab", "", nil); err != nil {
		t.Fatal(err)
	}
	const n = 30_000
	interrupted(t, p, n, "http://"+addr+"/write?db=lab")
	b := get(t, "http://"+addr+"/query", url.Values{"db": {"lab"}, "q": {`SELECT count(mm), sum(mm) FROM indication WHERE run='run-1' AND rig='slat a'`}})
	var r struct {
		Results []struct{ Series []struct{ Values [][]any } }
	}
	if err := json.Unmarshal(b, &r); err != nil || len(r.Results) != 1 || len(r.Results[0].Series) != 1 {
		t.Fatalf("%s: %v", b, err)
	}
	v := r.Results[0].Series[0].Values[0]
	if v[1] != float64(n) {
		t.Errorf("%v readings, want %d", v[1], n)
	}
	if d := v[2].(float64)*1000 - float64(checksum(n)); d > 1e-3 || d < -1e-3 {
		t.Errorf("sum %v, want %d thousandths", v[2], checksum(n))
	}
}

// TestVictoriaMetrics: this server keeps numbers at whole milliseconds, and a
// point that is sent again twice, so that the instants are held to be complete
// and repeats to have one value.
func TestVictoriaMetrics(t *testing.T) {
	path, dir, addr := program(t, "victoria-metrics"), t.TempDir(), freePort(t)
	p := &process{t: t, ping: "http://" + addr + "/health", make: func() *exec.Cmd {
		return exec.Command(path, "-storageDataPath="+dir, "-httpListenAddr="+addr, "-retentionPeriod=100y")
	}}
	p.start()
	defer func() { p.kill() }()
	const n = 5_000
	fsys, state := runOf(t, n)
	got, err := forwardRun(t, t.Context(), fsys, state, "http://"+addr+"/write?db=lab", "", func(o *Options) { o.Wait = sleep })
	if err != nil || got.Refused > 0 {
		t.Fatalf("%+v, %v", got, err)
	}
	// Once more with the cursor gone: everything comes a second time.
	if err := os.RemoveAll(state); err != nil {
		t.Fatal(err)
	}
	if _, err := forwardRun(t, t.Context(), fsys, state, "http://"+addr+"/write?db=lab", "", func(o *Options) { o.Wait = sleep }); err != nil {
		t.Fatal(err)
	}
	_ = get(t, "http://"+addr+"/internal/force_flush", nil)
	b := get(t, "http://"+addr+"/api/v1/export", url.Values{"match[]": {`indication_mm{run="run-1"}`}, "start": {"2020-01-01T00:00:00Z"}})
	seen := map[int64]float64{}
	for _, line := range strings.Split(strings.TrimSpace(string(b)), "\n") {
		var s struct {
			Values     []float64
			Timestamps []int64
		}
		if err := json.Unmarshal([]byte(line), &s); err != nil {
			t.Fatalf("%s: %v", line, err)
		}
		for i, at := range s.Timestamps {
			if v, ok := seen[at]; ok && v != s.Values[i] {
				t.Errorf("at %d both %v and %v", at, v, s.Values[i])
			}
			seen[at] = s.Values[i]
		}
	}
	if len(seen) != n {
		t.Fatalf("%d instants, want %d", len(seen), n)
	}
	for i := range n {
		if got, want := seen[(start+int64(i)*1e9)/1e6], float64(i%2001-1000)/1000; got != want {
			t.Fatalf("reading %d: %v, want %v", i, got, want)
		}
	}
}
