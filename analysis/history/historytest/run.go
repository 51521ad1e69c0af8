// Package historytest makes run folders of any size for tests and
// measurements: recorded readings of a creeping beam, written with the segment
// writer. The same Run gives the same bytes.
package historytest

import (
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"io"
	"math"
	"strings"
	"time"

	"gaugelog/ingest/segment"
)

// Start is the first reading's instant, in ns since 1970 UTC: 2026-09-21 14:13:20.
const Start = int64(1_790_000_000_000_000_000)

// Run says what to write.
type Run struct {
	// Gauges is how many gauges read, 1 to 64: g1 and so on.
	Gauges int
	// Readings is how many readings there are at least, over all gauges.
	Readings int
	// Duration is how long the run lasts.
	Duration time.Duration
	// Steps is how many load changes there are; one Newton more at each.
	Steps int
	// Compress makes closed segments into .zst files.
	Compress bool
	// Roll is the size of a segment in bytes; 0: 16 MB.
	Roll int64
	// Sampling is what the rig file says of it; empty: all.
	Sampling string
}

// Rig is the text of the run's rig file.
func (r Run) Rig() string {
	var b strings.Builder
	b.WriteString(`title: a generated run
specimen:
  name: generated
  section: {shape: rectangle, width: 140 mm, depth: 38 mm}
  length: 800 mm
  expect: {modulus: 1200 MPa}
supports:
  - {name: left, at: 0 mm}
  - {name: right, at: 600 mm}
gauges:
`)
	for g := range r.Gauges {
		fmt.Fprintf(&b, "  - {name: g%d, at: %d mm, sense: down, resolution: 0.001 mm}\n", g+1, 600*(g+1)/(r.Gauges+1))
	}
	b.WriteString("loads:\n  - {name: pan, at: 300 mm}\n")
	if r.Sampling != "" {
		b.WriteString("record:\n  sampling: " + r.Sampling + "\n")
	}
	return b.String()
}

// Value is what a gauge shows at an instant, in thousandths of a mm: under each
// load a logarithmic creep, and a noise of some resolutions that repeats.
func (r Run) Value(gauge int, t int64) int64 {
	every := int64(r.Duration) / int64(r.Steps+1)
	step := min((t-Start)/every, int64(r.Steps))
	since := float64(t-Start-step*every)/1e9 + 1
	share := 1 - math.Abs(float64(2*(gauge+1))/float64(r.Gauges+1)-1)*0.6
	sag := float64(step) * (200 + 8*math.Log(since)) * share
	noise := uint64(t/1_000_000+int64(gauge)*7919) * 0x9E3779B97F4A7C15 >> 40
	return 1000 + int64(sag) + int64(noise%3+noise>>3%3) - 2
}

// interval is the time between two readings of a gauge.
func (r Run) interval() int64 {
	return max(int64(r.Duration)/int64((r.Readings+r.Gauges-1)/r.Gauges), 1000)
}

// checkpointEvery is how much a writer syncs at once at least, in readings.
const checkpointEvery = 2000

// Write lays the run folder out in fs, which must be empty.
func (r Run) Write(fs segment.FS) error {
	if r.Gauges < 1 || r.Gauges > 64 || r.Readings < 1 || r.Steps < 0 || r.Duration <= 0 {
		panic(fmt.Sprintf("historytest: impossible run %+v", r))
	}
	w := &writing{Run: r, fs: fs}
	if w.Roll == 0 {
		w.Roll = 16_000_000
	}
	if err := w.rig(); err != nil {
		return err
	}
	if err := w.marks(); err != nil {
		return err
	}
	return w.readings()
}

// writing is a Run being written.
type writing struct {
	Run
	fs     segment.FS
	w      *segment.Writer
	number int
	held   int // readings since the last checkpoint
}

func clockAt(t int64) segment.ClockState {
	return segment.ClockState{Boot: t - Start + 1_000_000_000, Wall: t, Synced: true}
}

func (w *writing) header(t int64) segment.Header {
	sum := sha256.Sum256([]byte(w.Rig()))
	return segment.Header{Run: "run-1", Boot: "boot-1", Rig: hex.EncodeToString(sum[:]), Program: "historytest", Clock: clockAt(t)}
}

func (w *writing) rig() error {
	f, err := w.fs.Create(segment.RigFile)
	if err != nil {
		return err
	}
	if _, err := io.WriteString(f, w.Rig()); err != nil {
		f.Close()
		return err
	}
	return f.Close()
}

func (w *writing) marks() error {
	log, err := segment.OpenLog(w.fs, segment.MarksFile, w.header(Start))
	if err != nil {
		return err
	}
	every := int64(w.Duration) / int64(w.Steps+1)
	for i := range w.Steps {
		at := Start + int64(i+1)*every
		p := &segment.Point{Measurement: "load", Tags: []segment.Tag{{Key: "name", Value: "pan"}},
			Fields: []segment.Field{{Key: "id", Value: fmt.Sprintf("m%d", i+1)}, {Key: "newton", Value: float64(20 * (i + 1))}}}
		if err := log.Append(clockAt(at), segment.Entry{Point: p, Time: at}); err != nil {
			return err
		}
	}
	return nil
}

func (w *writing) readings() error {
	names := make([]string, w.Gauges)
	for g := range names {
		names[g] = fmt.Sprintf("g%d", g+1)
	}
	var in segment.Shown
	step := w.interval()
	rows := (w.Readings + w.Gauges - 1) / w.Gauges
	t := Start
	for range rows {
		if err := w.ready(t); err != nil {
			return err
		}
		for g, name := range names {
			at := t + int64(g)*(step/int64(2*w.Gauges))
			in = segment.Shown{Gauge: name, MM: float64(w.Value(g, at)) / 1000, Time: at}
			if err := w.w.Indication(&in); err != nil {
				return err
			}
		}
		w.held += w.Gauges
		t += step
		if w.held >= checkpointEvery {
			w.held = 0
			if err := w.w.Checkpoint(clockAt(t)); err != nil {
				return err
			}
		}
	}
	return w.close(t)
}

// ready makes sure of a segment that has room.
func (w *writing) ready(t int64) error {
	if w.w != nil && w.w.Size() < w.Roll {
		return nil
	}
	if w.w != nil {
		if err := w.close(t); err != nil {
			return err
		}
	}
	w.number++
	var err error
	w.w, err = segment.NewWriter(w.fs, segment.ReadingsDir, w.number, segment.WriterOptions{Header: w.header(t)})
	return err
}

func (w *writing) close(t int64) error {
	if err := w.w.Close(clockAt(t)); err != nil {
		return err
	}
	w.held = 0
	if !w.Compress {
		return nil
	}
	_, err := segment.Compress(w.fs, w.number)
	return err
}
