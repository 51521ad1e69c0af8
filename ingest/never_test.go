package ingest

import (
	"testing"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/ingest/segment/segmenttest"
)

// A gauge that may be silent for ever is never called silent, whatever its
// frame's interval.
func TestSilentAfterNone(t *testing.T) {
	mem := segmenttest.New()
	rig := testRig(1, config.Sampling{All: true})
	rig.Gauges[0].Frame, rig.Gauges[0].SilentAfter = "asked", &config.Never
	rig.Frames = []config.Frame{{Name: "asked", Every: duration(1)}}
	l := &lives{t, mustOpen(t, testOptions(mem, rig)), testStart}
	l.pass(10, device.Reading{Kind: device.Indication, MM: 1, Shown: 1, Unit: "mm"})
	l.pass(7200)
	must(t, l.r.Close(l.at))
	if got := events(t, mem); len(got) != 2 {
		t.Errorf("%q", got)
	}
}
