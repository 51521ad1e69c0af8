package segment_test

import (
	"fmt"
	"os"
	"slices"
	"testing"
	"time"

	"pgregory.net/rapid"

	"gaugelog/analysis/history/historytest"
	"gaugelog/ingest/segment"
)

// TestSpans: a reading of some stretches of time, of some gauges, gives what
// lies in them of the whole, whatever is passed over unread on the way.
func TestSpans(t *testing.T) {
	for name, packed := range map[string]bool{"plain": false, "compressed": true} {
		t.Run(name, func(t *testing.T) {
			root, err := os.OpenRoot(t.TempDir())
			if err != nil {
				t.Fatal(err)
			}
			defer root.Close()
			fsys := segment.OSFS(root, segment.OSOptions{SyncOnCloseOnly: true})
			run := historytest.Run{Gauges: 3, Readings: 30_000, Duration: 24 * time.Hour, Steps: 1, Compress: packed, Roll: 300_000}
			if err := run.Write(fsys); err != nil {
				t.Fatal(err)
			}
			d, err := segment.OpenFolder(fsys)
			if err != nil {
				t.Fatal(err)
			}
			read := func(o segment.ReadOptions) (out []string, times []int64) {
				r := d.Read(o)
				defer r.Close()
				for rec, err := range r.Records() {
					if err != nil {
						t.Fatal(err)
					}
					out = append(out, fmt.Sprint(rec.Kind, rec.Name, rec.MM, rec.Time))
					times = append(times, rec.Time)
				}
				return out, times
			}
			all, times := read(segment.ReadOptions{})
			only := []string{"g1", "g3"}
			some, someTimes := read(segment.ReadOptions{Only: only})
			if len(some) == 0 || len(some) >= len(all) {
				t.Fatalf("%d of %d are of %v", len(some), len(all), only)
			}
			rapid.Check(t, func(rt *rapid.T) {
				spans := []segment.Interval{}
				for range rapid.IntRange(0, 3).Draw(rt, "spans") {
					i, j := rapid.IntRange(0, len(times)-1).Draw(rt, "from"), rapid.IntRange(0, len(times)-1).Draw(rt, "to")
					spans = append(spans, segment.Interval{From: times[min(i, j)], To: times[max(i, j)]})
				}
				want, wantTimes, o := all, times, segment.ReadOptions{Spans: spans, Workers: 1}
				if rapid.Bool().Draw(rt, "some gauges") {
					want, wantTimes, o.Only = some, someTimes, only
				}
				var in []string
				for i, at := range wantTimes {
					if slices.ContainsFunc(spans, func(s segment.Interval) bool { return at >= s.From && at <= s.To }) {
						in = append(in, want[i])
					}
				}
				if got, _ := read(o); !slices.Equal(got, in) {
					rt.Errorf("%d records, want %d", len(got), len(in))
				}
			})
		})
	}
}
