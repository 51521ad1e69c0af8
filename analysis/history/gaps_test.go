package history

import (
	"testing"

	gocmp "github.com/google/go-cmp/cmp"

	"gaugelog/config"
	"gaugelog/ingest/segment"
)

// at is that many seconds after the start of the run.
func at(s int64) int64 { return t0 + s*second }

// What events tell of one gauge becomes its gaps, each once, with its reasons;
// what reaches beyond its recorder ends there.
func TestGapsAsTold(t *testing.T) {
	started := Event{Kind: "started", Time: at(0)}
	for name, c := range map[string]struct {
		events []Event
		want   []Gap
	}{
		"a port lost and back": {
			[]Event{started, {Kind: "port-lost", Gauge: "mid", Time: at(100), Detail: "sim:mid"}, {Kind: "port-back", Gauge: "mid", Time: at(160)}},
			[]Gap{{"mid", at(100), at(160), "its port was lost (sim:mid)"}}},
		"a port lost and the silence it makes": {
			[]Event{started, {Kind: "port-lost", Gauge: "mid", Time: at(100), Detail: "sim:mid"},
				{Kind: "no-reading", Gauge: "mid", From: at(99), Time: at(110), Detail: "silent: nothing came for 10 s"},
				{Kind: "port-back", Gauge: "mid", Time: at(160)},
				{Kind: "gap", Gauge: "mid", From: at(99), Time: at(161), Detail: "no readings for 62.000 s"}},
			[]Gap{{"mid", at(99), at(161), "no readings for 62.000 s; its port was lost (sim:mid)"}}},
		"a port lost for good": {
			[]Event{started, {Kind: "port-lost", Gauge: "mid", Time: at(100), Detail: "sim:mid"}},
			[]Gap{{"mid", at(100), at(9999), "its port was lost (sim:mid)"}}},
		"a port lost before the power failed": {
			[]Event{started, {Kind: "port-lost", Gauge: "mid", Time: at(100), Detail: "sim:mid"},
				{Kind: "gap", From: at(500), Time: at(900)}, {Kind: "started", Time: at(900)}},
			[]Gap{{"mid", at(100), at(500), "its port was lost (sim:mid)"},
				{"", at(500), at(900), "the recording broke off without being stopped, and the machine was started anew: a power cut or a restart"}}},
		"a gauge silent when the recording was stopped": {
			[]Event{started, {Kind: "no-reading", Gauge: "left", From: at(99), Time: at(110), Detail: "silent: nothing came for 10 s"},
				{Kind: "stopped", Time: at(500)}, {Kind: "gap", From: at(500), Time: at(900)}, {Kind: "started", Time: at(900)}},
			[]Gap{{"left", at(99), at(500), "the gauge fell silent"},
				{"", at(500), at(900), "the recording had been stopped and was taken up again"}}},
		"readings dropped of one gauge, and of all": {
			[]Event{started, {Kind: "dropped", Gauge: "mid", From: at(100), Time: at(160), N: 60, Detail: "readings dropped: the disk took nothing"},
				{Kind: "dropped", Gauge: "mid", From: at(700), Time: at(760), N: 60, Detail: "readings dropped: the disk took nothing"},
				{Kind: "dropped", Gauge: "left", From: at(700), Time: at(760), N: 60, Detail: "readings dropped: the disk took nothing"}},
			[]Gap{{"mid", at(100), at(160), "60 readings dropped: the disk took nothing"},
				{"", at(700), at(760), "60 readings dropped: the disk took nothing"}}},
		"frames without a number, and a probe, are no gaps": {
			[]Event{started, {Kind: "no-reading", Gauge: "mid", From: at(100), Time: at(160), N: 60, Detail: "the gauge shows no number"},
				{Kind: "gap", Gauge: "air", From: at(100), Time: at(160)}}, nil},
	} {
		t.Run(name, func(t *testing.T) {
			var off [2]int64
			for _, e := range c.events {
				if e.Kind == "gap" && e.Gauge == "" {
					off = [2]int64{e.From, e.Time}
				}
			}
			h := tenSeconds(t, off)
			h.Events = c.events
			got := recordedGaps(h, []segment.Start{{Boot: "a", Time: at(0)}, {Boot: "b", Time: at(900)}})
			if d := gocmp.Diff(c.want, got); d != "" {
				t.Error(d)
			}
		})
	}
}

// tenSeconds is a run of readings every ten seconds to 9999 s, of both gauges,
// but for a stretch in which nothing was recorded.
func tenSeconds(t *testing.T, off [2]int64) *History {
	t.Helper()
	rig, err := config.Parse("rig.yaml", []byte(rigText))
	if err != nil {
		t.Fatal(err)
	}
	samples := make([][]Sample, 2)
	for s := int64(9); s <= 9999; s += 10 {
		for g := range samples {
			if at(s) >= off[0] && at(s) < off[1] {
				continue
			}
			samples[g] = append(samples[g], Sample{at(s), 0.5})
		}
	}
	h, err := FromSamples(Given{Rig: rig, Samples: samples})
	if err != nil {
		t.Fatal(err)
	}
	return h
}

// An interval without readings is explained by what the gauge sent instead.
func TestGapOfFramesWithoutReadings(t *testing.T) {
	for want, e := range map[string]Event{
		"no reading: over-range":                        {Kind: "no-reading", Gauge: "mid", From: at(2000), Time: at(2400), N: 400, Detail: "over-range"},
		"no reading: usb:1: last: wrong checksum":       {Kind: "frames-refused", Gauge: "mid", From: at(2000), Time: at(2400), N: 400, Detail: "usb:1: last: wrong checksum"},
		"no reading, and nothing recorded says why":     {Kind: "no-reading", Gauge: "left", Time: at(2400), Detail: "over-range"},
		"no reading by its stamps: the clock was moved": {Kind: "clock-stepped", Time: at(2400), Detail: "the clock was moved"},
	} {
		h := tenSeconds(t, [2]int64{at(2000), at(2500)})
		h.Events = []Event{e}
		for i := range h.Rig.Gauges {
			if h.Rig.Gauges[i].Name != "mid" {
				continue
			}
			if got := h.unexplained(i); len(got) != 1 || got[0].Why != want {
				t.Errorf("%+v, want %q", got, want)
			}
		}
	}
}

// Where the clock before a power cut was wrong, the gap begins at the last
// reading.
func TestGapBehindAWrongClock(t *testing.T) {
	h := tenSeconds(t, [2]int64{})
	h.Events = []Event{{Kind: "gap", From: at(-1e8), Time: at(5000)}}
	got := recordedGaps(h, nil)
	want := []Gap{{"", at(4999), at(5000), "the recording broke off without being stopped"}}
	if d := gocmp.Diff(want, got); d != "" {
		t.Error(d)
	}
}

// How far apart the sampling lets readings lie: the figures by hand from the
// meaning of each key.
func TestPacing(t *testing.T) {
	for _, c := range []struct {
		sampling string
		since    int64 // s
		want     float64
		unbound  bool
	}{
		{sampling: "all", since: 5000, want: 0},
		{sampling: "{every: 10 s}", since: 5000, want: 10},
		{sampling: "{every: 10 s, dead_band: 0.005 mm}", since: 5000, want: 10},
		{sampling: "{dead_band: 0.005 mm}", unbound: true},
		{sampling: "{dense: 1 s, around: 10 min, per_decade: 50, longest: 15 min}", since: 300, want: 1},
		// 10^(1/50) - 1 = 0.047129
		{sampling: "{dense: 1 s, around: 10 min, per_decade: 50, longest: 15 min}", since: 3600, want: 169.66},
		{sampling: "{dense: 1 s, around: 10 min, per_decade: 50, longest: 15 min}", since: 86400, want: 900},
		{sampling: "{dense: 1 s, around: 10 min, longest: 15 min}", since: 601, want: 900},
		{sampling: "{dense: 1 s, per_decade: 50}", since: 86400, want: 4071.9},
	} {
		rig, err := config.Parse("rig.yaml", []byte(rigText+"record:\n  sampling: "+c.sampling+"\n"))
		if err != nil {
			t.Fatal(err)
		}
		p, ok := newPacing(rig, &rig.Gauges[0])
		if ok == c.unbound {
			t.Errorf("%s: bounded %v", c.sampling, ok)
			continue
		}
		if got := float64(p.widest(c.since*second)) / 1e9; ok && (got < c.want-0.1 || got > c.want+0.1) {
			t.Errorf("%s after %d s: %.2f s, want %.2f s", c.sampling, c.since, got, c.want)
		}
	}
}
