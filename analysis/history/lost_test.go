package history

import (
	"slices"
	"strings"
	"testing"
	"time"

	"gaugelog/analysis/history/historytest"
	"gaugelog/ingest/segment"
	"gaugelog/ingest/segment/segmenttest"
)

// generated is a run of 30,000 readings in three segments, as files in memory
// and as the readings themselves.
func generated(t *testing.T, packed bool) (*segmenttest.FS, [][]Sample) {
	t.Helper()
	fs := segmenttest.New()
	run := historytest.Run{Gauges: 2, Readings: 30_000, Duration: 30 * time.Hour, Steps: 2, Roll: 550_000, Compress: packed}
	if err := run.Write(fs); err != nil {
		t.Fatal(err)
	}
	h, err := Open(fs)
	if err != nil {
		t.Fatal(err)
	}
	all, err := h.Window(h.First, h.Last)
	if err != nil {
		t.Fatal(err)
	}
	if h.Readings != 30_000 || len(all[0]) != 15_000 || len(h.Damaged) > 0 || len(h.Gaps) > 0 {
		t.Fatalf("%d readings, damage %v, gaps %v", h.Readings, h.Damaged, h.Gaps)
	}
	same(t, h, all)
	return fs, all
}

// A damaged frame of a compressed segment is left out, the rest stays exact, and
// both the damage and the gap it leaves are told.
func TestDamagedFrame(t *testing.T) {
	fs, all := generated(t, true)
	name := segment.SegmentName(segment.ReadingsDir, 2) + ".zst"
	stored := fs.Bytes(name)
	stored[len(stored)/3] ^= 0x10
	fs.Put(name, stored)
	h, err := Open(fs)
	if err != nil {
		t.Fatal(err)
	}
	if len(h.Damaged) != 1 || !strings.Contains(h.Damaged[0], name) || notes(h, "damaged-block") != 1 {
		t.Fatalf("damage %q", h.Damaged)
	}
	d := h.damage[0]
	left := make([][]Sample, len(all))
	for g := range all {
		left[g] = slices.DeleteFunc(slices.Clone(all[g]), func(s Sample) bool { return s.Time >= d.First && s.Time <= d.Last })
		if n := len(left[g]); n == len(all[g]) || n < 7_500 {
			t.Fatalf("%d of %d readings left", n, len(all[g]))
		}
	}
	same(t, h, left)
	if len(h.Gaps) != 1 || h.Gaps[0].Gauge != "" || h.Gaps[0].Why != "a damaged block was left out" ||
		h.Gaps[0].From > d.First || h.Gaps[0].To < d.Last {
		t.Errorf("gaps %+v", h.Gaps)
	}
}

// What a crash cut off is not read, and is no damage.
func TestTornTail(t *testing.T) {
	fs, all := generated(t, false)
	name := segment.SegmentName(segment.ReadingsDir, 3)
	text := fs.Bytes(name)
	text = text[:len(text)*2/3]
	cut := strings.LastIndex(string(text), "\n#checkpoint")
	end := cut + 1 + strings.IndexByte(string(text[cut+1:]), '\n')
	if end+100 > len(text) {
		t.Fatal("nothing is torn")
	}
	fs.Put(name, text)
	h, err := Open(fs)
	if err != nil {
		t.Fatal(err)
	}
	if len(h.Damaged) > 0 || len(h.Notes) > 0 || len(h.Gaps) > 0 {
		t.Errorf("damage %v, notes %v, gaps %v", h.Damaged, h.Notes, h.Gaps)
	}
	left := make([][]Sample, len(all))
	for g := range all {
		left[g] = all[g][:h.GaugeReadings[g]]
	}
	if whole := 30_000 - int64(strings.Count(string(text[end:]), "\n")); h.Readings > whole || h.Readings < 25_000 {
		t.Errorf("%d readings, %d lines are whole", h.Readings, whole)
	}
	same(t, h, left)
}

// A segment that is gone and a rig file that was edited are told of: nothing
// else in the folder would show them.
func TestMissingSegmentAndEditedRig(t *testing.T) {
	fs := segmenttest.New()
	run := historytest.Run{Gauges: 2, Readings: 30_000, Duration: 30 * time.Hour, Steps: 2, Roll: 10_000}
	if err := run.Write(fs); err != nil {
		t.Fatal(err)
	}
	if err := fs.Remove(segment.SegmentName(segment.ReadingsDir, 2)); err != nil {
		t.Fatal(err)
	}
	rig := fs.Bytes(segment.RigFile)
	fs.Put(segment.RigFile, append(rig, "# a word more\n"...))
	h, err := Open(fs)
	if err != nil {
		t.Fatal(err)
	}
	if notes(h, "segment-missing") != 1 || notes(h, "rig-edited") != 1 || len(h.Damaged) != 2 {
		t.Errorf("notes %v, damaged %q", h.Notes, h.Damaged)
	}
}
