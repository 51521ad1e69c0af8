package main

import (
	"bytes"
	"compress/gzip"
	"context"
	"fmt"
	"io"
	"net/http"
	"net/http/httptest"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"

	"gaugelog/ingest"
	"gaugelog/simulators"
)

// setClock is the machine's clock, called set: what is recorded by one that is
// not is kept back until it is.
type setClock struct{ ingest.SystemClock }

func (c setClock) State() ingest.ClockState {
	s := c.SystemClock.State()
	s.Synchronised = true
	return s
}

// TestRecordForwards records two rigs that name a server each while it records:
// one that takes everything, one that never answers. What the first has at the
// end, the end of the recording included, is what its run folder holds; the
// second holds nothing up.
func TestRecordForwards(t *testing.T) {
	if testing.Short() {
		t.Skip("five seconds of real time and more")
	}
	var mu sync.Mutex
	lines := map[string]bool{}
	taking := httptest.NewServer(http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		z, err := gzip.NewReader(r.Body)
		if err != nil {
			t.Error(err)
			return
		}
		body, err := io.ReadAll(z)
		if err != nil {
			return // it is cut off at the end, and comes again
		}
		mu.Lock()
		defer mu.Unlock()
		for line := range strings.Lines(string(body)) {
			lines[line] = true
		}
		w.WriteHeader(http.StatusNoContent)
	}))
	defer taking.Close()
	asked := make(chan struct{}, 100)
	hanging := httptest.NewServer(http.HandlerFunc(func(_ http.ResponseWriter, r *http.Request) {
		_, _ = io.Copy(io.Discard, r.Body)
		asked <- struct{}{}
		<-r.Context().Done()
	}))
	defer hanging.Close()

	var logged bytes.Buffer
	live := rigsLive(t, &logged)
	playing, stopPlaying := context.WithCancel(t.Context())
	played := make(chan error, 1)
	go func() { played <- live.Run(playing) }()
	under := t.TempDir()
	var files, folders []string
	for n, server := range []string{taking.URL, hanging.URL} {
		d := simulators.BenchRig(n + 1)
		file := filepath.Join(under, fmt.Sprintf("rig%d.yaml", n+1))
		text := fmt.Sprintf("%s\nforward: {to: '%s/write?db=lab'}\n", d.RigText, server)
		if err := os.WriteFile(file, []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
		files, folders = append(files, file), append(folders, filepath.Join(under, "runs", d.Rig.Specimen.Name))
	}
	recording, stop := context.WithTimeout(t.Context(), 5*time.Second)
	defer stop()
	context.AfterFunc(recording, stopPlaying)
	var scraped string
	var scraping sync.WaitGroup
	recordWith(t, recording, setClock{}, files, filepath.Join(under, "runs"), terminalOpener{live}, pageFlags{address: "127.0.0.1:0"}, func(b *beside) {
		address := b.server.URL() + "metrics"
		scraping.Go(func() { scraped = scrape(recording, address) })
	})
	scraping.Wait()
	wantMetrics(t, scraped)
	if err := <-played; err != nil {
		t.Error(err)
	}
	if err := live.Close(); err != nil {
		t.Error(err)
	}

	if len(asked) == 0 {
		t.Error("the server that hangs was never asked")
	}
	stored := [2]int{}
	for i, folder := range folders {
		for _, readings := range readingsIn(t, folder) {
			stored[i] += len(readings)
		}
		if events := eventsIn(t, folder); len(of(events, "dropped", "*")) > 0 || len(of(events, "stopped", "*")) != 1 {
			t.Errorf("%s: %+v", folder, events)
		}
	}
	sent, stopped := 0, false
	for line := range lines {
		if strings.HasPrefix(line, "indication,") || strings.HasPrefix(line, "ambient,") {
			sent++
		}
		stopped = stopped || strings.HasPrefix(line, "event,kind=stopped,")
	}
	if sent != stored[0] || sent == 0 || !stopped {
		t.Errorf("the server has %d readings (the end: %v), the folder %d", sent, stopped, stored[0])
	}
	if stored[1] == 0 {
		t.Error("nothing was recorded beside the server that hangs")
	}
}
