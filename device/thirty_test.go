package device_test

import (
	"fmt"
	"testing"
	"testing/synctest"
	"time"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/device/devicetest"
)

// Thirty rigs in one process: a gauge each on one bus, one each behind one
// multiplexer, and the probe for the air that all of them share. One question,
// one frame, one reading for whom it is, and no other rig's.
func TestThirtyRigs(t *testing.T) {
	const n = 30
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var l log
		asked := addressed("{channel}?\r")
		asked.Every = seconds(3 * time.Second)
		sent := addressed("")
		sent.Name = "sent"
		air := config.Frame{Name: "air", Kind: "text", End: "\n", Pattern: `T(?P<temp>[+-]\d\d\.\d\d)`}
		var rigs []*config.Rig
		for i := range n {
			channel := fmt.Sprintf("%02d", i)
			rigs = append(rigs, &config.Rig{
				Frames: []config.Frame{asked, sent, air},
				Gauges: []config.Gauge{
					{Name: "bus", Port: "p0", Channel: channel, Frame: asked.Name},
					{Name: "stream", Port: "p1", Channel: channel, Frame: sent.Name},
				},
				Probes: []config.Probe{{Name: "air", Port: "p2", Frame: "air", Temperature: "temp"}},
			})
		}
		bus, multiplexer, probe := o.Plug("p0"), o.Plug("p1"), o.Plug("p2")
		answer(t, bus, func(q string) (string, time.Duration) {
			return q[:2] + "A+0" + q[:2] + ".000mm \r", 20 * time.Millisecond
		})
		b := start(t, device.Options{Rigs: rigs, Opener: &o, Stamper: bubble{}, Sink: &l})
		for range 20 {
			for i := range n {
				multiplexer.Send([]byte(fmt.Sprintf("%02dA-0%02d.000mm \r", i, i)))
			}
			probe.Send([]byte("T+20.31\n"))
			time.Sleep(3 * time.Second)
		}
		counts := map[string]int{}
		for _, r := range l.all() {
			want := float64(r.Rig)
			if r.Gauge == "stream" {
				want = -want
			}
			if r.Kind == device.Ambient {
				want, r.MM, r.Gauge = 20.31, r.Celsius, "air"
			}
			if r.MM != want || r.Kind != device.Indication && r.Kind != device.Ambient {
				t.Fatalf("%+v", r)
			}
			counts[fmt.Sprint(r.Gauge, r.Rig)]++
		}
		if len(counts) != 3*n {
			t.Errorf("%d instruments of %d were heard", len(counts), 3*n)
		}
		for name, c := range counts {
			if c < 19 || c > 21 {
				t.Errorf("%s: %d readings in a minute at 3 s", name, c)
			}
		}
		if stats := b.Stats(); len(stats) != 3 || stats[0].Refused+stats[1].Refused != 0 {
			t.Errorf("%+v", stats)
		}
	})
}
