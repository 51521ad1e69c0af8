//go:build campaign && linux

package main

import (
	"context"
	"flag"
	"fmt"
	"hash/fnv"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strconv"
	"sync"
	"syscall"
	"testing"
	"time"

	"gaugelog/analysis/history/historytest"
	"gaugelog/ingest/fetch"
	"gaugelog/ingest/segment"
)

var (
	forwardCycles   = flag.Int("forward.cycles", 20, "how often a forwarding is killed, its server is, or the network between them is cut")
	forwardReadings = flag.Int("forward.readings", 70_000, "how many readings the month of sixteen gauges holds")
	forwardLines    = flag.Int("forward.lines", 500, "lines in one body")
)

// month lays out a month of a rig with sixteen gauges, in many segments, some compressed.
func month(t *testing.T, readings int) string {
	t.Helper()
	dir := filepath.Join(t.TempDir(), "month")
	if err := os.Mkdir(dir, 0o755); err != nil {
		t.Fatal(err)
	}
	root, err := os.OpenRoot(dir)
	if err != nil {
		t.Fatal(err)
	}
	defer root.Close()
	run := historytest.Run{Gauges: 16, Readings: readings, Duration: 30 * 24 * time.Hour, Steps: 4, Compress: true, Roll: 1_000_000}
	if err := run.Write(segment.OSFS(root, segment.OSOptions{SyncOnCloseOnly: true})); err != nil {
		t.Fatal(err)
	}
	return dir
}

// contents is how many readings a run folder holds, and a sum over all of them
// in which each gauge, instant and value counts and the order does not.
func contents(t *testing.T, dir string) (n int, sum uint64) {
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
	for rec, err := range r.Records() {
		if err != nil {
			t.Fatal(err)
		}
		if rec.Kind != segment.Indication {
			continue
		}
		h := fnv.New64a()
		fmt.Fprint(h, rec.Name, " ", rec.MM, " ", rec.Time)
		n, sum = n+1, sum+h.Sum64()
	}
	return n, sum
}

// killing is a forwarding that things happen to.
type killing struct {
	t         *testing.T
	rng       *rand.Rand
	program   string
	run       string
	influx    *influx
	proxy     *cutter
	forwarder *process
	round     int
	events    map[string]int
}

// TestSurviveForward forwards a month of sixteen gauges to a real InfluxDB
// through a network that is cut in the middle of bodies and answers, while the
// server and the forwarder are killed by SIGKILL there. Each time a round ends
// the server is asked for everything: its own count, and each reading with its
// value and nanosecond, are those of the folder, once.
//
//	go test -tags campaign -run SurviveForward$ -timeout 60m ./cmd/gaugelog -forward.cycles 200 -forward.readings 691200 -forward.lines 2000
func TestSurviveForward(t *testing.T) {
	needTool(t, "influxd")
	k := &killing{t: t, rng: rand.New(rand.NewPCG(*surviveSeed, 8)), program: buildProgram(t),
		run: month(t, *forwardReadings), influx: newInflux(t), events: map[string]int{}}
	k.proxy = newCutter(t, k.influx.address)
	n, sum := contents(t, k.run)
	k.begin()
	for cycle := 0; cycle < *forwardCycles; {
		what := []string{"server killed", "forwarder killed", "network cut"}[k.rng.IntN(3)]
		answers := k.rng.IntN(3) == 0
		fired := k.proxy.arm(answers, k.rng.IntN(*forwardLines*60), func() { k.happen(what) })
		select {
		case <-fired:
		case <-k.forwarder.ended:
			if k.proxy.disarm() {
				k.verify(n, sum)
				k.begin()
				continue
			}
			<-fired
		}
		if cycle++; answers {
			what += ", its answer lost"
		}
		k.events[what]++
		if k.forwarder == nil {
			k.start()
		}
	}
	select {
	case <-k.forwarder.ended:
	case <-time.After(10 * time.Minute):
		t.Fatalf("the last round does not end:\n%s", k.forwarder.err.String())
	}
	k.verify(n, sum)
	t.Logf("%d readings, %d rounds, %v", n, k.round, k.events)
}

// begin starts a round into an empty database.
func (k *killing) begin() {
	k.round++
	k.influx.create(k.t, k.database())
	k.start()
}

func (k *killing) database() string { return fmt.Sprintf("lab%d", k.round) }

func (k *killing) start() {
	k.forwarder = start(k.t, k.program, "forward", k.run, "--lines", fmt.Sprint(*forwardLines),
		"--to", "http://"+k.proxy.address+"/write?db="+k.database())
}

// happen does it; the bytes on their way are lost with it.
func (k *killing) happen(what string) {
	switch what {
	case "server killed":
		k.influx.kill()
		k.influx.start(k.t)
	case "forwarder killed":
		if err := k.forwarder.Process.Signal(syscall.SIGKILL); err == nil {
			<-k.forwarder.ended
			k.forwarder = nil
		}
	}
}

// verify asks the server for all it has of this round.
func (k *killing) verify(n int, sum uint64) {
	k.t.Helper()
	if k.forwarder.result != nil {
		k.t.Fatalf("forwarding: %v\n%s", k.forwarder.result, k.forwarder.err.String())
	}
	if got := k.influx.count(k.t, k.database(), "run-1"); got != n {
		k.t.Errorf("round %d: the server counts %d readings, the folder holds %d", k.round, got, n)
	}
	back := filepath.Join(k.t.TempDir(), "back")
	source, err := fetch.ParseSource("http://"+k.influx.address+"/query?db="+k.database(), "", false)
	if err != nil {
		k.t.Fatal(err)
	}
	rig, err := os.ReadFile(filepath.Join(k.run, segment.RigFile))
	if err != nil {
		k.t.Fatal(err)
	}
	if _, err := fetch.Fetch(context.Background(), back, fetch.Options{Source: source, RigBytes: rig, Program: "test"}); err != nil {
		k.t.Fatal(err)
	}
	if gotN, gotSum := contents(k.t, back); gotN != n || gotSum != sum {
		k.t.Errorf("round %d: %d readings back with the sum %x, the folder holds %d with %x", k.round, gotN, gotSum, n, sum)
	}
	refused, err := filepath.Glob(filepath.Join(k.run, "forward", "*.refused.lp"))
	if err != nil || len(refused) > 0 {
		k.t.Errorf("lines were set aside: %v %v", refused, err)
	}
}

// TestSurviveForwardTogether forwards twenty rigs at once into one server.
func TestSurviveForwardTogether(t *testing.T) {
	needTool(t, "influxd")
	const rigs = 20
	program, run, server := buildProgram(t), month(t, *forwardReadings/4), newInflux(t)
	server.create(t, "lab")
	n, sum := contents(t, run)
	var all sync.WaitGroup
	var list []*process
	for i := range rigs {
		name := fmt.Sprintf("rig-%02d", i)
		list = append(list, start(t, program, "forward", run, "--state", filepath.Join(t.TempDir(), name), "--run-tag", "test-of-"+name,
			"--rig-tag", name, "--to", "http://"+server.address+"/write?db=lab"))
	}
	for _, p := range list {
		all.Go(func() { <-p.ended })
	}
	all.Wait()
	rig, err := os.ReadFile(filepath.Join(run, segment.RigFile))
	if err != nil {
		t.Fatal(err)
	}
	source, err := fetch.ParseSource("http://"+server.address+"/query?db=lab", "", false)
	if err != nil {
		t.Fatal(err)
	}
	for i, p := range list {
		name := fmt.Sprintf("rig-%02d", i)
		if p.result != nil {
			t.Fatalf("%s: %v\n%s", name, p.result, p.err.String())
		}
		if got := server.count(t, "lab", "test-of-"+name); got != n {
			t.Errorf("%s: the server counts %d readings, the folder holds %d", name, got, n)
		}
		if i%7 > 0 {
			continue
		}
		back := filepath.Join(t.TempDir(), "back")
		if _, err := fetch.Fetch(t.Context(), back, fetch.Options{Source: source, Rig: name, RigBytes: rig, Program: "test"}); err != nil {
			t.Fatal(err)
		}
		if gotN, gotSum := contents(t, back); gotN != n || gotSum != sum {
			t.Errorf("%s: %d readings back with the sum %s, want %d", name, gotN, strconv.FormatUint(gotSum, 16), n)
		}
	}
}
