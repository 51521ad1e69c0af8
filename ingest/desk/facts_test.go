package desk

import (
	"math"
	"strings"
	"testing"
	"time"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/ingest"
	"gaugelog/ingest/alarm"
)

const factsRig = `specimen:
  name: slat
  section: {shape: rectangle, width: 95 mm, depth: 20 mm}
  length: 1000 mm
supports:
  - {name: left, at: 0 mm}
  - {name: right, at: 900 mm}
gauges:
  - {name: mid, at: 450 mm, sense: down, resolution: 0.001 mm, travel: [0 mm, 12.7 mm]}
  - {name: east, at: 225 mm, sense: down, resolution: 0.001 mm}
  - {name: west, at: 675 mm, sense: down, resolution: 0.001 mm}
  - {name: edge, at: 0 mm, sense: down, resolution: 0.001 mm}
probes:
  - {name: air, port: "sim:air", frame: temperature-humidity, temperature: temperature, humidity: humidity}
loads:
  - {name: pan, at: 450 mm}
limits: {sag: 9 mm, travel_left: 2 mm, span_over_sag: 100, catcher_gap: 12 mm, temperature: [18 C, 24 C]}
alarms: {frozen_after: 30 min, travel_within: 7 d, disk_free: 500 MB}
`

var noon = time.Date(2026, 3, 2, 12, 0, 0, 0, time.UTC)

// seen is what a moment looks like, with nothing wrong.
type seen struct {
	d      *Desk
	status ingest.Status
	gauge  Gauge
}

func moment(t *testing.T) *seen {
	t.Helper()
	dir, err := ingest.OpenDir(t.TempDir(), ingest.DirOptions{Create: true})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { dir.Close() })
	rig, err := config.Parse("rig.yaml", []byte(factsRig))
	if err != nil {
		t.Fatal(err)
	}
	d, err := New(Options{Name: "x", Rig: rig, FS: dir.FS(), Status: func() *ingest.Status { return nil }})
	if err != nil {
		t.Fatal(err)
	}
	sag, left, share := 3.0, 8.0, 8/12.7
	s := &seen{d: d, status: ingest.Status{At: device.Instant{Wall: noon.UnixNano(), Boot: int64(time.Hour)}, DiskFree: 9e9, ClockSynchronised: true,
		Last: []ingest.Last{{Name: "mid", Seen: true}, {Name: "air", Probe: true, Seen: true, Celsius: 21, HumidityPercent: 50}}}}
	s.gauge = Gauge{Last: s.status.Last[0], Sees: "beam", Resolution: 0.001, Sag: &sag, TravelLeft: &left, TravelShare: &share}
	for i := range d.still {
		d.moved(i, noon.Add(-2*time.Hour).UnixNano(), 1)
	}
	return s
}

// wish is what the facts ask for of a cause at its subject.
func (s *seen) wish(cause string) (alarm.Wish, string) {
	s.d.snapshot.Store(&Snapshot{Gauges: []Gauge{s.gauge}})
	for _, f := range s.d.facts(noon, &s.status) {
		if f.Cause == cause {
			return f.Wish, f.Text
		}
	}
	return alarm.Over, "" // no fact lets an alarm go
}

// Each cause at its threshold: just below it nothing, at it the alarm, just back
// nothing new, and over only at the second threshold. The thresholds are those
// of the rig above and of the constants in facts.go.
func TestThresholds(t *testing.T) {
	sag := func(s *seen, v float64) { s.gauge.Sag = &v }
	left := func(s *seen, v float64) { share := v / 12.7; s.gauge.TravelLeft, s.gauge.TravelShare = &v, &share }
	days := func(s *seen, v float64) { s.gauge.RunsOut = noon.Add(time.Duration(v * 24 * float64(time.Hour))) }
	celsius := func(s *seen, v float64) { s.status.Last[1].Celsius = v }
	free := func(s *seen, v float64) { s.status.DiskFree = int64(v) }
	// still holds mid where it is for so many minutes while two others move by
	// six counts.
	still := func(s *seen, minutes float64) {
		at := noon.Add(time.Duration(minutes * float64(time.Minute))).UnixNano()
		s.d.moved(0, noon.UnixNano(), 2)
		s.d.moved(0, at, 2)
		s.d.moved(1, at, 1.006)
		s.d.moved(2, at, 1.006)
	}
	others := func(s *seen, counts float64) {
		at := noon.Add(time.Hour).UnixNano()
		s.d.moved(0, noon.UnixNano(), 2)
		s.d.moved(0, at, 2)
		s.d.moved(1, at, 1+counts/1000)
		s.d.moved(2, at, 1+counts/1000)
	}
	bootSeconds := func(s *seen, v float64) {
		s.status.Last[0] = ingest.Last{Name: "mid"}
		s.status.At.Boot = int64(v * 1e9)
	}
	ago := func(kind string) func(s *seen, hours float64) {
		return func(s *seen, hours float64) {
			s.d.outlook.outlook = &Outlook{At: noon.UnixNano(), Disturbances: []Disturbance{{Kind: kind, Gauges: []string{"mid"}, From: noon.Add(-time.Duration(hours * float64(time.Hour))).UnixNano()}}}
		}
	}
	const raise, leave, over = alarm.Raise, alarm.Leave, alarm.Over
	type at struct {
		value float64
		want  alarm.Wish
	}
	for _, c := range []struct {
		cause string
		apply func(s *seen, v float64)
		steps []at
		says  string
	}{
		{"sag", sag, []at{{8.81, over}, {8.83, leave}, {9, raise}}, "the limit 9 mm"},
		{"catcher", sag, []at{{9.4, over}, {9.42, leave}, {9.601, raise}}, "the gap under the load 12 mm"},
		{"span-over-sag", sag, []at{{8.81, over}, {8.83, leave}, {9.001, raise}}, "the limit 100"},
		{"travel", left, []at{{2.21, over}, {2.19, leave}, {2, leave}, {1.999, raise}}, "1.999 mm of travel are left"},
		{"travel", days, []at{{8.76, over}, {8.74, leave}, {7, leave}, {6.99, raise}}, "at the present rate until 9 Mar 2026"},
		{"temperature", celsius, []at{{23.7, over}, {23.8, leave}, {24, leave}, {24.1, raise}}, "24.1 °C, wanted 18 C to 24 C"},
		{"temperature", celsius, []at{{18.31, over}, {18.2, leave}, {18, leave}, {17.9, raise}}, "17.9 °C"},
		{"temperature", celsius, []at{{math.NaN(), over}}, ""},
		{"disk", free, []at{{601e6, over}, {599e6, leave}, {500e6, leave}, {499e6, raise}}, "499 MB are free"},
		{"disk", free, []at{{-1, over}}, ""},
		{"frozen", still, []at{{29, over}, {30, raise}}, "it has shown 2.000 mm for 30 min while 2 other gauges moved"},
		{"frozen", others, []at{{4, leave}, {6, raise}}, "while 2 other gauges moved"},
		{"silent", bootSeconds, []at{{59, leave}, {61, raise}}, "nothing has come from it since the recording began"},
		{"knock", ago("gauge-knock"), []at{{24.1, over}, {23.9, raise}}, "the gauge was knocked at 1 Mar 12:06"},
		{"knock", ago("spike"), []at{{1, over}}, ""},
		{"load-changed", ago("load-change"), []at{{24.1, over}, {1, raise}}, "the load changed without a mark at 2 Mar 11:00"},
	} {
		text := ""
		for _, step := range c.steps {
			s := moment(t)
			c.apply(s, step.value)
			got, says := s.wish(c.cause)
			if got != step.want {
				t.Errorf("%s at %g: wish %d, want %d (%s)", c.cause, step.value, got, step.want, says)
			}
			text = says
		}
		if !strings.Contains(text, c.says) {
			t.Errorf("%s says %q, want %q in it", c.cause, text, c.says)
		}
	}
}

// Causes that are or are not.
func TestFactsWithoutAThreshold(t *testing.T) {
	for _, c := range []struct {
		cause, says string
		apply       func(s *seen)
	}{
		{"silent", "nothing has come from it since 2 Mar 12:00:00", func(s *seen) {
			s.status.Last[0].Silent, s.status.Last[0].Wall = true, noon.UnixNano()
		}},
		{"disk", "the disk is full", func(s *seen) { s.status.Fault = "the disk is full" }},
		{"clock", "no time source", func(s *seen) { s.status.ClockSynchronised = false }},
		{"caution", "since 2 Mar 11:00", func(s *seen) {
			s.d.outlook.outlook = &Outlook{At: noon.UnixNano(), Caution: noon.Add(-time.Hour).UnixNano()}
		}},
		{"clear-area", "since 2 Mar 11:00", func(s *seen) {
			s.d.outlook.outlook = &Outlook{At: noon.UnixNano(), ClearArea: noon.Add(-time.Hour).UnixNano()}
		}},
	} {
		s := moment(t)
		if got, says := s.wish(c.cause); got != alarm.Over {
			t.Errorf("%s: wish %d with nothing wrong (%s)", c.cause, got, says)
		}
		c.apply(s)
		if got, says := s.wish(c.cause); got != alarm.Raise || !strings.Contains(says, c.says) {
			t.Errorf("%s: wish %d, %q", c.cause, got, says)
		}
	}
}

// A frozen gauge is one that others leave behind: one other is not enough, and
// those at supports do not count; nor is a gauge at a support ever frozen.
func TestFrozenNeedsNeighbours(t *testing.T) {
	for _, moving := range [][]int{{1}, {1, 3}, {3}} {
		s := moment(t)
		at := noon.Add(time.Hour).UnixNano()
		s.d.moved(0, noon.UnixNano(), 2)
		s.d.moved(0, at, 2)
		for _, i := range moving {
			s.d.moved(i, at, 1.5)
		}
		if got, says := s.wish("frozen"); got == alarm.Raise {
			t.Errorf("with %v moving: %s", moving, says)
		}
	}
	s := moment(t)
	for _, f := range s.d.facts(noon, &s.status) {
		if f.Cause == "frozen" && f.Subject == "edge" {
			t.Error("a gauge at a support is watched for being frozen")
		}
	}
}

// A corrected sag goes before an uncorrected one while it is fresh.
func TestWhichSagIsHeldAgainstTheLimit(t *testing.T) {
	s := moment(t)
	nine := 9.5
	s.gauge.Sag, s.gauge.Name, s.gauge.Wall = &nine, "mid", noon.UnixNano()
	s.d.outlook.outlook = &Outlook{At: noon.Add(-time.Minute).UnixNano(), Sag: []NetSag{{Gauge: "mid", MM: 8.2}}}
	if got, says := s.wish("sag"); got != alarm.Over {
		t.Errorf("a support that moved is taken for sag: %d, %s", got, says)
	}
	s.d.outlook.outlook.At = noon.Add(-3 * time.Minute).UnixNano()
	if got, says := s.wish("sag"); got != alarm.Raise || !strings.Contains(says, "uncorrected") {
		t.Errorf("news since the analysis is not taken: %d, %s", got, says)
	}
	s.d.outlook.outlook.At = noon.Add(-2 * time.Hour).UnixNano()
	if got, _ := s.wish("sag"); got != alarm.Raise {
		t.Error("an old analysis goes before what the gauges show")
	}
}
