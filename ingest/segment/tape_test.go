package segment_test

import (
	"fmt"
	"io"
	"os"
	"testing"

	"gaugelog/ingest/segment"
)

// TestTape reads a run from every place between two blocks and finds what the
// Reader finds behind it, before and after compression.
func TestTape(t *testing.T) {
	root, err := os.OpenRoot(t.TempDir())
	if err != nil {
		t.Fatal(err)
	}
	defer root.Close()
	fsys := segment.OSFS(root, segment.OSOptions{})
	h := segment.Header{Run: "r", Boot: "b", Rig: "0"}
	const start = int64(1790000000000000000)
	clock := func(i int64) segment.ClockState {
		return segment.ClockState{Boot: 1e9 + i, Wall: start + i, Synced: i >= 30e9}
	}
	h.Clock = clock(0)
	w, err := segment.NewWriter(fsys, segment.ReadingsDir, 1, segment.WriterOptions{Header: h})
	if err != nil {
		t.Fatal(err)
	}
	for i := int64(1); i <= 60; i++ {
		if err := w.Indication(&segment.Shown{Gauge: "mid", MM: float64(i) / 8, Time: start + i*1e9}); err != nil {
			t.Fatal(err)
		}
		if i%5 == 0 {
			if err := w.Checkpoint(clock(i * 1e9)); err != nil {
				t.Fatal(err)
			}
		}
	}
	offsets := []int64{0, w.Size()}
	if err := w.Close(clock(61e9)); err != nil {
		t.Fatal(err)
	}
	read := func(offset int64) (got []string, to int64) {
		d, err := segment.OpenFolder(fsys)
		if err != nil {
			t.Fatal(err)
		}
		tape, err := d.Tape("readings/000001.lp", offset)
		if err != nil {
			t.Fatal(err)
		}
		defer tape.Close()
		for {
			s, err := tape.Next()
			if err == io.EOF {
				return got, to
			}
			if err != nil {
				t.Fatal(err)
			}
			to = s.To
			for i := range s.Time {
				got = append(got, fmt.Sprint(tape.Gauges()[s.Gauge[i]], s.Micro[i], s.Time[i]))
			}
		}
	}
	all, end := read(0)
	if len(all) != 60 {
		t.Fatalf("%d readings, want 60", len(all))
	}
	if rest, _ := read(end); len(rest) != 0 {
		t.Errorf("%d readings behind the end", len(rest))
	}
	// Every place behind a comment is one to go on from.
	text, err := os.ReadFile(root.Name() + "/readings/000001.lp")
	if err != nil {
		t.Fatal(err)
	}
	for i, at := 0, 0; i < len(text); i++ {
		if text[i] != '\n' {
			continue
		}
		if text[at] == '#' {
			offsets = append(offsets, int64(i)+1)
		}
		at = i + 1
	}
	before := map[int64]string{}
	for _, o := range offsets {
		got, _ := read(o)
		if want := fmt.Sprint(all[60-len(got):]); fmt.Sprint(got) != want {
			t.Errorf("from %d: %v, want the last %d of all", o, got, len(got))
		}
		before[o] = fmt.Sprint(got)
	}
	if len(offsets) < 12 {
		t.Fatalf("only %d places were tried", len(offsets))
	}
	if _, err := segment.Compress(fsys, 1); err != nil {
		t.Fatal(err)
	}
	for _, o := range offsets {
		if got, _ := read(o); fmt.Sprint(got) != before[o] {
			t.Errorf("compressed, from %d: %v, want %s", o, got, before[o])
		}
	}
}
