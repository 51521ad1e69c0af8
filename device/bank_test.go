package device_test

import (
	"errors"
	"math"
	"strings"
	"testing"
	"testing/synctest"
	"time"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/device/devicetest"
)

func TestStream(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var l log
		w := o.Plug("p0")
		b := start(t, device.Options{Rigs: []*config.Rig{rig(1, signed)}, Opener: &o, Stamper: bubble{}, Sink: &l})
		w.Send([]byte("+001.250\r\n-000.000\r\n"))
		if err := b.WaitConsumed(t.Context(), "p0", 20); err != nil {
			t.Fatal(err)
		}
		got := l.of(device.Indication)
		if len(got) != 2 || got[0].MM != 1.25 || got[1].MM != 0 || math.Signbit(got[1].MM) || got[0].Gauge != "g0" {
			t.Fatalf("got %+v", l.all())
		}
		if s := b.Stats()[0]; s.Frames != 2 || s.Bytes != 20 || !s.Open || !s.Answering {
			t.Errorf("stats %+v", s)
		}
	})
}

func TestPolled(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var l log
		w := o.Plug("p0")
		go func() {
			for {
				select {
				case <-w.Asked():
				case <-t.Context().Done():
					return
				}
				w.Send([]byte("+000.386\r\n"))
			}
		}()
		start(t, device.Options{Rigs: []*config.Rig{rig(1, askedFrame(500*time.Millisecond, 300*time.Millisecond))}, Opener: &o, Stamper: bubble{}, Sink: &l})
		time.Sleep(10*time.Second + 100*time.Millisecond)
		if n := len(l.of(device.Indication)); n != 21 {
			t.Errorf("%d answers in 10 s at 500 ms, want 21", n)
		}
	})
}

// Rows 1 and 6 of the fault table: one loss, one return, with the gap's length.
func TestUnplugAndReplug(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var l log
		w := o.Plug("p0")
		start(t, device.Options{Rigs: []*config.Rig{rig(1, signed)}, Opener: &o, Stamper: bubble{}, Sink: &l})
		w.Send([]byte("+001.000\r\n+002."))
		synctest.Wait()
		o.Unplug("p0")
		time.Sleep(time.Hour)
		w = o.Plug("p0")
		time.Sleep(time.Minute) // open again, but nothing has answered
		if n := len(l.of(device.PortBack)); n != 0 {
			t.Fatalf("port back before its gauge answered: %+v", l.all())
		}
		w.Send([]byte("000\r\n+003.000\r\n"))
		synctest.Wait()
		lost, back := l.of(device.PortLost), l.of(device.PortBack)
		if len(lost) != 1 || len(back) != 1 || !strings.HasPrefix(back[0].Detail, "gap 3660.000 s") {
			t.Fatalf("lost %+v, back %+v", lost, back)
		}
		if got := l.of(device.Indication); len(got) != 2 || got[1].MM != 3 {
			t.Errorf("readings %+v", got)
		}
	})
}

// TestUnknownNames: a port or a gauge that no rig names is an error, as where a
// run goes on with another rig file than its sender's.
func TestUnknownNames(t *testing.T) {
	var o devicetest.Opener
	var sink count
	o.Plug("p0")
	b := start(t, device.Options{Rigs: []*config.Rig{rig(1, signed)}, Opener: &o, Sink: &sink})
	if err := b.WaitConsumed(t.Context(), "p9", 1); !errors.Is(err, device.ErrUnknown) || !strings.Contains(err.Error(), "p9") {
		t.Error(err)
	}
	if err := b.Ask(t.Context(), 0, "nobody"); !errors.Is(err, device.ErrUnknown) || !strings.Contains(err.Error(), "nobody") {
		t.Error(err)
	}
	if n := b.Consumed("p9"); n != 0 {
		t.Error(n)
	}
}
