// Package desktest makes a recording to test against: some days of a creeping
// beam recorded in virtual time, and then a live recorder fed in real time, with
// a desk beside it. Gauges can be silenced, held and moved.
package desktest

import (
	"context"
	"log/slog"
	"math"
	"path/filepath"
	"slices"
	"strings"
	"sync"
	"testing"
	"time"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/ingest"
	"gaugelog/ingest/alarm"
	"gaugelog/ingest/desk"
)

// RigText is the rig of every world.
const RigText = `title: %TITLE%
timezone: Europe/Dublin
specimen:
  name: slat-3
  section: {shape: rectangle, width: 95 mm, depth: 20 mm}
  length: 1000 mm
supports:
  - {name: left, at: 0 mm}
  - {name: right, at: 900 mm}
gauges:
  - {name: mid, at: 450 mm, port: "sim:mid", frame: signed-decimal, sense: down, resolution: 0.001 mm, travel: [0 mm, 12.7 mm], silent_after: 3 s}
  - {name: quarter, at: 225 mm, port: "sim:quarter", frame: signed-decimal, sense: up, resolution: 0.001 mm, travel: [0 mm, 12.7 mm], silent_after: 3 s}
  - {name: seat, at: 0 mm, sees: seat, port: "sim:seat", frame: signed-decimal, sense: down, resolution: 0.001 mm, silent_after: 3 s}
probes:
  - {name: air, port: "sim:air", frame: temperature-humidity, temperature: temperature, humidity: humidity}
loads:
  - {name: pan, at: 450 mm}
plan:
  - {step: zero, hold: 30 min}
  - {step: l1, set: {pan: 12.40 kg}, hold: 14 d}
  - {step: bare, set: {pan: 0 kg}, hold: 24 h}
read: {creep_gauge: mid}
limits: {sag: 9 mm, travel_left: 2 mm, temperature: [18 C, 24 C]}
alarms: {off: [clock]}
forecast: [30 d, 1 a]
`

// Options chooses a world.
type Options struct {
	// Past is how long the recording has been going on before the test; 0: it
	// begins with it.
	Past time.Duration
	// Every is the interval of the past's readings; 0: one minute.
	Every time.Duration
	// Title is the rig's title; it may be anything. Default "Slat 3, larch".
	Title string
	// Outlook is what the analysis says; nil: there is no analysis.
	Outlook func(w *World) *desk.Outlook
	// Outbox carries messages out; may be nil.
	Outbox *alarm.Outbox
	// Still keeps the gauges from being fed in real time.
	Still bool
}

// World is a recording going on.
type World struct {
	Dir    *ingest.Dir
	Rig    *config.Rig
	Run    string
	Desk   *desk.Desk
	Runner *ingest.Runner
	Rec    *ingest.Recorder
	// Loaded is when the load was hung on; zero in a world without a past.
	Loaded time.Time

	o    Options
	text []byte

	mu     sync.Mutex
	hushed map[string]bool
	held   map[string]bool
	moved  map[string]float64
	status string
	last   map[string]float64
	stop   func()
}

// Zero step of the past.
const zeroStep = 30 * time.Minute

// New makes a world that ends with the test.
func New(tb testing.TB, o Options) *World {
	tb.Helper()
	w := &World{Run: filepath.Join(tb.TempDir(), "run"), hushed: map[string]bool{}, held: map[string]bool{}, moved: map[string]float64{}, last: map[string]float64{}}
	text := rigText(o.Title)
	rig, err := config.Parse("rig.yaml", text)
	if err != nil {
		tb.Fatal(err)
	}
	w.Rig, w.o, w.text = rig, o, text
	now := ingest.SystemClock{}.Now()
	if o.Past > 0 {
		w.past(tb, o, text, now)
	}
	w.present(tb, o, text)
	return w
}

func rigText(title string) []byte {
	if title == "" {
		title = "Slat 3, larch"
	}
	quoted := "'" + strings.ReplaceAll(title, "'", "''") + "'"
	return []byte(strings.Replace(RigText, "%TITLE%", quoted, 1))
}

func open(tb testing.TB, path string) *ingest.Dir {
	tb.Helper()
	dir, err := ingest.OpenDir(path, ingest.DirOptions{Create: true})
	if err != nil {
		tb.Fatal(err)
	}
	return dir
}

// past records in virtual time what came before.
func (w *World) past(tb testing.TB, o Options, text []byte, now device.Instant) {
	tb.Helper()
	dir, err := ingest.OpenDir(w.Run, ingest.DirOptions{Create: true, Virtual: true})
	if err != nil {
		tb.Fatal(err)
	}
	every := o.Every
	if every == 0 {
		every = time.Minute
	}
	start := device.Instant{Wall: now.Wall - int64(o.Past), Boot: int64(time.Hour)}
	clock := &ingest.FixedClock{At: start, Known: ingest.ClockState{BootID: "past", Synchronised: true}}
	// Readings minutes apart are no silence here, which would fill the events.
	patient := *w.Rig
	patient.Gauges = slices.Clone(w.Rig.Gauges)
	for i := range patient.Gauges {
		patient.Gauges[i].SilentAfter = nil
	}
	rec, err := ingest.Open(ingest.Options{FS: dir.FS(), Rig: &patient, RigBytes: text, Run: "run-3", Clock: clock, Start: start, Compress: true})
	if err != nil {
		tb.Fatal(err)
	}
	w.Loaded = time.Unix(0, start.Wall).Add(min(zeroStep, o.Past/2))
	marked := false
	at := start
	for t := time.Duration(0); t < o.Past-every; t += every {
		at = device.Instant{Wall: start.Wall + int64(t), Boot: start.Boot + int64(t)}
		clock.At = at
		if !marked && at.Wall >= w.Loaded.UnixNano() {
			marked = true
			kg := 12.4
			m := ingest.Mark{Time: w.Loaded.UnixNano(), Step: "l1", By: "mo", Loads: []ingest.LoadValue{{Name: "pan", Kilogram: &kg, Newton: 121.6, Shown: "12.40 kg"}}}
			if _, err := ingest.AppendMark(dir.FS(), m, at, clock.State()); err != nil {
				tb.Fatal(err)
			}
		}
		for _, r := range w.readings(at) {
			if err := rec.Handle(ingest.Seen(r)); err != nil {
				tb.Fatal(err)
			}
		}
		if err := rec.Handle(ingest.TickAt(at)); err != nil {
			tb.Fatal(err)
		}
	}
	if err := rec.Close(at); err != nil {
		tb.Fatal(err)
	}
	if err := dir.Close(); err != nil {
		tb.Fatal(err)
	}
}

// present begins the live recording and the desk.
func (w *World) present(tb testing.TB, o Options, text []byte) {
	tb.Helper()
	w.Dir = open(tb, w.Run)
	start := ingest.SystemClock{}.Now()
	rec, err := ingest.Open(ingest.Options{FS: w.Dir.FS(), Rig: w.Rig, RigBytes: text, Run: "run-3", Clock: ingest.SystemClock{}, Start: start, Live: true, DiskFree: w.Dir.DiskFree})
	if err != nil {
		tb.Fatal(err)
	}
	w.Rec = rec
	if w.Runner, err = ingest.NewRunner(ingest.RunnerOptions{Recorders: []*ingest.Recorder{rec}, Clock: ingest.SystemClock{}}); err != nil {
		tb.Fatal(err)
	}
	var analyse desk.Analyse
	if o.Outlook != nil {
		analyse = func(context.Context) (*desk.Outlook, error) { return o.Outlook(w), nil }
	}
	w.Desk, err = desk.New(desk.Options{
		Name: "slat-3", Rig: w.Rig, FS: w.Dir.FS(), Status: rec.Status, Gravity: 9.81,
		Happen:  func(h ingest.Happening) bool { return w.Runner.Happen(0, h) },
		Mark:    func(m ingest.Mark) (string, error) { return w.Dir.AppendMark(m, ingest.SystemClock{}) },
		Queued:  w.Runner.Queued,
		Analyse: analyse, AnalyseFirst: 200 * time.Millisecond, Outbox: o.Outbox, Start: start, Log: slog.New(slog.DiscardHandler),
	})
	if err != nil {
		tb.Fatal(err)
	}
	w.run(tb, o.Still)
}

// run sets it going until the test ends or Stop is called.
func (w *World) run(tb testing.TB, still bool) {
	feeding, stopFeed := context.WithCancel(context.Background())
	recording, stopRec := context.WithCancel(context.Background())
	desking, stopDesk := context.WithCancel(context.Background())
	var feed, rec, dsk sync.WaitGroup
	rec.Go(func() {
		if err := w.Runner.Run(recording); err != nil {
			tb.Errorf("recording: %v", err)
		}
	})
	dsk.Go(func() { w.Desk.Run(desking) })
	feed.Go(func() {
		ticker := time.NewTicker(250 * time.Millisecond)
		defer ticker.Stop()
		for {
			select {
			case <-ticker.C:
				if !still {
					w.Feed()
				}
			case <-feeding.Done():
				return
			}
		}
	})
	w.stop = sync.OnceFunc(func() {
		stopFeed()
		feed.Wait()
		stopRec()
		rec.Wait()
		stopDesk()
		dsk.Wait()
		if err := w.Dir.Close(); err != nil {
			tb.Errorf("closing the folder: %v", err)
		}
	})
	tb.Cleanup(w.stop)
}

// Stop ends the recording, as the end of the program does.
func (w *World) Stop() { w.stop() }

// Restart ends the recording and begins another in the same folder, as a new
// start of the program does. Desk, Runner and Rec are new ones then.
func (w *World) Restart(tb testing.TB) {
	tb.Helper()
	w.stop()
	w.present(tb, w.o, w.text)
}

// Feed hands over one reading of every instrument that is not silent.
func (w *World) Feed() {
	for _, r := range w.readings(ingest.SystemClock{}.Now()) {
		w.Runner.Take(r)
		w.Desk.Take(r)
	}
}

// Hush silences a gauge or lets it speak again.
func (w *World) Hush(gauge string, yes bool) { w.mu.Lock(); w.hushed[gauge] = yes; w.mu.Unlock() }

// Hold keeps a gauge's indication where it is.
func (w *World) Hold(gauge string, yes bool) { w.mu.Lock(); w.held[gauge] = yes; w.mu.Unlock() }

// Move adds to a gauge's indication from now on, mm.
func (w *World) Move(gauge string, mm float64) { w.mu.Lock(); w.moved[gauge] += mm; w.mu.Unlock() }

// SetStatus puts a status text on all readings.
func (w *World) SetStatus(s string) { w.mu.Lock(); w.status = s; w.mu.Unlock() }

// readings are those of all instruments at an instant: a beam that creeps by
// the logarithm of time, with the day's temperature and a little noise.
func (w *World) readings(at device.Instant) []device.Reading {
	w.mu.Lock()
	defer w.mu.Unlock()
	t := float64(at.Wall-w.Loaded.UnixNano()) / 1e9
	sag := 0.0
	if !w.Loaded.IsZero() && t > 0 {
		sag = 3.2 * (1 + 0.11*math.Log10(1+t/20))
	}
	day := math.Sin(float64(at.Wall) / 1e9 * 2 * math.Pi / 86400)
	tremor := 0.0008 * math.Sin(float64(at.Wall%7919)*0.79)
	values := map[string]float64{"mid": 1.5 + sag + 0.003*day + tremor, "quarter": 11.2 - 0.69*sag + 0.002*day + tremor, "seat": 0.4 + 0.004*sag}
	var out []device.Reading
	for _, g := range w.Rig.Gauges {
		if w.hushed[g.Name] {
			continue
		}
		mm := math.Round((values[g.Name]+w.moved[g.Name])*1000) / 1000
		if w.held[g.Name] {
			mm = w.last[g.Name]
		}
		w.last[g.Name] = mm
		out = append(out, device.Reading{Kind: device.Indication, Gauge: g.Name, Port: "sim:" + g.Name, At: at, MM: mm, Shown: mm, Unit: "mm", Status: w.status})
	}
	return append(out, device.Reading{Kind: device.Ambient, Probe: "air", Port: "sim:air", At: at, Celsius: 20.3 + 0.8*day, HumidityPercent: 48 - 3*day})
}
