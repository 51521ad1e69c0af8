package ingest

import (
	"fmt"
	"strings"
	"testing"
	"time"

	"github.com/google/go-cmp/cmp"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/ingest/segment/segmenttest"
)

func TestWhatHappensToPortsAndGauges(t *testing.T) {
	mem := segmenttest.New()
	rig := testRig(2, config.Sampling{All: true})
	rig.Gauges[0].SilentAfter = duration(10)
	rig.Gauges[1].Frame = "button"
	rig.Frames = []config.Frame{{Name: "button", Button: true}}
	r := mustOpen(t, testOptions(mem, rig))
	at := testStart
	pass := func(d time.Duration) {
		for range int(d / time.Second) {
			at = later(at, time.Second)
			must(t, r.Handle(TickAt(at)))
		}
	}
	tell := func(d device.Reading) {
		d.At = at
		must(t, r.Handle(Seen(d)))
	}
	tell(indication("g0", 1, at))
	tell(indication("g1", 1, at))
	tell(device.Reading{Kind: device.PortLost, Port: "sim:g0", Detail: "unplugged"})
	pass(20 * time.Second)
	tell(device.Reading{Kind: device.PortBack, Port: "sim:g0", Detail: "gap 20.000 s"})
	tell(indication("g0", 2, at))
	tell(device.Reading{Kind: device.FramesRefused, Port: "sim:g1", N: 3, Detail: "wrong sum"})
	tell(device.Reading{Kind: device.UnitKey, Gauge: "g0", Unit: "in"})
	for range 125 { // a gauge that says Err for a good two minutes
		tell(device.Reading{Kind: device.NoReading, Gauge: "g0", Detail: "Err"})
		pass(time.Second)
	}
	inch := indication("g0", 25.4, at)
	inch.Unit, inch.Shown = "in", 1
	tell(inch)
	must(t, r.Handle(Event{Kind: Happened, At: at, What: Happening{Kind: AlarmRaised, Gauge: "g0", Detail: "sag"}}))
	if err := r.Handle(Event{Kind: Happened, At: at, What: Happening{Kind: "party"}}); err == nil {
		t.Error("an unknown kind of event is taken")
	}
	if err := r.Handle(Seen(indication("nobody", 1, at))); err == nil {
		t.Error("a reading of an unknown gauge is taken")
	}
	must(t, r.Close(at))

	want := []string{
		"started: the recording begins",
		"port-lost g0: sim:g0: unplugged",
		"port-back g0: sim:g0: gap 20.000 s",
		"unit-key g0: the gauge now shows in",
		"frames-refused g1: sim:g1: wrong sum", // a minute later none had followed
		"no-reading g0: Err",                   // it lasts
		"no-reading g0: Err",                   // the rest
		"alarm-raised g0: sag",
		"stopped: the recording ends",
	}
	if d := cmp.Diff(want, events(t, mem)); d != "" {
		t.Errorf("events (-want +got):\n%s", d)
	}
	text := string(mem.Bytes("events.lp"))
	for _, line := range []string{
		`event,gauge=g1,kind=frames-refused detail="sim:g1: wrong sum",n=3i `,
		`event,gauge=g0,kind=no-reading detail="Err",from=1790000020000000000i,n=120i `,
		`event,gauge=g0,kind=no-reading detail="Err",from=1790000140000000000i,n=5i `,
	} {
		if !strings.Contains(text, line) {
			t.Errorf("events.lp lacks %s:\n%s", line, text)
		}
	}
	if s := string(mem.Bytes("readings/000001.lp")); !strings.Contains(s, "indication,gauge=g0 mm=25.4,shown=1,unit=\"in\" ") {
		t.Errorf("the inch reading is not stored as shown:\n%s", s)
	}
}

func TestProbesAreRecorded(t *testing.T) {
	mem := segmenttest.New()
	rig := testRig(0, config.Sampling{All: true})
	rig.Probes = []config.Probe{{Name: "air"}}
	r := mustOpen(t, testOptions(mem, rig))
	must(t, r.Handle(Seen(device.Reading{Kind: device.Ambient, Probe: "air", At: testStart, Celsius: 20.31, HumidityPercent: 48.2})))
	must(t, r.Close(testStart))
	want := fmt.Sprintf("ambient,probe=air celsius=20.31,humidity_percent=48.2 %d\n", testStart.Wall)
	if s := string(mem.Bytes("readings/000001.lp")); !strings.Contains(s, want) {
		t.Errorf("the segment lacks %s:\n%s", want, s)
	}
}
