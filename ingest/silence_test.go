package ingest

import (
	"testing"
	"time"

	"github.com/google/go-cmp/cmp"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/ingest/segment"
	"gaugelog/ingest/segment/segmenttest"
)

// lives plays what happens to gauge g0, of a reading a second and silent after
// ten seconds, and gives the events between start and stop.
type lives struct {
	*testing.T
	r  *Recorder
	at device.Instant
}

func (l *lives) tell(d device.Reading) {
	l.Helper()
	d.At = l.at
	if d.Kind == device.PortLost || d.Kind == device.PortBack || d.Kind == device.FramesRefused {
		d.Port = "sim:g0"
	} else {
		d.Gauge = "g0"
	}
	must(l.T, l.r.Handle(Seen(d)))
}

// pass lets time pass, with what is told each second.
func (l *lives) pass(seconds int, each ...device.Reading) {
	l.Helper()
	for range seconds {
		l.at = later(l.at, time.Second)
		must(l.T, l.r.Handle(TickAt(l.at)))
		for _, d := range each {
			l.tell(d)
		}
	}
}

// One fault is one event, and where it ends another one, however long it lasts.
func TestOneEventAFault(t *testing.T) {
	reading := device.Reading{Kind: device.Indication, MM: 1, Shown: 1, Unit: "mm"}
	lost := device.Reading{Kind: device.PortLost, Detail: "unplugged"}
	deaf := device.Reading{Kind: device.PortLost, Detail: "no frame", Deaf: true}
	back := device.Reading{Kind: device.PortBack, Detail: "gap"}
	over := device.Reading{Kind: device.NoReading, Detail: "Err"}
	damaged := device.Reading{Kind: device.FramesRefused, N: 7, Detail: "wrong sum"}
	for name, tt := range map[string]struct {
		play func(*lives)
		want []string
	}{
		"a port lost for longer than silence is allowed": {
			func(l *lives) { l.tell(lost); l.pass(3600); l.tell(back); l.pass(5, reading) },
			[]string{"port-lost g0: sim:g0: unplugged", "port-back g0: sim:g0: gap"},
		},
		"a port that comes back without its gauge": {
			func(l *lives) { l.tell(lost); l.pass(60); l.tell(back); l.pass(60); l.pass(5, reading) },
			[]string{"port-lost g0: sim:g0: unplugged", "port-back g0: sim:g0: gap",
				"no-reading g0: silent: nothing came for 11.000 s", "gap g0: no readings for 121.000 s"},
		},
		"a gauge that falls silent": {
			func(l *lives) { l.pass(60); l.pass(5, reading) },
			[]string{"no-reading g0: silent: nothing came for 11.000 s", "gap g0: no readings for 61.000 s"},
		},
		"a silent gauge whose port is reopened in vain": {
			func(l *lives) { l.pass(30); l.tell(deaf); l.pass(600); l.tell(back); l.pass(5, reading) },
			[]string{"no-reading g0: silent: nothing came for 11.000 s", "gap g0: no readings for 631.000 s"},
		},
		"a silent gauge whose plug is pulled": {
			func(l *lives) { l.pass(30); l.tell(lost); l.pass(60); l.tell(back); l.pass(5, reading) },
			[]string{"no-reading g0: silent: nothing came for 11.000 s", "port-lost g0: sim:g0: unplugged",
				"port-back g0: sim:g0: gap", "gap g0: no readings for 91.000 s"},
		},
		"a port reopened before its gauge counts as silent": {
			func(l *lives) { l.pass(5); l.tell(deaf); l.pass(60); l.tell(back); l.pass(5, reading) },
			[]string{"port-lost g0: sim:g0: no frame", "port-back g0: sim:g0: gap"},
		},
		"a gauge beyond its range": {
			func(l *lives) { l.pass(90, over); l.pass(5, reading) },
			[]string{"no-reading g0: Err"},
		},
		"a gauge beyond its range that then falls silent": {
			func(l *lives) { l.pass(20, over); l.pass(40); l.pass(5, reading) },
			[]string{"no-reading g0: silent: nothing came for 11.000 s", "gap g0: no readings for 61.000 s", "no-reading g0: Err"},
		},
		"two reasons": {
			func(l *lives) {
				l.pass(20, over)
				l.pass(20, device.Reading{Kind: device.NoReading, Detail: "----"})
				l.pass(5, reading)
			},
			[]string{"no-reading g0: Err", "no-reading g0: ----"},
		},
		"damaged frames among others": {
			func(l *lives) { l.tell(damaged); l.pass(25, reading); l.tell(damaged); l.pass(100, reading) },
			[]string{"frames-refused g0: sim:g0: wrong sum"},
		},
		"damaged frames and nothing else": {
			func(l *lives) {
				for range 30 {
					l.tell(damaged)
					l.pass(20)
				}
				l.pass(5, reading)
			},
			[]string{"frames-refused g0: sim:g0: wrong sum", "frames-refused g0: sim:g0: wrong sum"},
		},
		"damaged frames, then silence": {
			func(l *lives) { l.tell(damaged); l.pass(120); l.pass(5, reading) },
			[]string{"no-reading g0: silent: nothing came for 90.000 s", "frames-refused g0: sim:g0: wrong sum", "gap g0: no readings for 121.000 s"},
		},
		"damaged frames twice": {
			func(l *lives) { l.tell(damaged); l.pass(45, reading); l.tell(damaged); l.pass(100, reading) },
			[]string{"frames-refused g0: sim:g0: wrong sum", "frames-refused g0: sim:g0: wrong sum"},
		},
		"damaged frames told of late": {
			func(l *lives) {
				l.tell(damaged)
				later := damaged
				from := l.at
				l.pass(60, reading)
				later.First, later.Last = device.Instant{Boot: from.Boot + 1e9}, device.Instant{Boot: from.Boot + 40e9}
				l.tell(later)
				l.pass(20, reading)
				l.tell(damaged)
				l.pass(100, reading)
			},
			[]string{"frames-refused g0: sim:g0: wrong sum", "frames-refused g0: sim:g0: wrong sum"},
		},
		"damaged frames at the very end": {
			func(l *lives) { l.tell(damaged) },
			[]string{"frames-refused g0: sim:g0: wrong sum"},
		},
		"an hour and a half of damaged frames": {
			func(l *lives) {
				for range 270 {
					l.tell(damaged)
					l.pass(20, reading)
				}
				l.pass(60, reading)
			},
			[]string{"frames-refused g0: sim:g0: wrong sum", "frames-refused g0: sim:g0: wrong sum", "frames-refused g0: sim:g0: wrong sum"},
		},
	} {
		t.Run(name, func(t *testing.T) {
			mem := segmenttest.New()
			rig := testRig(1, config.Sampling{All: true})
			rig.Gauges[0].SilentAfter = duration(10)
			l := &lives{t, mustOpen(t, testOptions(mem, rig)), testStart}
			l.tell(reading)
			tt.play(l)
			must(t, l.r.Close(l.at))
			got := events(t, mem)
			if d := cmp.Diff(tt.want, got[1:len(got)-1]); d != "" {
				t.Errorf("events (-want +got):\n%s", d)
			}
		})
	}
}

// A status is an event when it comes and when it goes, and no more than once a
// minute, however it flickers.
func TestStatusIsAnEventPerChange(t *testing.T) {
	plain := device.Reading{Kind: device.Indication, MM: 1, Shown: 1, Unit: "mm"}
	low, limit := plain, plain
	low.Status, limit.Status = "battery-low", "high-limit"
	mem := segmenttest.New()
	l := &lives{t, mustOpen(t, testOptions(mem, testRig(1, config.Sampling{All: true}))), testStart}
	l.pass(100, plain)
	l.pass(100, low)
	l.pass(100, plain)
	for range 150 {
		l.pass(1, limit)
		l.pass(1, plain)
	}
	must(t, l.r.Close(l.at))
	got := events(t, mem)
	want := []string{"status g0: the gauge says battery-low", "status g0: the gauge no longer says battery-low",
		"status g0: the gauge says high-limit", "status g0: the gauge no longer says high-limit"}
	if d := cmp.Diff(want, got[1:5]); d != "" {
		t.Errorf("events (-want +got):\n%s", d)
	}
	if n := len(got) - 6; n > 5 {
		t.Errorf("%d further events in five minutes of flicker: %q", n, got)
	}
}

// Where the rig states no silent_after it follows the gauge's own interval,
// which neither a lost port nor a spell without numbers may stretch.
func TestUsualIntervalOutlivesFaults(t *testing.T) {
	reading := device.Reading{Kind: device.Indication, MM: 1, Shown: 1, Unit: "mm"}
	mem := segmenttest.New()
	l := &lives{t, mustOpen(t, testOptions(mem, testRig(1, config.Sampling{All: true}))), testStart}
	l.pass(60, reading)
	l.tell(device.Reading{Kind: device.PortLost})
	l.pass(3600)
	l.tell(device.Reading{Kind: device.PortBack})
	l.pass(5, reading)
	l.pass(3600, device.Reading{Kind: device.NoReading, Detail: "Err"})
	l.pass(5, reading)
	if limit := l.r.silences[0].limit(); limit != leastSilence {
		t.Errorf("silent after %v", time.Duration(limit))
	}
	must(t, l.r.Close(l.at))
}

// The counts of a spell that is written in parts add up.
func TestSpellsCountEveryFrame(t *testing.T) {
	mem := segmenttest.New()
	l := &lives{t, mustOpen(t, testOptions(mem, testRig(1, config.Sampling{All: true}))), testStart}
	l.pass(2*3600, device.Reading{Kind: device.NoReading, Detail: "Err"}, device.Reading{Kind: device.FramesRefused, N: 2, Detail: "wrong sum"})
	must(t, l.r.Close(l.at))
	n := map[string]int64{}
	folder, err := segment.OpenFolder(mem)
	must(t, err)
	records, _, err := folder.Log(segment.EventsFile)
	must(t, err)
	for _, r := range records {
		for _, f := range r.Point.Fields {
			if f.Key == "n" {
				n[r.Point.Tags[len(r.Point.Tags)-1].Value] += f.Value.(int64)
			}
		}
	}
	if n[NoReading] != 2*3600 || n[FramesRefused] != 4*3600 {
		t.Errorf("%v", n)
	}
}
