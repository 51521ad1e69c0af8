package segment_test

import (
	"fmt"
	"io/fs"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"gaugelog/ingest/segment"
	"gaugelog/ingest/segment/segmenttest"
)

// note is an entry that can be told from others by n; more makes it longer.
func note(n int, more string) segment.Entry {
	return segment.Entry{Time: nth(n).time, Point: &segment.Point{Measurement: "note",
		Fields: []segment.Field{{Key: "n", Value: int64(n)}, {Key: "text", Value: more}}}}
}

// notes reads the numbers of a log's entries back, with what was damaged.
func notes(t *testing.T, fsys segment.FS) ([]int64, *segment.Report) {
	t.Helper()
	d, err := segment.OpenFolder(fsys)
	if err != nil {
		t.Fatal(err)
	}
	records, report, err := d.Log(segment.EventsFile)
	if err != nil {
		t.Fatal(err)
	}
	var out []int64
	for i := range records {
		n, _ := records[i].Point.Value("n")
		out = append(out, n.(int64))
	}
	return out, report
}

func openEvents(t *testing.T, fsys segment.FS) *segment.Log {
	t.Helper()
	l, err := segment.OpenLog(fsys, segment.EventsFile, header())
	if err != nil {
		t.Fatal(err)
	}
	return l
}

// A sync that failed leaves its whole block in the file, where the next Append
// writes it again: the entries count once, in the file as it lies and after a
// crash, and nothing is called damaged.
func TestEntriesOfAFailedSyncCountOnce(t *testing.T) {
	for _, op := range []string{"sync", "close", "write"} {
		for failures := 1; failures <= 3; failures++ {
			for before := range 3 {
				mem := segmenttest.New()
				l := openEvents(t, mem)
				n := 0
				for ; n < before; n++ {
					if err := l.Append(synced(nth(n).time), note(n, "")); err != nil {
						t.Fatal(err)
					}
				}
				mem.Inject(&segmenttest.Failure{At: 1, Persistent: true, Only: []string{op}, Err: segmenttest.ErrInjected})
				for range failures {
					if err := l.Append(synced(nth(n).time), note(n, "")); err == nil {
						t.Fatalf("a failing %s went unnoticed", op)
					}
				}
				mem.Inject(nil)
				for ; n < before+2; n++ {
					if err := l.Append(synced(nth(n).time), note(n, "")); err != nil {
						t.Fatal(err)
					}
				}
				want := []int64{0, 1, 2, 3}[:n]
				what := fmt.Sprintf("%s failed %d times behind %d entries", op, failures, before)
				for _, fsys := range []segment.FS{mem, mem.Crash(rand.New(rand.NewPCG(1, 2)), false)} {
					got, report := notes(t, fsys)
					if !slices.Equal(got, want) || len(report.Damage) > 0 {
						t.Fatalf("%s: entries %v, want %v; damage %v", what, got, want, report.Damage)
					}
				}
				if v, err := segment.Verify(mem); err != nil || countIn(v.Damage, segment.EventsFile) > 0 {
					t.Fatalf("%s: %v %v", what, v, err)
				}
				// Another process goes on where this one ended.
				if err := openEvents(t, mem).Append(synced(nth(n).time), note(n, "")); err != nil {
					t.Fatal(err)
				}
				if got, report := notes(t, mem); len(got) != n+1 || len(report.Damage) > 0 {
					t.Fatalf("%s, then another process: entries %v, damage %v", what, got, report.Damage)
				}
			}
		}
	}
}

func countIn(damage []segment.Damage, name string) (n int) {
	for _, d := range damage {
		if d.File == name {
			n++
		}
	}
	return n
}

// The torn stretch may be longer than what a reader takes at once, and may
// begin and end anywhere in it.
func TestATornStretchAcrossChunksCountsOnce(t *testing.T) {
	for _, failures := range []int{1, 4, 9} {
		for _, lead := range []int{0, 1, 7} {
			mem := segmenttest.New()
			l := openEvents(t, mem)
			text := strings.Repeat("x", 300_000)
			n := 0
			for ; n < lead; n++ {
				if err := l.Append(synced(nth(n).time), note(n, text)); err != nil {
					t.Fatal(err)
				}
			}
			mem.Inject(&segmenttest.Failure{At: 1, Persistent: true, Only: []string{"sync"}, Err: segmenttest.ErrInjected})
			for range failures {
				if err := l.Append(synced(nth(n).time), note(n, text)); err == nil {
					t.Fatal("a failing sync went unnoticed")
				}
			}
			mem.Inject(nil)
			for ; n < lead+3; n++ {
				if err := l.Append(synced(nth(n).time), note(n, text)); err != nil {
					t.Fatal(err)
				}
			}
			got, report := notes(t, mem)
			for i := range n {
				if len(got) != n || got[i] != int64(i) || len(report.Damage) > 0 {
					t.Fatalf("%d failures behind %d entries: %v, damage %v", failures, lead, got, report.Damage)
				}
			}
		}
	}
}

// A log that was removed, replaced or cut while it was being written goes on:
// its loss must not end the recording.
func TestALogThatWasReplacedGoesOn(t *testing.T) {
	for _, what := range []string{"removed", "replaced", "cut"} {
		dir := t.TempDir()
		root, err := os.OpenRoot(dir)
		if err != nil {
			t.Fatal(err)
		}
		defer root.Close()
		fsys := segment.OSFS(root, segment.OSOptions{})
		l := openEvents(t, fsys)
		for n := range 3 {
			if err := l.Append(synced(nth(n).time), note(n, "")); err != nil {
				t.Fatal(err)
			}
		}
		name := filepath.Join(dir, segment.EventsFile)
		whole, err := os.ReadFile(name)
		if err != nil {
			t.Fatal(err)
		}
		want := []int64{3, 4}
		switch what {
		case "removed":
			err = os.Remove(name)
		case "cut":
			err = os.Truncate(name, int64(len(whole)/2))
			want = []int64{0, 3, 4}
		case "replaced":
			err = replaceFile(name, whole)
			want = []int64{0, 1, 2, 3, 4}
		}
		if err != nil {
			t.Fatal(err)
		}
		for n := 3; n < 5; n++ {
			if err := l.Append(synced(nth(n).time), note(n, "")); err != nil {
				t.Fatalf("%s: %v", what, err)
			}
		}
		if got, report := notes(t, fsys); !slices.Equal(got, want) || len(report.Damage) > 0 {
			t.Fatalf("%s: entries %v, want %v, damage %v", what, got, want, report.Damage)
		}
	}
}

func replaceFile(name string, text []byte) error {
	if err := os.WriteFile(name+".new", text, 0o644); err != nil {
		return err
	}
	return os.Rename(name+".new", name)
}

// An append by the process that wrote last reads nothing back: its cost does
// not grow with the file, nor does it take a reader's buffer.
func TestAppendingAgainReadsNothing(t *testing.T) {
	mem := &countedReads{FS: segmenttest.New()}
	l := openEvents(t, mem)
	for n := range 200 {
		if err := l.Append(synced(nth(n).time), note(n, "")); err != nil {
			t.Fatal(err)
		}
	}
	if mem.bytes > 0 {
		t.Errorf("200 appends read %d bytes back", mem.bytes)
	}
	n := 200
	allocated := testing.AllocsPerRun(100, func() {
		if err := l.Append(synced(nth(n).time), note(n, "")); err != nil {
			t.Fatal(err)
		}
		n++
	})
	if allocated > 60 {
		t.Errorf("%v allocations an append", allocated)
	}
	other := openEvents(t, mem)
	if err := other.Append(synced(nth(n).time), note(n, "")); err != nil {
		t.Fatal(err)
	}
	mem.bytes = 0
	if err := l.Append(synced(nth(n+1).time), note(n+1, "")); err != nil {
		t.Fatal(err)
	}
	if mem.bytes == 0 || mem.bytes > 1000 {
		t.Errorf("%d bytes read back behind one entry of another process", mem.bytes)
	}
	if got, report := notes(t, mem); len(got) != n+2 || len(report.Damage) > 0 {
		t.Errorf("%d entries, want %d; damage %v", len(got), n+2, report.Damage)
	}
}

// countedReads counts the bytes that are read back through files opened for
// appending.
type countedReads struct {
	segment.FS
	bytes int
}

type countedFile struct {
	segment.File
	fs *countedReads
}

func (c *countedReads) Append(name string) (segment.File, error) {
	f, err := c.FS.Append(name)
	if err != nil {
		return nil, err
	}
	return &countedFile{f, c}, nil
}

func (f *countedFile) ReadAt(p []byte, off int64) (int, error) {
	n, err := f.File.ReadAt(p, off)
	f.fs.bytes += n
	return n, err
}

func (f *countedFile) Stat() (fs.FileInfo, error) { return f.File.Stat() }

// unsynced spares a benchmark the file system's copy of what is durable.
type unsynced struct{ segment.FS }

type unsyncedFile struct{ segment.File }

func (u unsynced) Append(name string) (segment.File, error) {
	f, err := u.FS.Append(name)
	return unsyncedFile{f}, err
}

func (unsyncedFile) Sync() error { return nil }

func BenchmarkLogAppend(b *testing.B) {
	l, err := segment.OpenLog(unsynced{segmenttest.New()}, segment.EventsFile, header())
	if err != nil {
		b.Fatal(err)
	}
	b.ReportAllocs()
	for n := range b.N {
		if err := l.Append(synced(nth(n).time), note(n, "")); err != nil {
			b.Fatal(err)
		}
	}
}

// growing appends to a file behind the back of a reader that has measured it.
type growing struct {
	segment.FS
	opens int
	grow  func(opens int)
}

func (g *growing) Open(name string) (segment.File, error) {
	g.opens++
	g.grow(g.opens)
	return g.FS.Open(name)
}

// A log may grow between the moments at which a reader measures it and reads
// it: it gives the entries of one of the two moments.
func TestReadingALogThatGrows(t *testing.T) {
	full := segmenttest.New()
	l := openEvents(t, full)
	var ends []int
	for n := range 40 {
		if err := l.Append(synced(nth(n).time), note(n, strings.Repeat("y", 3000))); err != nil {
			t.Fatal(err)
		}
		ends = append(ends, len(full.Bytes(segment.EventsFile)))
	}
	text := full.Bytes(segment.EventsFile)
	for _, first := range []int{1, 50, ends[0] - 1, ends[0], ends[0] + 10, ends[5]} {
		for _, later := range []int{first + 1, ends[0] + 1, ends[7], ends[30] + 7, len(text)} {
			for at := 1; at <= 4; at++ {
				mem := segmenttest.New()
				mem.Put(segment.EventsFile, text[:first])
				g := &growing{FS: mem, grow: func(opens int) {
					if opens == at {
						mem.Put(segment.EventsFile, text[:max(first, later)])
					}
				}}
				got, report := notes(t, g)
				if len(report.Damage) > 0 {
					t.Fatalf("%d bytes, then %d: %v", first, later, report.Damage)
				}
				for i, n := range got {
					if n != int64(i) {
						t.Fatalf("%d bytes, then %d: entries %v", first, later, got)
					}
				}
			}
		}
	}
}
