package glance

import (
	"os"
	"testing"
	"time"

	"gaugelog/analysis/history/historytest"
	"gaugelog/config"
	"gaugelog/ingest/segment"
)

// BenchmarkFirstLook is one run of 30 days with 16 gauges, looked at for the
// first time: "gaugelog rigs" does this for each run that has grown.
func BenchmarkFirstLook(b *testing.B) {
	root, err := os.OpenRoot(b.TempDir())
	if err != nil {
		b.Fatal(err)
	}
	defer root.Close()
	fsys := segment.OSFS(root, segment.OSOptions{SyncOnCloseOnly: true})
	run := historytest.Run{Gauges: 16, Readings: 2_000_000, Duration: 30 * 24 * time.Hour, Steps: 2, Compress: true}
	if err := run.Write(fsys); err != nil {
		b.Fatal(err)
	}
	text := []byte(run.Rig())
	b.Run("parse the rig file", func(b *testing.B) {
		for b.Loop() {
			if _, err := Rig("rig.yaml", text, nil); err != nil {
				b.Fatal(err)
			}
		}
	})
	rig, err := config.Parse("rig.yaml", text)
	if err != nil {
		b.Fatal(err)
	}
	b.Run("look", func(b *testing.B) {
		for b.Loop() {
			if s, err := Look(fsys, rig); err != nil || s.SagMM == nil {
				b.Fatal(s, err)
			}
		}
	})
	b.Run("look again", func(b *testing.B) {
		for b.Loop() {
			if _, err := LookAgain(fsys, func(_, _ []byte) (*config.Rig, error) { return rig, nil }); err != nil {
				b.Fatal(err)
			}
		}
	})
}
