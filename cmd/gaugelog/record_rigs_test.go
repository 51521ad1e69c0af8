package main

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"log/slog"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/ingest"
	"gaugelog/ingest/metrics"
	"gaugelog/simulators"
	"gaugelog/simulators/terminals"
)

// terminalOpener opens a simulated port wherever its terminal is now.
type terminalOpener struct{ live *terminals.Live }

func (o terminalOpener) Open(ctx context.Context, name string, line config.Line) (device.Port, error) {
	for _, t := range o.live.Terminals() {
		if t.Name == name && t.Path != "" {
			return device.SystemOpener{}.Open(ctx, t.Path, line)
		}
	}
	return nil, fmt.Errorf("port %s is unplugged", name)
}

// rigsLive puts the bench's two rigs on terminals in real time, with a fault
// of the port they share, and the log of what they send.
func rigsLive(t *testing.T, logged *bytes.Buffer) *terminals.Live {
	t.Helper()
	faults, err := simulators.ParseFaults("faults.yaml", []byte(`
faults:
  - {kind: unplug, port: "sim:multiplexer", at: 4 s, for: 1 s}
  - {kind: press, gauge: one-button, at: 500 ms, for: 30 s, every: 1 s}
`))
	if err != nil {
		t.Fatal(err)
	}
	var sims []*simulators.Sim
	for n := 1; n <= simulators.BenchRigs; n++ {
		d := simulators.BenchRig(n)
		o := simulators.Options{Rig: d.Rig, Truth: d.Truth, Seed: uint64(n), Asked: true, Frames: logged}
		if n == 1 {
			o.Faults = faults
		}
		sim, err := simulators.New(o)
		if err != nil {
			t.Fatal(err)
		}
		sims = append(sims, sim)
	}
	joint, err := simulators.Join(sims...)
	if err != nil {
		t.Fatal(err)
	}
	live, err := terminals.NewLive(joint)
	if err != nil {
		t.Fatal(err)
	}
	return live
}

// TestRecordRigs records two rigs that share ports and a probe, in real time,
// through the command's own code, until it is interrupted.
func TestRecordRigs(t *testing.T) {
	if testing.Short() {
		t.Skip("nine seconds of real time")
	}
	var logged bytes.Buffer
	live := rigsLive(t, &logged)
	playing, stopPlaying := context.WithCancel(t.Context())
	played := make(chan error, 1)
	go func() { played <- live.Run(playing) }()

	under := t.TempDir()
	var files, folders []string
	for n := 1; n <= simulators.BenchRigs; n++ {
		d := simulators.BenchRig(n)
		file := filepath.Join(under, fmt.Sprintf("rig%d.yaml", n))
		if err := os.WriteFile(file, d.RigText, 0o644); err != nil {
			t.Fatal(err)
		}
		files = append(files, file)
		folders = append(folders, filepath.Join(under, "runs", d.Rig.Specimen.Name))
	}
	recording, stop := context.WithTimeout(t.Context(), 9*time.Second)
	defer stop()
	context.AfterFunc(recording, stopPlaying) // what nobody reads is not to be sent
	said := recordFor(t, recording, files, filepath.Join(under, "runs"), terminalOpener{live})
	if err := <-played; err != nil {
		t.Error(err)
	}
	if err := live.Close(); err != nil {
		t.Error(err)
	}

	sent := map[string][]sentFrame{}
	for line := range strings.Lines(logged.String()) {
		var f sentFrame
		if err := json.Unmarshal([]byte(line), &f); err != nil {
			t.Fatal(err)
		}
		sent[f.Gauge] = append(sent[f.Gauge], f)
	}
	for run, folder := range folders {
		if !strings.Contains(said, "recording "+folder+"\n") {
			t.Errorf("it did not say that it records %s: %q", folder, said)
		}
		found, events := readingsIn(t, folder), eventsIn(t, folder)
		for name := range benchNames(run) {
			followSent(t, name, sent[name], found[name])
		}
		if len(found) != len(benchNames(run)) {
			t.Errorf("%s holds %d instruments", folder, len(found))
		}
		shared := []string{"one-channel", "two-channel"}[run]
		lost, back := of(events, "port-lost", "*"), of(events, "port-back", "*")
		if len(lost) != 1 || len(back) != 1 || lost[0].gauge != shared || back[0].gauge != shared {
			t.Errorf("%s: the shared port was unplugged once; told %+v", folder, append(lost, back...))
		}
		if stopped := of(events, "stopped", "*"); len(stopped) != 1 {
			t.Errorf("%s: stopped %d times", folder, len(stopped))
		}
		if code := ending(t, "verify", folder); code != Done {
			t.Errorf("verify of %s ends with %d", folder, code)
		}
	}
}

// ending runs a command and shows what it says if it fails.
func ending(t *testing.T, args ...string) Code {
	t.Helper()
	var out, errOut bytes.Buffer
	code := run(args, strings.NewReader(""), &out, &errOut)
	if code != Done {
		t.Logf("%v: %s%s", args, &out, &errOut)
	}
	return code
}

// recordFor records as the command does until the context ends, as Ctrl-C has it.
func recordFor(t *testing.T, ctx context.Context, files []string, into string, opener device.Opener) string {
	t.Helper()
	return recordBy(t, ctx, nil, files, into, opener)
}

// recordBy does so by a clock, nil for the machine's own.
func recordBy(t *testing.T, ctx context.Context, clock ingest.Clock, files []string, into string, opener device.Opener) string {
	t.Helper()
	return recordWith(t, ctx, clock, files, into, opener, pageFlags{}, func(*beside) {})
}

// recordWith does so with a page, and hands over what runs beside the recording.
func recordWith(t *testing.T, ctx context.Context, clock ingest.Clock, files []string, into string, opener device.Opener, page pageFlags, runs func(*beside)) string {
	t.Helper()
	cmd := recordCommand()
	var out, errOut bytes.Buffer
	cmd.SetOut(&out)
	cmd.SetErr(&errOut)
	r := &recording{start: ingest.SystemClock{}.Now(), syncs: metrics.NewSyncs(), clock: clock}
	defer func() {
		if err := r.close(); err != nil {
			t.Error(err)
		}
	}()
	if err := r.open(files, into); err != nil {
		t.Fatal(err)
	}
	logger := slog.New(slog.DiscardHandler)
	beside, err := r.openBeside(page, logger, &errOut)
	if err != nil {
		t.Fatal(err)
	}
	runs(beside)
	if err := r.run(ctx, cmd, opener, logger, beside); err != nil {
		t.Fatalf("%v\n%s", err, &errOut)
	}
	if err := beside.close(); err != nil {
		t.Error(err)
	}
	return out.String()
}

// followSent wants the values recorded to be those sent, in their order, with
// nothing left out but at the ends and around an unplugged port.
func followSent(t *testing.T, name string, sent []sentFrame, found []foundReading) {
	t.Helper()
	if len(found) < 5 {
		t.Errorf("%s: only %d readings of %d sent", name, len(found), len(sent))
		return
	}
	// Values repeat, so where the recording began is where the least is missing.
	skipped, left := math.MaxInt, 0
	for start := range sent {
		if n, end := missingFrom(name, sent[start:], found); n < skipped {
			skipped, left = n, len(sent)-start-end
		}
	}
	if skipped == math.MaxInt {
		t.Errorf("%s: what was recorded was never sent in that order", name)
		return
	}
	if skipped > 0 && !strings.HasSuffix(name, "-channel") || skipped > 2 {
		t.Errorf("%s: %d frames between others are missing", name, skipped)
	}
	if left > 3 {
		t.Errorf("%s: the last %d frames are missing", name, left)
	}
}

// missingFrom counts the frames left out between those recorded, if the first
// recorded one is the first sent; end is behind the last one recorded.
func missingFrom(name string, sent []sentFrame, found []foundReading) (missing, end int) {
	for i, r := range found {
		from := end
		for end < len(sent) && !(math.Abs(sent[end].MM-r.value) <= tolerance(name)) {
			end++
		}
		if end == len(sent) || i == 0 && end > 0 {
			return math.MaxInt, 0
		}
		missing += end - from
		end++
	}
	return missing, end
}
