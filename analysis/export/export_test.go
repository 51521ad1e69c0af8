package export

import (
	"bytes"
	"encoding/csv"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"testing"
	"time"

	"pgregory.net/rapid"

	"gaugelog/ingest/segment"
)

// folderOf makes a run folder of plain foreign lines.
func folderOf(t testing.TB, lines string) *segment.Folder {
	t.Helper()
	dir := t.TempDir()
	if err := os.MkdirAll(filepath.Join(dir, "readings"), 0o755); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(dir, "readings", "000001.lp"), []byte(lines), 0o644); err != nil {
		t.Fatal(err)
	}
	root, err := os.OpenRoot(dir)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { root.Close() })
	d, err := segment.OpenFolder(segment.OSFS(root, segment.OSOptions{}))
	if err != nil {
		t.Fatal(err)
	}
	return d
}

const few = `indication,gauge=mid mm=1.25 1790000000000000000
indication,gauge=left mm=9.8044,shown=0.386,unit="in" 1790000000250000000
ambient,probe=air celsius=20.5,humidity_percent=48 1790000000300000000
indication,gauge=mid mm=-0.001,status="a \"b\", c" 1790000001000000001
event,kind=gap detail="x",n=1i 1790000001500000000
indication,gauge=mid mm=0.0000005 1790000003000000000
`

func TestTables(t *testing.T) {
	for _, c := range []struct {
		name string
		make func(*bytes.Buffer, *segment.Folder) (Summary, error)
		want string
	}{
		{"long", func(b *bytes.Buffer, d *segment.Folder) (Summary, error) { return Long(b, d, Options{}) },
			"time_utc,seconds_s,name,indication_mm,shown,unit,status,temperature_celsius,humidity_percent\r\n" +
				"2026-09-21T14:13:20.000000000Z,0,mid,1.25,,,,,\r\n" +
				"2026-09-21T14:13:20.250000000Z,0.25,left,9.8044,0.386,in,,,\r\n" +
				"2026-09-21T14:13:20.300000000Z,0.3,air,,,,,20.5,48\r\n" +
				"2026-09-21T14:13:21.000000001Z,1.000000001,mid,-0.001,,,\"a \"\"b\"\", c\",,\r\n" +
				"2026-09-21T14:13:23.000000000Z,3,mid,0.0000005,,,,,\r\n"},
		{"wide", func(b *bytes.Buffer, d *segment.Folder) (Summary, error) {
			return Wide(b, d, Options{Gauges: []string{"left"}})
		},
			"time_utc,seconds_s,left_mm,left_shown,left_unit,mid_mm,mid_status,air_celsius,air_percent\r\n" +
				"2026-09-21T14:13:20.000000000Z,0,9.8044,0.386,in,1.25,,20.5,48\r\n" +
				"2026-09-21T14:13:21.000000001Z,1.000000001,,,,-0.001,\"a \"\"b\"\", c\",,\r\n" +
				"2026-09-21T14:13:23.000000000Z,3,,,,0.0000005,,,\r\n"},
	} {
		var b bytes.Buffer
		s, err := c.make(&b, folderOf(t, few))
		if err != nil {
			t.Fatal(err)
		}
		if b.String() != c.want {
			t.Errorf("%s:\n%s\nwant\n%s", c.name, b.String(), c.want)
		}
		if s.Readings != 5 {
			t.Errorf("%s: %d readings, want 5", c.name, s.Readings)
		}
	}
}

// TestEveryReadingOnce holds both tables to the property that the readings of
// a folder stand in them exactly once with the value that was written.
func TestEveryReadingOnce(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		n := rapid.IntRange(1, 60).Draw(rt, "n")
		var lines bytes.Buffer
		want := map[string]int{}
		at := int64(1790000000000000000)
		for range n {
			at += rapid.Int64Range(1, 700_000_000).Draw(rt, "gap")
			g := rapid.SampledFrom([]string{"a", "b", "c"}).Draw(rt, "gauge")
			v := float64(rapid.IntRange(-99999, 99999).Draw(rt, "v")) / 1000
			fmt.Fprintf(&lines, "indication,gauge=%s mm=%s %d\n", g, strconv.FormatFloat(v, 'f', -1, 64), at)
			want[fmt.Sprint(g, v)]++
		}
		d := folderOf(t, lines.String())
		var long, wide bytes.Buffer
		if _, err := Long(&long, d, Options{}); err != nil {
			rt.Fatal(err)
		}
		if _, err := Wide(&wide, d, Options{Within: 500 * time.Millisecond}); err != nil {
			rt.Fatal(err)
		}
		for name, text := range map[string]*bytes.Buffer{"long": &long, "wide": &wide} {
			got := readBack(rt, name, text)
			for k, c := range want {
				if got[k] != c {
					rt.Fatalf("%s: %s stands %d times, want %d", name, k, got[k], c)
				}
			}
		}
	})
}

func readBack(t *rapid.T, form string, text *bytes.Buffer) map[string]int {
	rows, err := csv.NewReader(text).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	got := map[string]int{}
	see := func(g, cell string) {
		if cell == "" {
			return
		}
		v, err := strconv.ParseFloat(cell, 64)
		if err != nil {
			t.Fatal(err)
		}
		got[fmt.Sprint(g, v)]++
	}
	for _, r := range rows[1:] {
		if form == "long" {
			see(r[2], r[3])
			continue
		}
		for i := 2; i < len(r); i++ {
			see(rows[0][i][:1], r[i])
		}
	}
	return got
}

func TestSeconds(t *testing.T) {
	for ns, want := range map[int64]string{0: "0", 1: "0.000000001", -1: "-0.000000001", 1_500_000_000: "1.5",
		-61_000_000_000: "-61", math.MinInt64: "-9223372036.854775808"} {
		if got := Seconds(ns); got != want {
			t.Errorf("Seconds(%d) = %s, want %s", ns, got, want)
		}
	}
}

// BenchmarkLong tells the cost of a row.
func BenchmarkLong(b *testing.B) {
	var lines bytes.Buffer
	for i := range 100_000 {
		fmt.Fprintf(&lines, "indication,gauge=mid mm=%d.%03d %d\n", i%10, i%1000, 1790000000000000000+int64(i)*1_000_001)
	}
	d := folderOf(b, lines.String())
	b.ReportAllocs()
	for b.Loop() {
		var sink countingWriter
		if _, err := Long(&sink, d, Options{}); err != nil {
			b.Fatal(err)
		}
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/100_000, "ns/row")
}

type countingWriter int

func (c *countingWriter) Write(p []byte) (int, error) {
	*c += countingWriter(len(p))
	return len(p), nil
}
