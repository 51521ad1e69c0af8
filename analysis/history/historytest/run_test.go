package historytest

import (
	"io"
	"testing"
	"time"

	"gaugelog/analysis/history"
	"gaugelog/ingest/segment"
	"gaugelog/ingest/segment/segmenttest"
)

// A generated run reads back as it was meant, plain and compressed.
func TestRunReadsBack(t *testing.T) {
	for _, packed := range []bool{false, true} {
		r := Run{Gauges: 3, Readings: 30_000, Duration: 48 * time.Hour, Steps: 4, Compress: packed, Roll: 300_000}
		fs := segmenttest.New()
		if err := r.Write(fs); err != nil {
			t.Fatal(err)
		}
		h, err := history.Open(fs)
		if err != nil {
			t.Fatal(err)
		}
		if h.Readings != 30_000 || len(h.Marks) != 4 || len(h.Notes) > 0 || len(h.Gaps) > 0 {
			t.Errorf("%d readings, %d marks, notes %v, gaps %v", h.Readings, len(h.Marks), h.Notes, h.Gaps)
		}
		raw, err := h.Raw(1, h.First, h.First+int64(time.Hour))
		if err != nil || len(raw) < 200 {
			t.Fatalf("%d readings in an hour: %v", len(raw), err)
		}
		for _, s := range raw {
			if want := float64(r.Value(1, s.Time)) / 1000; s.MM != want {
				t.Fatalf("%d: %v, want %v", s.Time, s.MM, want)
			}
		}
	}
}

// The same run gives the same bytes.
func TestRunIsTheSameEachTime(t *testing.T) {
	text := func() string {
		fs := segmenttest.New()
		if err := (Run{Gauges: 2, Readings: 500, Duration: time.Hour, Steps: 1}).Write(fs); err != nil {
			t.Fatal(err)
		}
		f, err := fs.Open(segment.SegmentName(segment.ReadingsDir, 1))
		if err != nil {
			t.Fatal(err)
		}
		defer f.Close()
		info, err := f.Stat()
		if err != nil {
			t.Fatal(err)
		}
		b, err := io.ReadAll(io.NewSectionReader(f, 0, info.Size()))
		if err != nil {
			t.Fatal(err)
		}
		return string(b)
	}
	if a := text(); a != text() || len(a) < 500*40 {
		t.Error("two runs differ")
	}
}
