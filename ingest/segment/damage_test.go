package segment_test

import (
	"fmt"
	"io"
	"math/rand/v2"
	"slices"
	"testing"

	"gaugelog/ingest/segment"
	"gaugelog/ingest/segment/segmenttest"
)

const t0 = int64(1790000000000000000)

func synced(at int64) segment.ClockState {
	return segment.ClockState{Boot: 5e9 + at - t0, Wall: at, Synced: true}
}

func header() segment.Header {
	return segment.Header{Run: "run-1", Boot: "boot-a", Rig: "00ff", Program: "test", Clock: synced(t0)}
}

// reading is one indication, comparable.
type reading struct {
	gauge string
	time  int64
	mm    float64
}

func nth(i int) reading {
	return reading{fmt.Sprintf("g%d", i%3), t0 + int64(i)*1e8, float64(i%997) / 1000}
}

// read gives all indications of the folder and the report.
func read(t testing.TB, fs segment.FS, opts segment.ReadOptions) ([]reading, *segment.Report) {
	t.Helper()
	d, err := segment.OpenFolder(fs)
	if err != nil {
		t.Fatal(err)
	}
	r := d.Read(opts)
	defer r.Close()
	var out []reading
	for rec, err := range r.Records() {
		if err != nil {
			t.Fatal(err)
		}
		if rec.Kind == segment.Indication {
			out = append(out, reading{rec.Name, rec.Time, rec.MM})
		}
	}
	return out, r.Report()
}

// fill writes readings [from, to) in blocks of per, and closes if asked.
func fill(t testing.TB, fs segment.FS, number, from, to, per int, closed bool) *segment.Writer {
	t.Helper()
	w, err := segment.NewWriter(fs, segment.ReadingsDir, number, segment.WriterOptions{Header: header()})
	if err != nil {
		t.Fatal(err)
	}
	for i := from; i < to; i++ {
		r := nth(i)
		if err := w.Indication(&segment.Shown{Gauge: r.gauge, MM: r.mm, Time: r.time}); err != nil {
			t.Fatal(err)
		}
		if (i-from)%per == per-1 {
			if err := w.Checkpoint(synced(r.time)); err != nil {
				t.Fatal(err)
			}
		}
	}
	if closed {
		if err := w.Close(synced(nth(to).time)); err != nil {
			t.Fatal(err)
		}
	}
	return w
}

func expect(from, to int) []reading {
	var out []reading
	for i := from; i < to; i++ {
		out = append(out, nth(i))
	}
	return out
}

// subset tells whether got is want with some elements left out.
func subset(got, want []reading) bool {
	for _, w := range want {
		if len(got) > 0 && got[0] == w {
			got = got[1:]
		}
	}
	return len(got) == 0
}

func flipEvery(t *testing.T, fs *segmenttest.FS, name string, want []reading, mostLost int) {
	t.Helper()
	whole := fs.Bytes(name)
	rng := rand.New(rand.NewPCG(1, 2))
	for i := range whole {
		hurt := slices.Clone(whole)
		hurt[i] ^= byte(1 + rng.IntN(255))
		c := segmenttest.New()
		c.Put(name, hurt)
		got, report := read(t, c, segment.ReadOptions{Workers: 1})
		if len(report.Damage) == 0 {
			t.Fatalf("byte %d of %d (%q to %q) changed unnoticed", i, len(whole), whole[i], hurt[i])
		}
		if !subset(got, want) {
			t.Fatalf("byte %d changed: a reading that was never written came out", i)
		}
		if len(want)-len(got) > mostLost {
			t.Fatalf("byte %d changed: %d readings lost, at most %d lie in a block\n%v", i, len(want)-len(got), mostLost, report.Damage)
		}
	}
}

// A change of any single byte of a closed segment is found, gives no wrong
// reading, and costs the readings of one block at most.
func TestEveryFlippedByteIsFound(t *testing.T) {
	n := 60
	if campaign {
		n = 1180 // 64 KiB
	}
	fs := segmenttest.New()
	fill(t, fs, 1, 0, n, 20, true)
	name := segment.SegmentName(segment.ReadingsDir, 1)
	t.Logf("%d bytes", len(fs.Bytes(name)))
	flipEvery(t, fs, name, expect(0, n), 20)
}

// The same of a compressed one; it may cost a frame.
func TestEveryFlippedByteOfACompressedSegmentIsFound(t *testing.T) {
	fs := segmenttest.New()
	n := 60
	if campaign {
		n = 1180 // 64 KiB
	}
	fill(t, fs, 1, 0, n, 20, true)
	if _, err := segment.Compress(fs, 1); err != nil {
		t.Fatal(err)
	}
	name := segment.SegmentName(segment.ReadingsDir, 1) + ".zst"
	t.Logf("%d bytes", len(fs.Bytes(name)))
	flipEvery(t, fs, name, expect(0, n), n)
}

// A file cut anywhere gives all blocks before the cut and no damage.
func TestEveryTruncationRecoversToTheLastCheckpoint(t *testing.T) {
	fs := segmenttest.New()
	n := 100
	fill(t, fs, 1, 0, n, 10, true)
	name := segment.SegmentName(segment.ReadingsDir, 1)
	whole := fs.Bytes(name)
	full := 0
	for cut := range whole {
		c := segmenttest.New()
		c.Put(name, whole[:cut])
		got, report := read(t, c, segment.ReadOptions{Workers: 1})
		if len(report.Damage) != 0 {
			t.Fatalf("cut at %d: %v", cut, report.Damage)
		}
		if len(got)%10 != 0 || !slices.Equal(got, expect(0, len(got))) || len(got) < full {
			t.Fatalf("cut at %d gave %d readings", cut, len(got))
		}
		full = len(got)
	}
	if full != n {
		t.Fatalf("only %d readings before the last byte", full)
	}
}

// Whole blocks cut out of the middle are missed.
func TestMissingBlocksAreFound(t *testing.T) {
	fs := segmenttest.New()
	fill(t, fs, 1, 0, 100, 10, true)
	name := segment.SegmentName(segment.ReadingsDir, 1)
	whole := fs.Bytes(name)
	ends := commentEnds(whole)
	for i := 0; i+2 < len(ends); i++ {
		for j := i + 1; j+1 < len(ends); j++ {
			c := segmenttest.New()
			c.Put(name, slices.Concat(whole[:ends[i]], whole[ends[j]:]))
			got, report := read(t, c, segment.ReadOptions{})
			if len(report.Damage) != 1 || !subset(got, expect(0, 100)) {
				t.Fatalf("comments %d to %d cut out: %v", i, j, report.Damage)
			}
		}
	}
}

// commentEnds gives where each comment of the format ends.
func commentEnds(text []byte) (ends []int) {
	start := 0
	for i, c := range text {
		if c == '\n' {
			if text[start] == '#' {
				ends = append(ends, i+1)
			}
			start = i + 1
		}
	}
	return ends
}

// The same records come out whatever the number of workers, plain and
// compressed, damaged or not.
func TestOrderDoesNotDependOnWorkers(t *testing.T) {
	fs := segmenttest.New()
	at := 0
	for number := 1; number <= 3; number++ {
		fill(t, fs, number, at, at+40000, 500, number < 3)
		at += 40000
	}
	if _, err := segment.Compress(fs, 2); err != nil {
		t.Fatal(err)
	}
	hurt := fs.Bytes("readings/000001.lp")
	hurt[1200000] ^= 4
	fs.Put("readings/000001.lp", hurt)
	one, report1 := batches(t, fs, 1)
	for _, workers := range []int{2, 4, 7} {
		many, report := batches(t, fs, workers)
		if one != many {
			t.Fatalf("%d workers give other records than one", workers)
		}
		if fmt.Sprintf("%+v", report1) != fmt.Sprintf("%+v", report) {
			t.Fatalf("reports differ:\n%+v\n%+v", report1, report)
		}
	}
	if report1.Readings != 120000-500 || len(report1.Damage) != 1 || report1.Damage[0].Lines != 500 {
		t.Fatalf("%+v", report1)
	}
}

// batches gives all of a pass as text, numbers of gauges included.
func batches(t testing.TB, fs segment.FS, workers int) (string, *segment.Report) {
	t.Helper()
	d, err := segment.OpenFolder(fs)
	if err != nil {
		t.Fatal(err)
	}
	r := d.Read(segment.ReadOptions{Workers: workers})
	defer r.Close()
	var out []byte
	for {
		b, err := r.Next()
		if err == io.EOF {
			return string(out) + fmt.Sprint(r.Gauges()), r.Report()
		}
		for i := range b.Gauge {
			out = fmt.Appendf(out, "%s %d %d %d\n", b.File, b.Gauge[i], b.Micro[i], b.Time[i])
		}
		out = fmt.Appendf(out, "%+v", b.Others)
	}
}

// A second pass that wants a stretch of time gives just that, seeking or not.
func TestTimeRangeAndGaugesAreFiltered(t *testing.T) {
	fs := segmenttest.New()
	fill(t, fs, 1, 0, 60000, 300, true)
	fill(t, fs, 2, 60000, 120000, 300, true)
	if _, err := segment.Compress(fs, 1); err != nil {
		t.Fatal(err)
	}
	d, err := segment.OpenFolder(fs)
	if err != nil {
		t.Fatal(err)
	}
	opts := segment.ReadOptions{From: nth(50000).time, To: nth(100000).time, Only: []string{"g1"}}
	var want []reading
	for i := 50000; i <= 100000; i++ {
		if r := nth(i); r.gauge == "g1" {
			want = append(want, r)
		}
	}
	for pass, o := range []segment.ReadOptions{opts, {}, opts} {
		r := d.Read(o)
		var got []reading
		for rec, err := range r.Records() {
			if err != nil {
				t.Fatal(err)
			}
			got = append(got, reading{rec.Name, rec.Time, rec.MM})
		}
		r.Close()
		if len(r.Report().Damage) > 0 {
			t.Fatal(r.Report().Damage)
		}
		if pass != 1 && !slices.Equal(got, want) || pass == 1 && len(got) != 120000 {
			t.Fatalf("pass %d: %d readings, want %d", pass, len(got), len(want))
		}
	}
}
