package main

import (
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"gaugelog/analysis/history/historytest"
	"gaugelog/ingest/segment"
)

// BenchmarkRigs looks at 200 run folders for the first time and then again. Each
// has 16 gauges, 20 days in 23 segments, a rig file and marks of its own.
//
//	go test -run '^$' -bench Rigs$ -benchtime 5x ./cmd/gaugelog
func BenchmarkRigs(b *testing.B) {
	const rigs = 200
	runs := b.TempDir()
	for i := range rigs {
		dir := filepath.Join(runs, fmt.Sprintf("r%03d", i))
		if i > 0 {
			if err := os.CopyFS(dir, os.DirFS(filepath.Join(runs, "r000"))); err != nil {
				b.Fatal(err)
			}
			named(b, filepath.Join(dir, segment.RigFile), fmt.Sprintf("rig-%03d", i))
			continue
		}
		if err := os.Mkdir(dir, 0o755); err != nil {
			b.Fatal(err)
		}
		root, err := os.OpenRoot(dir)
		if err != nil {
			b.Fatal(err)
		}
		run := historytest.Run{Gauges: 16, Readings: 200_000, Duration: 20 * 24 * time.Hour, Steps: 2, Compress: true, Roll: 500_000}
		if err := run.Write(segment.OSFS(root, segment.OSOptions{SyncOnCloseOnly: true})); err != nil {
			b.Fatal(err)
		}
		root.Close()
	}
	look := func(b *testing.B) {
		rows, err := lookAt([]string{runs})
		if err != nil || len(rows) != rigs {
			b.Fatal(len(rows), err)
		}
		for _, r := range rows {
			if r.Sag == nil || r.Rate == nil || r.State == "unreadable" {
				b.Fatalf("%+v", r)
			}
		}
		if err := printRigs(io.Discard, rows); err != nil {
			b.Fatal(err)
		}
	}
	b.Run("first look", func(b *testing.B) {
		defer collectSeldom()()
		for b.Loop() {
			b.StopTimer()
			kept, _ := filepath.Glob(filepath.Join(runs, "*", "report"))
			for _, dir := range kept {
				os.RemoveAll(dir)
			}
			b.StartTimer()
			look(b)
		}
	})
	b.Run("second look", func(b *testing.B) {
		for b.Loop() {
			look(b)
		}
	})
}

// named gives the specimen of a rig file another name.
func named(b *testing.B, file, name string) {
	text, err := os.ReadFile(file)
	if err != nil {
		b.Fatal(err)
	}
	if err := os.WriteFile(file, []byte(strings.Replace(string(text), "name: generated", "name: "+name, 1)), 0o644); err != nil {
		b.Fatal(err)
	}
}
