//go:build campaign && linux

package main

import (
	"bytes"
	"errors"
	"fmt"
	"io/fs"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"github.com/influxdata/line-protocol/v2/lineprotocol"
	"github.com/klauspost/compress/zstd"

	"gaugelog/ingest"
	"gaugelog/ingest/segment"
)

// found is what the library's decoder, which knows nothing of blocks, finds in
// segments: the numbers of the readings by gauge, in order.
type found struct {
	numbers map[string][]int
	lines   int
	tails   int // segments that end behind their last checkpoint
	packed  int // compressed ones
}

// decodeReadings decodes the run's segments from a number on with the
// library's decoder. Each must be valid line protocol up to its last
// checkpoint; what lies behind that is a tail.
func decodeReadings(t *testing.T, run string, from int) *found {
	t.Helper()
	f := &found{numbers: map[string][]int{}}
	for _, number := range segmentNumbers(t, run) {
		if number < from {
			continue
		}
		name := filepath.Join(run, filepath.FromSlash(segment.SegmentName(segment.ReadingsDir, number)))
		text := readSegment(t, name, f)
		cut := max(bytes.LastIndex(text, []byte("\n#checkpoint ")), bytes.LastIndex(text, []byte("\n#gaugelog ")))
		if end := bytes.IndexByte(text[cut+1:], '\n'); end >= 0 {
			cut += 1 + end + 1
		} else if cut = bytes.LastIndex(text[:cut+1], []byte("\n")) + 1; cut < 0 {
			cut = 0
		}
		if cut < len(text) {
			f.tails++
		}
		f.decode(t, name, text[:cut])
	}
	return f
}

// readSegment reads a segment, plain where it still is; the recorder may be
// compressing it meanwhile.
func readSegment(t *testing.T, name string, f *found) []byte {
	t.Helper()
	for range 3 {
		text, err := os.ReadFile(name)
		if err == nil {
			return text
		}
		packed, err := os.ReadFile(name + ".zst")
		if errors.Is(err, fs.ErrNotExist) {
			continue
		}
		if err != nil {
			t.Fatal(err)
		}
		d, err := zstd.NewReader(nil, zstd.WithDecoderConcurrency(1))
		if err != nil {
			t.Fatal(err)
		}
		defer d.Close()
		if text, err = d.DecodeAll(packed, nil); err != nil {
			t.Fatalf("%s.zst: %v", name, err)
		}
		f.packed++
		return text
	}
	t.Fatalf("%s is there neither plain nor compressed", name)
	return nil
}

func (f *found) decode(t *testing.T, name string, text []byte) {
	t.Helper()
	d := lineprotocol.NewDecoderWithBytes(text)
	for d.Next() {
		if err := f.line(d); err != nil {
			t.Fatalf("%s: the library's decoder: %v", name, err)
		}
	}
}

func (f *found) line(d *lineprotocol.Decoder) error {
	measurement, err := d.Measurement()
	if err != nil {
		return err
	}
	gauge, number := "", -1
	for {
		key, value, err := d.NextTag()
		if err != nil {
			return err
		}
		if key == nil {
			break
		}
		if string(key) == "gauge" {
			gauge = string(value)
		}
	}
	for {
		key, value, err := d.NextField()
		if err != nil {
			return err
		}
		if key == nil {
			break
		}
		if string(key) == "mm" {
			number = int(math.Round(value.FloatV() * 1000))
		}
	}
	if _, err := d.TimeBytes(); err != nil {
		return err
	}
	f.lines++
	if string(measurement) == "indication" {
		f.numbers[gauge] = append(f.numbers[gauge], number)
	}
	return nil
}

// segmentNumbers lists the run's segments in order.
func segmentNumbers(t *testing.T, run string) []int {
	t.Helper()
	entries, err := os.ReadDir(filepath.Join(run, segment.ReadingsDir))
	if err != nil && !errors.Is(err, fs.ErrNotExist) {
		t.Fatal(err)
	}
	var out []int
	for _, e := range entries {
		var n int
		if _, err := fmt.Sscanf(e.Name(), "%06d.lp", &n); err != nil {
			t.Fatalf("%s lies in %s", e.Name(), segment.ReadingsDir)
		}
		if !slices.Contains(out, n) {
			out = append(out, n)
		}
	}
	slices.Sort(out)
	return out
}

// consecutive says what is wrong with the numbers of one process's life: they
// must follow each other without a gap, because the gauge leaves none out.
func consecutive(numbers []int) error {
	for i := 1; i < len(numbers); i++ {
		if numbers[i] != numbers[i-1]+1 {
			return fmt.Errorf("reading %d is followed by %d", numbers[i-1], numbers[i])
		}
	}
	return nil
}

// verified runs the reader of the product over the run and wants it whole.
func verified(t *testing.T, run string) *segment.Verified {
	t.Helper()
	dir, err := ingest.OpenDir(run, ingest.DirOptions{})
	if err != nil {
		t.Fatal(err)
	}
	defer dir.Close()
	v, err := segment.Verify(dir.FS())
	if err != nil {
		t.Fatal(err)
	}
	if !v.Whole() {
		t.Fatalf("%s: damage: %v", run, v.Damage)
	}
	return v
}

// notesIn counts the notes of a run's marks by their text.
func notesIn(t *testing.T, run string) map[string]int {
	t.Helper()
	dir, err := ingest.OpenDir(run, ingest.DirOptions{})
	if err != nil {
		t.Fatal(err)
	}
	defer dir.Close()
	marks, err := ingest.ListMarks(dir.FS())
	if err != nil {
		t.Fatal(err)
	}
	out := map[string]int{}
	for _, m := range marks {
		out[m.Note]++
	}
	return out
}

// eventsText reads events.lp as text.
func eventsText(t *testing.T, run string) string {
	t.Helper()
	text, err := os.ReadFile(filepath.Join(run, segment.EventsFile))
	if err != nil {
		t.Fatal(err)
	}
	return string(text)
}

// allDecode decodes marks.lp and events.lp with the library's decoder up to
// their last checkpoint, and counts their lines.
func allDecode(t *testing.T, run string) int {
	t.Helper()
	f := &found{numbers: map[string][]int{}}
	for _, name := range []string{segment.MarksFile, segment.EventsFile} {
		text, err := os.ReadFile(filepath.Join(run, name))
		if errors.Is(err, fs.ErrNotExist) {
			continue
		}
		if err != nil {
			t.Fatal(err)
		}
		cut := strings.LastIndex(string(text), "\n#checkpoint ") + 1
		if end := bytes.IndexByte(text[cut:], '\n'); end >= 0 {
			f.decode(t, name, text[:cut+end+1])
		}
	}
	return f.lines
}
