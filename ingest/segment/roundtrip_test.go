package segment

import (
	"os"
	"testing"
)

// testFS is a real folder that is gone after the test.
func testFS(t testing.TB) (FS, string) {
	dir := t.TempDir()
	root, err := os.OpenRoot(dir)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { root.Close() })
	return OSFS(root, OSOptions{SyncOnCloseOnly: true}), dir
}

const t0 = int64(1790000000000000000)

func testHeader() Header {
	return Header{Run: "run-1", Boot: "boot-a", Rig: "00ff", Program: "test", Clock: ClockState{Boot: 5e9, Wall: t0, Synced: true}}
}

func synced(at int64) ClockState { return ClockState{Boot: 5e9 + at - t0, Wall: at, Synced: true} }

func readAll(t testing.TB, fs FS, opts ReadOptions) ([]Record, *Report) {
	t.Helper()
	d, err := OpenFolder(fs)
	if err != nil {
		t.Fatal(err)
	}
	r := d.Read(opts)
	defer r.Close()
	var out []Record
	for rec, err := range r.Records() {
		if err != nil {
			t.Fatal(err)
		}
		out = append(out, rec)
	}
	return out, r.Report()
}

func TestWhatIsWrittenIsReadBack(t *testing.T) {
	fs, _ := testFS(t)
	w, err := NewWriter(fs, ReadingsDir, 1, WriterOptions{Header: testHeader()})
	if err != nil {
		t.Fatal(err)
	}
	now := t0
	for i := range 3000 {
		now += 1e9
		in := Shown{Gauge: "mid", MM: float64(i) / 1000, Time: now}
		if i%10 == 9 {
			in.Shown, in.Unit = float64(i)/25400, "in"
		}
		if err := w.Indication(&in); err != nil {
			t.Fatal(err)
		}
		if i%100 == 50 {
			if err := w.Ambient("air", 20.5, 48, now); err != nil {
				t.Fatal(err)
			}
			if err := w.Checkpoint(synced(now)); err != nil {
				t.Fatal(err)
			}
		}
	}
	if err := w.Close(synced(now)); err != nil {
		t.Fatal(err)
	}
	got, report := readAll(t, fs, ReadOptions{})
	if len(got) != 3030 || report.Readings != 3000 || len(report.Damage)+len(report.Tails)+len(report.Quarantined)+len(report.Unset) != 0 {
		t.Fatalf("%d records, report %+v", len(got), report)
	}
	n := 0
	for _, rec := range got {
		if rec.Kind == Indication {
			if rec.Name != "mid" || rec.MM != float64(n)/1000 || rec.Time != t0+int64(n+1)*1e9 {
				t.Fatalf("reading %d: %+v", n, rec)
			}
			n++
		}
	}
}

func TestLogKeepsEachEntry(t *testing.T) {
	fs, _ := testFS(t)
	for i := range 5 {
		h := testHeader()
		if i == 3 {
			h.Boot = "boot-b"
		}
		l, err := OpenLog(fs, MarksFile, h)
		if err != nil {
			t.Fatal(err)
		}
		e := Entry{&Point{Measurement: "note", Fields: []Field{{"text", "line\none"}, {"n", int64(i)}}}, t0 + int64(i)}
		if err := l.Append(synced(t0), e); err != nil {
			t.Fatal(err)
		}
		if i == 1 {
			f, _ := fs.Append(MarksFile)
			f.Write([]byte("note text=\"torn"))
			f.Close()
		}
	}
	d, err := OpenFolder(fs)
	if err != nil {
		t.Fatal(err)
	}
	got, report, err := d.Log(MarksFile)
	if err != nil || len(got) != 5 || len(report.Damage) != 0 || len(report.Tails) != 0 {
		t.Fatalf("%v %+v %v", got, report, err)
	}
	for i, rec := range got {
		if v, _ := rec.Point.Value("n"); v != int64(i) || rec.Kind != Note {
			t.Fatalf("entry %d is %+v", i, rec)
		}
	}
}
