package segment_test

import (
	"bytes"
	"testing"

	"gaugelog/ingest/segment"
	"gaugelog/ingest/segment/segmenttest"
)

// FuzzReader reads whatever bytes lie in a segment and in a compressed one:
// nothing may panic, and one worker and four must give the same.
func FuzzReader(f *testing.F) {
	fs := segmenttest.New()
	fill(f, fs, 1, 0, 40, 10, true)
	name := segment.SegmentName(segment.ReadingsDir, 1)
	f.Add(fs.Bytes(name), false)
	f.Add([]byte("indication,gauge=mid mm=1.5 1790000000000000000\n"), false)
	if _, err := segment.Compress(fs, 1); err != nil {
		f.Fatal(err)
	}
	f.Add(fs.Bytes(name+".zst"), true)
	f.Fuzz(func(t *testing.T, data []byte, packed bool) {
		name := name
		if packed {
			name += ".zst"
		}
		var got [2][]reading
		for i, workers := range []int{1, 4} {
			fs := segmenttest.New()
			fs.Put(name, data)
			got[i], _ = read(t, fs, segment.ReadOptions{Workers: workers})
		}
		if len(got[0]) != len(got[1]) {
			t.Fatalf("one worker read %d readings, four %d", len(got[0]), len(got[1]))
		}
		for i := range got[0] {
			if got[0][i] != got[1][i] {
				t.Fatalf("reading %d is %v with one worker, %v with four", i, got[0][i], got[1][i])
			}
		}
	})
}

// FuzzDamage changes a stretch of a whole segment: what is still read must be
// what was written, and a loss must be told.
func FuzzDamage(f *testing.F) {
	fs := segmenttest.New()
	fill(f, fs, 1, 0, 40, 10, true)
	name := segment.SegmentName(segment.ReadingsDir, 1)
	whole, want := fs.Bytes(name), expect(0, 40)
	f.Add(uint16(300), []byte("5"))
	f.Add(uint16(2), []byte{0, 0, 0, 0})
	f.Add(uint16(900), []byte("\n#checkpoint block=2"))
	f.Fuzz(func(t *testing.T, at uint16, with []byte) {
		text := bytes.Clone(whole)
		n := copy(text[int(at)%len(text):], with)
		fs := segmenttest.New()
		fs.Put(name, text)
		got, report := read(t, fs, segment.ReadOptions{})
		if !subset(got, want) {
			t.Fatalf("%d bytes changed at %d give readings that were never written", n, int(at)%len(text))
		}
		if len(got) < len(want) && len(report.Damage) == 0 && len(report.Tails) == 0 {
			t.Fatalf("%d readings of %d are left and nothing was told", len(got), len(want))
		}
	})
}
