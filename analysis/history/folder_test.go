package history

import (
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"

	"gaugelog/ingest/segment"
)

const rigText = `title: a slat
specimen:
  name: a3
  section: {shape: rectangle, width: 140 mm, depth: 38 mm}
  length: 800 mm
supports:
  - {name: left, at: 0 mm}
  - {name: right, at: 600 mm}
gauges:
  - {name: mid, at: 300 mm, sense: down, resolution: 0.001 mm}
  - {name: left, at: 0 mm, sense: down, resolution: 0.001 mm}
loads:
  - {name: pan, at: 300 mm}
`

const t0 = int64(1_790_000_000) * second

// writeRun makes a run folder by hand.
func writeRun(t testing.TB, files map[string]string) string {
	t.Helper()
	dir := t.TempDir()
	if _, ok := files["rig.yaml"]; !ok {
		files["rig.yaml"] = rigText
	}
	for name, text := range files {
		path := filepath.Join(dir, filepath.FromSlash(name))
		if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(path, []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	return dir
}

func load(t testing.TB, dir string) *History {
	t.Helper()
	h, err := Load(dir)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { h.Close() })
	return h
}

// recorded writes readings with the segment writer and returns them too.
func recorded(t testing.TB, n int) (string, [][]Sample) {
	t.Helper()
	dir := writeRun(t, map[string]string{})
	root, err := os.OpenRoot(dir)
	if err != nil {
		t.Fatal(err)
	}
	defer root.Close()
	fsys := segment.OSFS(root, segment.OSOptions{SyncOnCloseOnly: true})
	clock := func(at int64) segment.ClockState {
		return segment.ClockState{Boot: at - t0 + 1, Wall: at, Synced: true}
	}
	w, err := segment.NewWriter(fsys, segment.ReadingsDir, 1, segment.WriterOptions{Header: segment.Header{
		Run: "r", Boot: "b", Rig: "00", Program: "test", Clock: clock(t0)}})
	if err != nil {
		t.Fatal(err)
	}
	samples := make([][]Sample, 2)
	for i := range n {
		for g, name := range []string{"mid", "left"} {
			v := int64((i*i*7+g*13)%2000 - 500)
			s := Sample{t0 + int64(i)*second + int64(g), float64(v) / 1000}
			samples[g] = append(samples[g], s)
			if err := w.Indication(&segment.Shown{Gauge: name, MM: s.MM, Time: s.Time}); err != nil {
				t.Fatal(err)
			}
		}
		if i%500 == 499 {
			if err := w.Checkpoint(clock(t0 + int64(i)*second)); err != nil {
				t.Fatal(err)
			}
		}
	}
	if err := w.Close(clock(t0 + int64(n)*second)); err != nil {
		t.Fatal(err)
	}
	return dir, samples
}

// A folder gives the same bins, windows and fine bins as its readings held in
// memory.
func TestFolderEqualsMemory(t *testing.T) {
	dir, samples := recorded(t, 5000)
	h := load(t, dir)
	m, err := FromSamples(Given{Rig: h.Rig, Samples: samples})
	if err != nil {
		t.Fatal(err)
	}
	if h.Readings != m.Readings || h.First != m.First || h.Last != m.Last {
		t.Fatalf("folder %d %d %d, memory %d %d %d", h.Readings, h.First, h.Last, m.Readings, m.First, m.Last)
	}
	for g := range samples {
		if d := cmp.Diff(m.Bins(g), h.Bins(g)); d != "" {
			t.Errorf("bins of gauge %d: %s", g, d)
		}
	}
	from, to := t0+100*second, t0+300*second
	want, _ := m.Window(from, to)
	got, err := h.Window(from, to)
	if err != nil {
		t.Fatal(err)
	}
	if d := cmp.Diff(want, got); d != "" {
		t.Error("window:", d)
	}
	edges := []int64{t0 + 10*second, t0 + 11*second, t0 + 100*second, t0 + 4000*second}
	wantFine, _ := m.Fine(edges)
	gotFine, err := h.Fine(edges)
	if err != nil {
		t.Fatal(err)
	}
	if d := cmp.Diff(wantFine, gotFine); d != "" {
		t.Error("fine bins:", d)
	}
}

// Foreign readings without comments, out of order, with a stranger and a gap.
func TestForeignFolder(t *testing.T) {
	var b strings.Builder
	line := func(gauge, mm, at string) { b.WriteString("indication,gauge=" + gauge + " mm=" + mm + " " + at + "\n") }
	line("mid", "0.001", "1790000000000000000")
	line("mid", "0.003", "1790000120000000000")
	line("mid", "0.002", "1790000060000000000")
	line("lamp", "5", "1790000060000000000")
	for _, at := range []string{"180", "240", "300", "360", "3000", "3060", "3120", "3180"} {
		line("mid", "0.004", "179000"+strings.Repeat("0", 4-len(at))+at+"000000000")
	}
	marks := `load,name=pan id="m1",kilogram=12.4,newton=121.6,step="l1" 1790000030000000000
load,name=pan id="m2",newton=50 1790000040000000000
withdraw id="m2",why="wrong load" 1790000050000000000
touch,gauge=mid act="zeroed" 1790000070000000000
note text="lamp moved" 1790000080000000000
`
	h := load(t, writeRun(t, map[string]string{"readings/hand.lp": b.String(), "marks.lp": marks}))
	if h.Readings != 11 || h.GaugeReadings[0] != 11 {
		t.Fatalf("%d readings", h.Readings)
	}
	got, err := h.Raw(0, h.First, h.First+120*second)
	if err != nil {
		t.Fatal(err)
	}
	if len(got) != 3 || got[1].MM != 0.002 {
		t.Errorf("window not in order: %v", got)
	}
	codes := map[string]bool{}
	for _, n := range h.Notes {
		codes[n.Code] = true
	}
	if !codes["out-of-order"] || !codes["unknown-gauge"] {
		t.Errorf("notes %v", h.Notes)
	}
	var kinds []string
	for _, m := range h.Marks {
		kinds = append(kinds, m.Kind+m.ID)
	}
	if d := cmp.Diff([]string{"loadm1", "touch", "note"}, kinds); d != "" {
		t.Error("marks:", d)
	}
	if m := h.Marks[0]; m.Kilogram == nil || *m.Kilogram != 12.4 || m.Newton != 121.6 || m.Step != "l1" {
		t.Errorf("mark %+v", m)
	}
	if len(h.Gaps) != 1 || h.Gaps[0].From != t0+360*second || h.Gaps[0].To != t0+3000*second {
		t.Errorf("gaps %+v", h.Gaps)
	}
}

// A block that does not verify is left out and said, and the rest stays.
func TestDamagedBlockIsANote(t *testing.T) {
	dir, _ := recorded(t, 3000)
	name := filepath.Join(dir, segment.SegmentName(segment.ReadingsDir, 1))
	text, err := os.ReadFile(name)
	if err != nil {
		t.Fatal(err)
	}
	at := strings.Index(string(text), " mm=") + 4 + len(text)/2
	at += strings.Index(string(text[at:]), " mm=") + 4
	text[at] = '7' + (text[at]-'0')%2
	if err := os.WriteFile(name, text, 0o644); err != nil {
		t.Fatal(err)
	}
	h := load(t, dir)
	if len(h.Damaged) != 1 || h.Readings != 5000 {
		t.Errorf("%d readings, damage %v", h.Readings, h.Damaged)
	}
}

func TestFolderWithoutRig(t *testing.T) {
	dir := t.TempDir()
	if _, err := Load(dir); err == nil || !strings.Contains(err.Error(), "rig.yaml is missing") {
		t.Errorf("error %v", err)
	}
}
