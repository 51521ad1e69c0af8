//go:build campaign && linux

package main

import (
	"bufio"
	"bytes"
	"encoding/json"
	"fmt"
	"math/rand/v2"
	"net/url"
	"os"
	"os/exec"
	"path/filepath"
	"syscall"
	"testing"
	"time"

	"gaugelog/ingest/segment"
)

// victoria is a real VictoriaMetrics on loopback, that can be killed and started
// anew on the same data. What it said 204 to in the last seconds and had not yet
// written to disk is lost with it.
type victoria struct {
	address, dir string
	cmd          *exec.Cmd
}

func (v *victoria) start(t *testing.T) {
	v.cmd = exec.Command("victoria-metrics", "-storageDataPath="+v.dir, "-httpListenAddr="+v.address, "-retentionPeriod=100y")
	if err := v.cmd.Start(); err != nil {
		t.Error(err)
		return
	}
	waitForServer(t, "http://"+v.address+"/health")
}

func (v *victoria) kill() {
	_ = v.cmd.Process.Kill()
	_ = v.cmd.Wait()
}

// held is what the server has of a run: by gauge and instant, ms, the value.
// Points that came twice have one value, or the test fails.
func (v *victoria) held(t *testing.T, tag string) (values map[string]float64, points int) {
	t.Helper()
	get(t, "http://"+v.address+"/internal/force_flush")
	b := get(t, "http://"+v.address+"/api/v1/export?"+url.Values{"match[]": {`indication_mm{run="` + tag + `"}`}, "start": {"2000-01-01T00:00:00Z"}, "reduce_mem_usage": {"1"}}.Encode())
	values = map[string]float64{}
	for lines := bufio.NewReader(bytes.NewReader(b)); ; {
		line, err := lines.ReadBytes('\n')
		if len(line) > 0 {
			var s struct {
				Metric     map[string]string
				Values     []float64
				Timestamps []int64
			}
			if err := json.Unmarshal(line, &s); err != nil {
				t.Fatal(err)
			}
			for i, at := range s.Timestamps {
				key := fmt.Sprint(s.Metric["gauge"], " ", at)
				if old, twice := values[key]; twice && old != s.Values[i] {
					t.Errorf("%s is both %v and %v", key, old, s.Values[i])
				}
				values[key] = s.Values[i]
				points++
			}
		}
		if err != nil {
			return values, points
		}
	}
}

// wanted is what the run folder holds, at whole milliseconds.
func wanted(t *testing.T, dir string) map[string]float64 {
	t.Helper()
	root, err := os.OpenRoot(dir)
	if err != nil {
		t.Fatal(err)
	}
	defer root.Close()
	d, err := segment.OpenFolder(segment.OSFS(root, segment.OSOptions{}))
	if err != nil {
		t.Fatal(err)
	}
	r := d.Read(segment.ReadOptions{})
	defer r.Close()
	out := map[string]float64{}
	for rec, err := range r.Records() {
		if err != nil {
			t.Fatal(err)
		}
		if rec.Kind == segment.Indication {
			out[fmt.Sprint(rec.Name, " ", rec.Time/1e6)] = rec.MM
		}
	}
	return out
}

// TestSurviveForwardVictoria forwards to a real VictoriaMetrics while the
// forwarder is killed, the network is cut in bodies and in answers, and the
// server is killed. This server keeps numbers only, at whole milliseconds, and a
// point that is sent again twice. What holds:
//
//   - as long as the server itself is not killed, every instant of every gauge
//     is there with its value, and what is there twice has one value;
//   - a server that is killed has lost what it had said 204 to and not yet
//     written, some seconds of it: nobody who forwards can know;
//   - sending everything again (without RUN/forward) makes it whole.
//
// go test -tags campaign -run SurviveForwardVictoria -timeout 60m ./cmd/gaugelog -forward.cycles 200 -forward.readings 691200 -forward.lines 2000
func TestSurviveForwardVictoria(t *testing.T) {
	needTool(t, "victoria-metrics")
	rng := rand.New(rand.NewPCG(*surviveSeed, 9))
	program, run := buildProgram(t), month(t, *forwardReadings)
	want := wanted(t, run)
	for _, killed := range []bool{false, true} {
		v := &victoria{address: freePort(t), dir: t.TempDir()}
		v.start(t)
		events, missing, points, rounds := map[string]int{}, 0, 0, 0
		for happened := 0; happened < *forwardCycles/2; rounds++ {
			tag := fmt.Sprint("round-", rounds)
			again(t, run)
			happened += v.round(t, rng, program, run, tag, killed, *forwardCycles/2-happened, events)
			got, n := v.held(t, tag)
			m := missingOf(t, want, got)
			missing, points = missing+m, points+n
			if !killed && m > 0 {
				t.Errorf("%d of %d instants are missing, though the server was never killed", m, len(want))
			}
			if m == 0 {
				continue
			}
			again(t, run)
			do(t, program, "forward", run, "--run-tag", tag, "--to", "http://"+v.address+"/write")
			got, _ = v.held(t, tag)
			if left := missingOf(t, want, got); left > 0 {
				t.Errorf("%d instants are missing after everything was sent again", left)
			}
		}
		t.Logf("server killed: %v; %d rounds of %d instants, %v; %d missing before everything was sent again, %d points held", killed, rounds, len(want), events, missing, points)
		v.kill()
	}
}

// again makes the next forwarding begin anew.
func again(t *testing.T, run string) {
	t.Helper()
	if err := os.RemoveAll(filepath.Join(run, "forward")); err != nil {
		t.Fatal(err)
	}
}

// round forwards the run once, to its end, with things happening; at most so
// many. It tells how many did.
func (v *victoria) round(t *testing.T, rng *rand.Rand, program, run, tag string, killed bool, most int, events map[string]int) (happened int) {
	proxy := newCutter(t, v.address)
	begin := func() *process {
		return start(t, program, "forward", run, "--run-tag", tag, "--lines", fmt.Sprint(*forwardLines), "--to", "http://"+proxy.address+"/write")
	}
	p := begin()
	for happened < most {
		kinds := []string{"forwarder killed", "network cut", "server killed"}
		if !killed {
			kinds = kinds[:2]
		}
		what, answers := kinds[rng.IntN(len(kinds))], rng.IntN(3) == 0
		fired := proxy.arm(answers, rng.IntN(*forwardLines*60), func() {
			switch what {
			case "server killed":
				v.kill()
				v.start(t)
			case "forwarder killed":
				_ = p.Process.Signal(syscall.SIGKILL)
				<-p.ended
			}
		})
		select {
		case <-fired:
		case <-p.ended:
			if proxy.disarm() {
				return happened // it came to its end
			}
			<-fired
		}
		happened++
		events[what]++
		if what == "forwarder killed" {
			p = begin()
		}
	}
	select {
	case <-p.ended:
	case <-time.After(10 * time.Minute):
		t.Fatalf("the forwarding does not end:\n%s", p.err.String())
	}
	if p.result != nil {
		t.Fatalf("forwarding: %v\n%s", p.result, p.err.String())
	}
	return happened
}

// missingOf counts what is missing, and fails where a value is another one.
func missingOf(t *testing.T, want, got map[string]float64) (missing int) {
	t.Helper()
	for key, mm := range want {
		v, there := got[key]
		switch {
		case !there:
			missing++
		case v != mm:
			t.Errorf("%s is %v, the folder has %v", key, v, mm)
		}
	}
	return missing
}
