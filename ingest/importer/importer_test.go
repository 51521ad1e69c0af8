package importer

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"

	"gaugelog/config"
	"gaugelog/ingest"
	"gaugelog/ingest/segment"
)

const rigText = `specimen:
  name: strip
  section: {shape: rectangle, width: 20 mm, depth: 5 mm}
  length: 500 mm
timezone: Europe/Dublin
supports: [{name: l, at: 0 mm}, {name: r, at: 500 mm}]
gauges:
  - {name: mid, at: 250 mm, sense: down, resolution: 0.01 mm}
  - {name: left, at: 0 mm, sees: seat, sense: down, resolution: 0.01 mm}
loads: [{name: pan, at: 250 mm}]
`

func options(t testing.TB, table string) Options {
	t.Helper()
	rig, err := config.Parse("rig.yaml", []byte(rigText))
	if err != nil {
		t.Fatal(err)
	}
	return Options{Rig: rig, RigBytes: []byte(rigText), Table: strings.NewReader(table), File: "sheet.csv", Program: "test"}
}

// importAll imports a table and returns the records and marks of the folder.
func importAll(t testing.TB, o Options) ([]segment.Record, []segment.Record) {
	t.Helper()
	into := filepath.Join(t.TempDir(), "run")
	if _, err := Import(into, o); err != nil {
		t.Fatal(err)
	}
	dir, err := ingest.OpenDir(into, ingest.DirOptions{})
	if err != nil {
		t.Fatal(err)
	}
	defer dir.Close()
	if v, err := segment.Verify(dir.FS()); err != nil || !v.Whole() || v.Summed < 2 {
		t.Fatalf("verify: %+v, %v", v, err)
	}
	folder, err := segment.OpenFolder(dir.FS())
	if err != nil {
		t.Fatal(err)
	}
	if at := folder.Origin(); !at.Own || !at.Given {
		t.Errorf("origin %+v: the stamps were given", at)
	}
	reader := folder.Read(segment.ReadOptions{})
	defer reader.Close()
	var out []segment.Record
	for r, err := range reader.Records() {
		if err != nil {
			t.Fatal(err)
		}
		out = append(out, r)
	}
	marks, _, err := folder.Log(segment.MarksFile)
	if err != nil {
		t.Fatal(err)
	}
	return out, marks
}

func TestForms(t *testing.T) {
	const at = int64(1772438700000000000) // 2026-03-02 08:05:00 UTC, by `date -u -d`
	for _, c := range []struct {
		name, table string
		m           Mapping
		mm          float64
		at          int64
	}{
		{"plain", "time,mid [mm]\n2026-03-02T08:05:00Z,1.25\n", Mapping{}, 1.25, at},
		{"zone of the rig in summer", "time,mid [mm]\n2026-07-02 09:05,1.25\n", Mapping{}, 1.25, 1782979500000000000},
		{"decimal comma", "time;mid (mm)\n02.03.2026 08:05;1,25\n", Mapping{}, 1.25, at},
		{"byte order mark and tabs", "\ufefftime\tmid_mm\n2026-03-02 08:05:00.5\t-1.25\n", Mapping{}, -1.25, at + 5e8},
		{"inches exactly", "time,mid [in]\n2026-03-02T08:05Z,0.386\n", Mapping{}, 9.8044, at},
		{"ruler", "time,mid [in]\n2026-03-02T08:05Z,1 3/8\n", Mapping{}, 34.925, at},
		{"day first", "time,mid [mm]\n2/3/2026 8:05,1\n", Mapping{Dates: "day-first"}, 1, at},
		{"month first", "time,mid [mm]\n3/2/2026 8:05 AM,1\n", Mapping{Dates: "month-first"}, 1, at},
		{"two columns", "Day,Clock,Reading\n2026-03-02,08:05:00,1\n",
			Mapping{Time: Columns{"Day", "Clock"}, Gauges: map[string]string{"mid": "Reading"}, Unit: "mm"}, 1, at},
		{"elapsed minutes", "t [min],mid [mm]\n65,1\n", Mapping{Time: Columns{"t"}, Start: "2026-03-02T07:00:00Z"}, 1, at},
		{"seconds since 1970", "time,mid [mm]\n1772438700.25,1\n", Mapping{}, 1, at + 25e7},
		{"milliseconds since 1970", "time,mid [mm]\n1772438700000,1\n", Mapping{}, 1, at},
		{"one reading a row", "time,who,what mm\n2026-03-02T08:05:00Z,mid,1\n", Mapping{Name: "who", Value: "what"}, 1, at},
		{"before 1970", "time,mid [mm]\n1965-06-01T00:00:00Z,1\n", Mapping{}, 1, -144720000000000000},
		{"minus sign", "time,mid [mm]\n2026-03-02T08:05:00Z,\u22121.5\n", Mapping{}, -1.5, at},
	} {
		t.Run(c.name, func(t *testing.T) {
			o := options(t, c.table)
			o.Mapping = c.m
			got, _ := importAll(t, o)
			if len(got) != 1 || got[0].MM != c.mm || got[0].Time != c.at || got[0].Name != "mid" {
				t.Errorf("%+v, want mid %v at %d", got, c.mm, c.at)
			}
		})
	}
}

func TestRefused(t *testing.T) {
	for _, c := range []struct{ name, table, want string }{
		{"no number", "time,mid [mm]\n2026-03-02T08:05Z,1\n2026-03-02T08:06Z,Err\n", `sheet.csv:3: mid: "Err" is no number`},
		{"no time", "time,mid [mm]\n,1\n", "sheet.csv:2: the row has no time"},
		{"backwards", "time,mid [mm]\n2026-03-02T08:05Z,1\n2026-02-02T08:06Z,1\n", "sheet.csv:3: its time lies before that of row 2"},
		{"twice", "time,mid [mm]\n2026-03-02T08:05Z,1\n2026-03-02T08:05Z,2\n", "sheet.csv:3: mid has a reading of the same instant in row 2"},
		{"no unit", "time,mid\n2026-03-02T08:05Z,1\n", "sheet.csv:1: column \"mid\" names no unit"},
		{"no gauge", "time,middle [mm]\n2026-03-02T08:05Z,1\n", "sheet.csv:1: no column is named as a gauge"},
		{"day or month", "time,mid [mm]\n2/3/2026 8:05,1\n", "say which: --dates"},
		{"hour that was not", "time,mid [mm]\n2026-03-29 01:30,1\n", "does not exist in Europe/Dublin"},
		{"hour that was twice", "time,mid [mm]\n2026-10-25 01:30,1\n", "happened twice in Europe/Dublin"},
		{"too many cells", "time,mid [mm]\n2026-03-02T08:05Z,1,25\n", "sheet.csv:2: the row has 3 cells, the header 2"},
		{"quotes", "time,mid [mm]\n2026-03-02T08:05Z,1\"2\n", "sheet.csv:2: "},
		{"nothing", "time,mid [mm]\n", "there is no reading in it"},
		{"empty", "", "there is no header"},
		{"utf-16", "\xff\xfet\x00", "no UTF-8 text"},
		{"hexadecimal", "time,mid [mm]\n2026-03-02T08:05Z,0x1p3\n", "is no number"},
		{"kilometre", "time,mid [mm]\n2026-03-02T08:05Z,99999999\n", "no indication of a gauge"},
	} {
		t.Run(c.name, func(t *testing.T) {
			dir := t.TempDir()
			_, err := Import(filepath.Join(dir, "run"), options(t, c.table))
			if err == nil || !strings.Contains(err.Error(), c.want) {
				t.Errorf("error %v, want %q", err, c.want)
			}
			var p config.Problem
			if !errors.As(err, &p) || p.Fix == "" {
				t.Errorf("%v says no mend", err)
			}
			if left, _ := os.ReadDir(dir); len(left) > 0 {
				t.Errorf("left behind: %v", left)
			}
		})
	}
}

func TestLoadsAndMarks(t *testing.T) {
	o := options(t, "time,mid [mm],P [kg]\n2026-03-02T08:00Z,1,0\n2026-03-02T08:01Z,2,12.4\n2026-03-02T08:02Z,2,12.4\n2026-03-02T08:03Z,1,0\n")
	o.Mapping.Loads = map[string]string{"pan": "P"}
	o.Marks = strings.NewReader("time,gauge,act,note\n2026-03-02T08:02:30Z,mid,zeroed,\n2026-03-02T08:02:40Z,,,a door\n")
	o.MarksFile = "marks.csv"
	_, marks := importAll(t, o)
	var got []string
	for _, m := range marks {
		got = append(got, strings.TrimSpace(time.Unix(0, m.Time).UTC().Format("15:04:05 ")+m.Point.Measurement+" "+m.Name))
	}
	want := []string{"08:01:00 load pan", "08:02:30 touch mid", "08:02:40 note", "08:03:00 load pan"}
	if strings.Join(got, "|") != strings.Join(want, "|") {
		t.Errorf("marks %q, want %q", got, want)
	}
	if kg, _ := marks[0].Point.Value("kilogram"); kg != 12.4 {
		t.Errorf("kilogram %v, want 12.4", kg)
	}
}

func TestMappingFile(t *testing.T) {
	for text, want := range map[string]string{
		"time: Date\ngauges: {mid: R}\n":    "[Date] map[mid:R]",
		"time: [Date, Time]\nunit: in\n":    "[Date Time] map[]",
		"times: Date\n":                     "field times not found",
		"time: {a: b}\n":                    "cannot unmarshal",
		"probes: {air: {temperature: T}}\n": "[] map[]",
		"":                                  "[] map[]",
	} {
		m, err := ParseMapping("map.yaml", []byte(text))
		got := fmt.Sprint([]string(m.Time), m.Gauges)
		if err != nil {
			got = err.Error()
		}
		if !strings.Contains(got, want) {
			t.Errorf("%q: %s, want %s", text, got, want)
		}
	}
}

// TestSame holds the same file to the same bytes.
func TestSame(t *testing.T) {
	sums := map[string]bool{}
	for range 2 {
		into := filepath.Join(t.TempDir(), "run")
		if _, err := Import(into, options(t, "time,mid [mm],left [mm]\n2026-03-02T08:05Z,1,2\n")); err != nil {
			t.Fatal(err)
		}
		b, err := os.ReadFile(filepath.Join(into, segment.SumsFile))
		if err != nil {
			t.Fatal(err)
		}
		sums[string(b)] = true
	}
	if len(sums) != 1 {
		t.Errorf("two imports differ: %v", sums)
	}
}

// TestMillimetres holds the conversion of inches to decimal arithmetic: n
// thousandths of an inch are 254 n ten-thousandths of a mm.
func TestMillimetres(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.Int64Range(-20_000, 20_000).Draw(t, "n")
		sign, m := "", n
		if n < 0 {
			sign, m = "-", -n
		}
		text := fmt.Sprintf("%s%d.%03d", sign, m/1000, m%1000)
		v, err := parseNumber(text, false)
		if err != nil {
			t.Fatal(err)
		}
		got, err := millimetres(v, "in")
		if err != nil {
			t.Fatal(err)
		}
		if want := float64(n*254) / 10000; got != want {
			t.Fatalf("%s in = %v mm, want %v", text, got, want)
		}
	})
}

func FuzzImport(f *testing.F) {
	f.Add("time,mid [mm]\n2026-03-02T08:05Z,1\n")
	f.Add("time;mid (in)\n02.03.2026 08:05;1 3/8\n")
	f.Fuzz(func(t *testing.T, table string) {
		dir := t.TempDir()
		into := filepath.Join(dir, "run")
		s, err := Import(into, options(t, table))
		if err != nil {
			if left, _ := os.ReadDir(dir); len(left) > 0 {
				t.Errorf("left behind: %v", left)
			}
			return
		}
		d, err := ingest.OpenDir(into, ingest.DirOptions{})
		if err != nil {
			t.Fatal(err)
		}
		defer d.Close()
		v, err := segment.Verify(d.FS())
		if err != nil || !v.Whole() || v.Lines != s.Readings {
			t.Fatalf("%d readings went in: %+v, %v", s.Readings, v, err)
		}
	})
}
