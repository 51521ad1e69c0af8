package segment_test

import (
	"bytes"
	"flag"
	"os"
	"testing"

	"gaugelog/ingest/segment"
	"gaugelog/ingest/segment/segmenttest"
)

var update = flag.Bool("update", false, "write the golden files anew")

// The bytes of version 1 are frozen: FORMAT.md shows this very file. If this
// test fails, files already recorded would read differently from new ones.
func TestFormatIsFrozen(t *testing.T) {
	fs := segmenttest.New()
	h := header()
	h.Rig = "3f7a0b7c0f0e0d0c0b0a09080706050403020100ffeeddccbbaa998877665544"
	h.Suspect = []segment.Suspect{{Number: 6, Offset: 4096}}
	w, err := segment.NewWriter(fs, segment.ReadingsDir, 7, segment.WriterOptions{Header: h})
	if err != nil {
		t.Fatal(err)
	}
	for i, in := range []segment.Shown{
		{Gauge: "mid", MM: 1.234, Time: t0},
		{Gauge: "mid", MM: 9.8044, Time: t0, Shown: 0.386, Unit: "in"},
		{Gauge: "left", MM: -0.05, Time: t0 + 1e9, Status: "hold"},
	} {
		if err := w.Indication(&in); err != nil {
			t.Fatal(err)
		}
		if i == 1 {
			if err := w.Ambient("air", 20.31, 48.2, t0); err != nil {
				t.Fatal(err)
			}
			if err := w.Checkpoint(synced(t0 + 1e8)); err != nil {
				t.Fatal(err)
			}
		}
	}
	if err := w.Close(synced(t0 + 2e9)); err != nil {
		t.Fatal(err)
	}
	got := fs.Bytes("readings/000007.lp")
	const golden = "testdata/000007.lp"
	if *update {
		if err := os.WriteFile(golden, got, 0o644); err != nil {
			t.Fatal(err)
		}
	}
	want, err := os.ReadFile(golden)
	if err != nil {
		t.Fatal(err)
	}
	if !bytes.Equal(got, want) {
		t.Fatalf("the writer gives\n%s\nversion 1 is\n%s", got, want)
	}
	doc, err := os.ReadFile("FORMAT.md")
	if err != nil {
		t.Fatal(err)
	}
	for line := range bytes.Lines(want) {
		if shown := append([]byte("    "), line...); len(line) > 1 && !bytes.Contains(doc, shown) {
			t.Errorf("FORMAT.md does not show the line\n%s", line)
		}
	}
}
