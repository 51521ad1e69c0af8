package segment_test

import (
	"os"
	"testing"

	"gaugelog/ingest/segment"
)

// TestSpanOfUnsetClock: a compressed segment of a boot whose clock was never set
// spans its stamps as they were written.
func TestSpanOfUnsetClock(t *testing.T) {
	root, err := os.OpenRoot(t.TempDir())
	if err != nil {
		t.Fatal(err)
	}
	defer root.Close()
	fsys := segment.OSFS(root, segment.OSOptions{SyncOnCloseOnly: true})
	const start = int64(1790000000000000000)
	clock := func(i int64) segment.ClockState { return segment.ClockState{Boot: i * 1e9, Wall: start + i*1e9} }
	w, err := segment.NewWriter(fsys, segment.ReadingsDir, 1, segment.WriterOptions{Header: segment.Header{Run: "r", Boot: "b", Rig: "00", Clock: clock(0)}})
	if err != nil {
		t.Fatal(err)
	}
	for i := range int64(100) {
		if err := w.Indication(&segment.Shown{Gauge: "mid", MM: 1, Time: start + i*1e9}); err != nil {
			t.Fatal(err)
		}
		if i%10 == 9 {
			if err := w.Checkpoint(clock(i)); err != nil {
				t.Fatal(err)
			}
		}
	}
	if err := w.Close(clock(100)); err != nil {
		t.Fatal(err)
	}
	for _, packed := range []bool{false, true} {
		if packed {
			if _, err := segment.Compress(fsys, 1); err != nil {
				t.Fatal(err)
			}
		}
		d, err := segment.OpenFolder(fsys)
		if err != nil {
			t.Fatal(err)
		}
		first, last, ok := d.Span()
		if !ok || first != start || last < start+99e9 || last > start+100e9 {
			t.Errorf("compressed %v: from %d to %d, %v", packed, first-start, last-start, ok)
		}
	}
}
