package history

import (
	"os"
	"testing"

	"gaugelog/ingest/segment"
)

// BenchmarkOpen reads a recorded run of eight gauges back, in readings a
// second: go test -bench Open -benchtime 5x ./analysis/history
func BenchmarkOpen(b *testing.B) {
	const each = 250_000
	dir := writeRun(b, map[string]string{"rig.yaml": eightGauges()})
	writeMany(b, dir, each)
	b.ResetTimer()
	for b.Loop() {
		h, err := Load(dir)
		if err != nil {
			b.Fatal(err)
		}
		if h.Readings != 8*each {
			b.Fatalf("%d readings", h.Readings)
		}
		h.Close()
	}
	b.ReportMetric(8*each*float64(b.N)/b.Elapsed().Seconds(), "readings/s")
}

var eightNames = []string{"g1", "g2", "g3", "g4", "g5", "g6", "g7", "g8"}

func eightGauges() string {
	text := rigText[:len(rigText)-len("loads:\n  - {name: pan, at: 300 mm}\n")]
	for i, n := range eightNames {
		text += "  - {name: " + n + ", at: " + string(rune('1'+i)) + "0 mm, sense: down, resolution: 0.001 mm}\n"
	}
	return text + "loads:\n  - {name: pan, at: 300 mm}\n"
}

func writeMany(b *testing.B, dir string, each int) {
	root, err := os.OpenRoot(dir)
	if err != nil {
		b.Fatal(err)
	}
	defer root.Close()
	fsys := segment.OSFS(root, segment.OSOptions{SyncOnCloseOnly: true})
	clock := func(at int64) segment.ClockState {
		return segment.ClockState{Boot: at - t0 + 1, Wall: at, Synced: true}
	}
	var w *segment.Writer
	number := 0
	for i := range each {
		at := t0 + int64(i)*second/10
		if w == nil {
			number++
			if w, err = segment.NewWriter(fsys, segment.ReadingsDir, number, segment.WriterOptions{Header: segment.Header{
				Run: "r", Boot: "b", Rig: "00", Program: "test", Clock: clock(at)}}); err != nil {
				b.Fatal(err)
			}
		}
		for g, name := range eightNames {
			v := 5000 + i/1000 + (i*7+g*13)%5
			if err := w.Indication(&segment.Shown{Gauge: name, MM: float64(v) / 1000, Time: at + int64(g)}); err != nil {
				b.Fatal(err)
			}
		}
		if i%100 == 99 {
			if err := w.Checkpoint(clock(at)); err != nil {
				b.Fatal(err)
			}
		}
		if i%40000 == 39999 || i == each-1 {
			if err := w.Close(clock(at)); err != nil {
				b.Fatal(err)
			}
			w = nil
		}
	}
}
