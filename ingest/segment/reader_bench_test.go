package segment_test

import (
	"fmt"
	"io"
	"os"
	"testing"

	"gaugelog/ingest/segment"
)

// benchFolder is a run folder of n readings of eight gauges, in segments of
// 16 MB with a checkpoint every 800 readings, plain or compressed.
func benchFolder(b *testing.B, n int, packed bool) segment.FS {
	b.Helper()
	root, err := os.OpenRoot(b.TempDir())
	if err != nil {
		b.Fatal(err)
	}
	b.Cleanup(func() { root.Close() })
	fs := segment.OSFS(root, segment.OSOptions{SyncOnCloseOnly: true})
	number, now := 0, t0
	var w *segment.Writer
	gauges := []string{"left", "q1", "mid", "q3", "right", "ref", "seat-l", "seat-r"}
	done := func() {
		if err := w.Close(synced(now)); err != nil {
			b.Fatal(err)
		}
		if packed {
			if _, err := segment.Compress(fs, number); err != nil {
				b.Fatal(err)
			}
		}
	}
	for i := range n {
		if w == nil || w.Size() > 16e6 {
			if w != nil {
				done()
			}
			number++
			if w, err = segment.NewWriter(fs, segment.ReadingsDir, number, segment.WriterOptions{Header: header()}); err != nil {
				b.Fatal(err)
			}
		}
		now += 1e7
		mm := float64(int(1234+i/1000)+i*7919%13) / 1000
		if err := w.Indication(&segment.Shown{Gauge: gauges[i%8], MM: mm, Time: now}); err != nil {
			b.Fatal(err)
		}
		if i%800 == 799 {
			if err := w.Checkpoint(synced(now)); err != nil {
				b.Fatal(err)
			}
		}
	}
	done()
	return fs
}

// BenchmarkRead is a whole pass from the page cache: reading, CRC-32C, unpacking,
// decoding, numbering.
func BenchmarkRead(b *testing.B) {
	const n = 2_000_000
	for _, packed := range []bool{false, true} {
		fs := benchFolder(b, n, packed)
		kind := "plain"
		if packed {
			kind = "zst"
		}
		for _, workers := range []int{1, 2} {
			b.Run(fmt.Sprintf("%s/workers=%d", kind, workers), func(b *testing.B) {
				b.ReportAllocs()
				for b.Loop() {
					d, err := segment.OpenFolder(fs)
					if err != nil {
						b.Fatal(err)
					}
					r := d.Read(segment.ReadOptions{Workers: workers})
					rows := 0
					for {
						batch, err := r.Next()
						if err == io.EOF {
							break
						}
						if err != nil {
							b.Fatal(err)
						}
						rows += len(batch.Gauge)
					}
					r.Close()
					if rows != n || len(r.Report().Damage) > 0 {
						b.Fatal(rows, r.Report().Damage)
					}
				}
				b.ReportMetric(float64(n)*float64(b.N)/b.Elapsed().Seconds()/1e6, "Mreadings/s")
			})
		}
	}
}

// BenchmarkAppend is one indication into memory, a checkpoint every 800.
func BenchmarkAppend(b *testing.B) {
	root, err := os.OpenRoot(b.TempDir())
	if err != nil {
		b.Fatal(err)
	}
	b.Cleanup(func() { root.Close() })
	fs := segment.OSFS(root, segment.OSOptions{SyncOnCloseOnly: true})
	w, err := segment.NewWriter(fs, segment.ReadingsDir, 1, segment.WriterOptions{Header: header()})
	if err != nil {
		b.Fatal(err)
	}
	in := segment.Shown{Gauge: "mid", MM: 1.234, Time: t0}
	b.ReportAllocs()
	i := 0
	for b.Loop() {
		in.Time += 1e6
		if err := w.Indication(&in); err != nil {
			b.Fatal(err)
		}
		if i++; i%800 == 0 {
			if err := w.Checkpoint(synced(in.Time)); err != nil {
				b.Fatal(err)
			}
		}
	}
}
