package segment_test

import (
	"errors"
	"fmt"
	"io"
	"slices"
	"testing"

	"gaugelog/ingest/segment"
	"gaugelog/ingest/segment/segmenttest"
)

// threeSegments is a run folder of n readings of one gauge, one a second.
func threeSegments(t *testing.T, n int, packed bool) *segmenttest.FS {
	t.Helper()
	fs := segmenttest.New()
	for k := range 3 {
		w, err := segment.NewWriter(fs, segment.ReadingsDir, k+1, segment.WriterOptions{Header: header()})
		if err != nil {
			t.Fatal(err)
		}
		for i := k * n / 3; i < (k+1)*n/3; i++ {
			at := t0 + int64(i)*1e9
			if err := w.Indication(&segment.Shown{Gauge: "mid", MM: float64(i%500) / 1000, Time: at}); err != nil {
				t.Fatal(err)
			}
			if i%1000 == 999 {
				if err := w.Checkpoint(synced(at)); err != nil {
					t.Fatal(err)
				}
			}
		}
		if err := w.Close(synced(t0 + int64((k+1)*n/3)*1e9)); err != nil {
			t.Fatal(err)
		}
		if packed {
			if _, err := segment.Compress(fs, k+1); err != nil {
				t.Fatal(err)
			}
		}
	}
	return fs
}

// Fold gives work every batch once and collect all of them in order, each with
// the state that its work left.
func TestFold(t *testing.T) {
	const n = 120_000
	fs := threeSegments(t, n, false)
	d, err := segment.OpenFolder(fs)
	if err != nil {
		t.Fatal(err)
	}
	for _, workers := range []int{1, 2, 7} {
		r := d.Read(segment.ReadOptions{Workers: workers})
		next := t0
		err := segment.Fold(r, func(b *segment.Batch, sum *int64) {
			*sum = 0
			for _, v := range b.Micro {
				*sum += v
			}
		}, func(b *segment.Batch, sum *int64) error {
			var want int64
			for i, v := range b.Micro {
				want += v
				if b.Time[i] != next {
					return fmt.Errorf("reading at %d, want %d", b.Time[i], next)
				}
				next += 1e9
			}
			if want != *sum || b.Foreign {
				return fmt.Errorf("the state is not that of the batch")
			}
			return nil
		})
		if err != nil || next != t0+n*1e9 || r.Report().Readings != n {
			t.Errorf("%d workers: %v, until %d", workers, err, next)
		}
		if _, err := r.Next(); err != io.EOF {
			t.Errorf("the reader is not used up: %v", err)
		}
		r.Close()
	}
}

// An error of collect ends Fold, and the Reader can still be closed.
func TestFoldStops(t *testing.T) {
	fs := threeSegments(t, 120_000, true)
	d, err := segment.OpenFolder(fs)
	if err != nil {
		t.Fatal(err)
	}
	stop := errors.New("enough")
	for _, workers := range []int{1, 4} {
		r := d.Read(segment.ReadOptions{Workers: workers})
		seen := 0
		err := segment.Fold(r, func(*segment.Batch, *struct{}) {}, func(*segment.Batch, *struct{}) error {
			if seen++; seen == 2 {
				return stop
			}
			return nil
		})
		r.Close()
		if !errors.Is(err, stop) || seen != 2 {
			t.Errorf("%d workers: %v after %d batches", workers, err, seen)
		}
		err = segment.Fold(r, func(*segment.Batch, *struct{}) {}, func(*segment.Batch, *struct{}) error { return nil })
		if err == nil {
			t.Error("a closed reader folds")
		}
	}
}

// Span and Origin tell what lies in a folder without decoding it.
func TestSpan(t *testing.T) {
	const n = 6000
	last := t0 + (n-1)*1e9
	check := func(name string, fs segment.FS, first, last, slack int64, want segment.Origin) {
		t.Helper()
		d, err := segment.OpenFolder(fs)
		if err != nil {
			t.Fatal(err)
		}
		a, b, ok := d.Span()
		if !ok || a != first || b < last || b > last+slack {
			t.Errorf("%s: from %d to %d, %v; want %d to %d", name, a, b, ok, first, last)
		}
		if got := d.Origin(); got != want {
			t.Errorf("%s: origin %+v", name, got)
		}
		if got := len(d.Starts()); want.Own != (got > 0) {
			t.Errorf("%s: %d starts", name, got)
		}
	}
	own := segment.Origin{Own: true}
	plain := threeSegments(t, n, false)
	check("plain", plain, t0, last, 1e9, own)
	check("compressed", threeSegments(t, n, true), t0, last, 1e9, own)
	name := segment.SegmentName(segment.ReadingsDir, 3)
	text := plain.Bytes(name)
	plain.Put(name, text[:len(text)-2500]) // torn in the last full block
	check("torn", plain, t0, last-1000e9, 1000e9, own)

	foreign := segmenttest.New()
	if err := foreign.MkdirAll(segment.ReadingsDir); err != nil {
		t.Fatal(err)
	}
	for _, size := range []int{10, 10_000} { // read whole, and from both ends
		var lines []byte
		for i := range size {
			lines = fmt.Appendf(lines, "indication,gauge=mid mm=1.5 %d\n", t0+int64(i)*1e9)
		}
		foreign.Put(segment.ReadingsDir+"/hand.lp", lines)
		check("foreign", foreign, t0, t0+int64(size-1)*1e9, 0, segment.Origin{})
	}
	empty, err := segment.OpenFolder(segmenttest.New())
	if err != nil {
		t.Fatal(err)
	}
	if _, _, ok := empty.Span(); ok {
		t.Error("an empty folder has a span")
	}
}

// Stamps taken before the clock was set count as re-timed, and so do starts.
func TestSpanOfAClockSetLater(t *testing.T) {
	fs := segmenttest.New()
	const wrong = int64(1_600_000_000_000_000_000)
	unset := segment.ClockState{Boot: 50e9, Wall: wrong}
	h := header()
	h.Clock = unset
	w, err := segment.NewWriter(fs, segment.ReadingsDir, 1, segment.WriterOptions{Header: h})
	if err != nil {
		t.Fatal(err)
	}
	if err := w.Indication(&segment.Shown{Gauge: "mid", MM: 1, Time: wrong + 1e9}); err != nil {
		t.Fatal(err)
	}
	if err := w.Checkpoint(segment.ClockState{Boot: 60e9, Wall: wrong + 10e9}); err != nil {
		t.Fatal(err)
	}
	if err := w.Indication(&segment.Shown{Gauge: "mid", MM: 1, Time: t0 + 20e9}); err != nil {
		t.Fatal(err)
	}
	if err := w.Checkpoint(segment.ClockState{Boot: 70e9, Wall: t0 + 20e9, Synced: true}); err != nil {
		t.Fatal(err)
	}
	d, err := segment.OpenFolder(fs)
	if err != nil {
		t.Fatal(err)
	}
	first, last, ok := d.Span()
	if !ok || first != t0+1e9 || last != t0+20e9 {
		t.Errorf("from %d to %d, %v", first-t0, last-t0, ok)
	}
	starts := d.Starts()
	if !slices.Equal(starts, []segment.Start{{Name: segment.SegmentName(segment.ReadingsDir, 1), Boot: header().Boot, Time: t0}}) {
		t.Errorf("starts %+v", starts)
	}
}
