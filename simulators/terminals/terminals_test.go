package terminals

import (
	"bytes"
	"context"
	"io"
	"os"
	"testing"
	"time"

	"gaugelog/config"
	"gaugelog/simulators"

	"go.uber.org/goleak"
)

func TestMain(m *testing.M) { goleak.VerifyTestMain(m) }

// open opens the device side; the test is skipped where the system has no
// pseudo-terminals.
func bank(t *testing.T, names []string, heard Heard) *Bank {
	t.Helper()
	b, err := Open(names, heard)
	if err != nil {
		t.Skipf("no pseudo-terminals here: %v", err)
	}
	t.Cleanup(func() {
		if err := b.Close(); err != nil {
			t.Error(err)
		}
	})
	return b
}

func device(t *testing.T, path string) *os.File {
	t.Helper()
	f, err := os.OpenFile(path, os.O_RDWR, 0)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { f.Close() })
	return f
}

// TestRaw sends every byte value both ways: nothing is translated or echoed.
func TestRaw(t *testing.T) {
	heard := make(chan []byte, 100)
	b := bank(t, []string{"sim:one"}, func(_ int, p []byte) { heard <- bytes.Clone(p) })
	f := device(t, b.Terminals()[0].Path)
	all := make([]byte, 256)
	for i := range all {
		all[i] = byte(i)
	}
	if err := b.Write(0, all, time.Second); err != nil {
		t.Fatal(err)
	}
	got := make([]byte, 256)
	if _, err := io.ReadFull(f, got); err != nil || !bytes.Equal(got, all) {
		t.Fatalf("device got %x, %v", got, err)
	}
	if _, err := f.Write(all); err != nil {
		t.Fatal(err)
	}
	var back []byte
	for len(back) < len(all) {
		select {
		case p := <-heard:
			back = append(back, p...)
		case <-time.After(5 * time.Second):
			t.Fatalf("simulator got %d bytes of 256", len(back))
		}
	}
	if !bytes.Equal(back, all) {
		t.Fatalf("simulator got %x", back)
	}
}

func TestUnplugAndBack(t *testing.T) {
	b := bank(t, []string{"sim:one"}, nil)
	f := device(t, b.Terminals()[0].Path)
	if err := b.Unplug(0); err != nil {
		t.Fatal(err)
	}
	if n, err := f.Read(make([]byte, 1)); n != 0 || err == nil {
		t.Errorf("a reader of an unplugged port got %d bytes and no error", n)
	}
	if err := b.Write(0, []byte("x"), time.Second); err == nil {
		t.Error("writing to an unplugged port gave no error")
	}
	path, err := b.Plug(0)
	if err != nil {
		t.Fatal(err)
	}
	again := device(t, path)
	if err := b.Write(0, []byte("y"), time.Second); err != nil {
		t.Fatal(err)
	}
	got := make([]byte, 1)
	if _, err := io.ReadFull(again, got); err != nil || got[0] != 'y' {
		t.Errorf("after plugging: %q, %v", got, err)
	}
}

const liveRig = `
specimen: {name: s, material: timber, section: {shape: rectangle, width: 40 mm, depth: 10 mm}, length: 1000 mm}
supports: [{name: l, at: 0 mm}, {name: r, at: 1000 mm}]
gauges:
  - {name: mid, at: 500 mm, sense: down, resolution: 0.001 mm, port: "sim:mid", frame: asked}
  - {name: side, at: 250 mm, sense: down, resolution: 0.001 mm, port: "sim:side", frame: streamed}
frames:
  - {name: asked, kind: text, request: "?\r", every: 100 ms, end: "\r", pattern: '(?P<value>[+-]\d+\.\d+) (?P<unit>mm|in)'}
  - {name: streamed, kind: text, end: "\r\n", pattern: '(?P<value>[+-]\d{3}\.\d{3})', unit: mm}
loads: [{name: pan, at: 500 mm}]
plan: [{step: zero, hold: 1 h}, {step: l1, set: {pan: 1 kg}, hold: 1 h}]
`

// TestLive asks one gauge and listens to another in real time.
func TestLive(t *testing.T) {
	rig, err := config.Parse("rig.yaml", []byte(liveRig))
	if err != nil {
		t.Fatal(err)
	}
	truth, err := simulators.ParseTruth("truth.yaml", []byte("specimen: {modulus: 10000 MPa}\nevery_gauge: {preset: 1 mm}\npace: [{at: 0 s, every: 20 ms}]\n"))
	if err != nil {
		t.Fatal(err)
	}
	sim, err := simulators.New(simulators.Options{Rig: rig, Truth: truth, Seed: 3, Asked: true})
	if err != nil {
		t.Fatal(err)
	}
	live, err := NewLive(sim)
	if err != nil {
		t.Skipf("no pseudo-terminals here: %v", err)
	}
	defer live.Close()
	ctx, cancel := context.WithCancel(context.Background())
	ended := make(chan error)
	go func() { ended <- live.Run(ctx) }()
	ports := live.Terminals()
	if ports[0].Name != "sim:mid" || ports[1].Name != "sim:side" {
		t.Fatalf("ports %v", ports)
	}
	side := device(t, ports[1].Path)
	got := make([]byte, 10)
	if _, err := io.ReadFull(side, got); err != nil || string(got) != "+001.000\r\n" {
		t.Errorf("streamed %q, %v", got, err)
	}
	mid := device(t, ports[0].Path)
	if _, err := mid.Write([]byte("?\r")); err != nil {
		t.Fatal(err)
	}
	got = make([]byte, 10)
	if _, err := io.ReadFull(mid, got); err != nil || string(got) != "+1.000 mm\r" {
		t.Errorf("asked %q, %v", got, err)
	}
	cancel()
	if err := <-ended; err != nil {
		t.Error(err)
	}
}
