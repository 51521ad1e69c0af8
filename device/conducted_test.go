package device_test

import (
	"strings"
	"testing"
	"testing/synctest"
	"time"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/device/devicetest"
)

// script is a conductor's stamper: an instant for each offset of each port.

type script struct{ step int64 }

func (s script) Stamp(_ string, offset int64) device.Instant {
	return device.Instant{Wall: 1e18 + offset*s.step, Boot: offset * s.step}
}

// In virtual time each frame has the instant of its first byte, however the

// bytes were handed over, and gauges are asked only on demand.

func TestConducted(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var l log
		r := rig(2, askedFrame(time.Second, 200*time.Millisecond))
		r.Frames = append(r.Frames, signed)
		r.Gauges[1].Frame = signed.Name
		asked, stream := o.Plug("p0"), o.Plug("p1")
		replies := []string{"+001.000\r\n", "+0x1.000\r\n", ""}
		answer(t, asked, func(string) (string, time.Duration) {
			next := replies[0]
			replies = replies[1:]
			return next, 0
		})
		b := start(t, device.Options{Rigs: []*config.Rig{r}, Opener: &o, Sink: &l, Stamper: script{1e6}, Conducted: true})
		stream.Send([]byte(strings.Repeat("+001.000\r\n", 32)))
		if err := b.WaitConsumed(t.Context(), "p1", 320); err != nil {
			t.Fatal(err)
		}
		for i, r := range l.of(device.Indication) {
			if r.At.Boot != int64(i)*10e6 {
				t.Fatalf("frame %d at %d", i, r.At.Boot)
			}
		}
		time.Sleep(time.Hour)
		for _, want := range []error{nil, device.ErrRefused, device.ErrQuiet} {
			if err := b.Ask(t.Context(), 0, "g0"); err != want {
				t.Errorf("Ask: %v, want %v", err, want)
			}
		}
		if err := b.Ask(t.Context(), 0, "g1"); err == nil {
			t.Error("a gauge that streams was asked")
		}
		o.Unplug("p0")
		synctest.Wait()
		if err := b.Ask(t.Context(), 0, "g0"); err != device.ErrUnplugged {
			t.Errorf("Ask on a lost port: %v", err)
		}
		if n := len(l.of(device.Indication)); n != 33 {
			t.Errorf("%d readings", n)
		}
	})
}
