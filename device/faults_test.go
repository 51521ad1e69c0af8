package device_test

import (
	"fmt"
	"io/fs"
	"strings"
	"testing"
	"testing/synctest"
	"time"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/device/devicetest"
)

// addressed is a frame in which the instrument names its channel.

// bus makes a rig of gauges g1.. on channels 01.. of port p0.

// answer plays gauges on a wire: reply says what to send to a request, after

// how long; "" is silence.

// Row 4: another gauge on the port after a reconnection is never credited.

func TestWrongGaugeAfterReconnect(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var l log
		w := o.Plug("p0")
		start(t, device.Options{Rigs: []*config.Rig{bus(1, addressed(""))}, Opener: &o, Stamper: bubble{}, Sink: &l})
		w.Send([]byte("01A+001.000mm \r"))
		synctest.Wait()
		o.Unplug("p0")
		time.Sleep(time.Minute)
		w = o.Plug("p0")
		time.Sleep(15 * time.Second)
		w.Send([]byte("02A+009.000mm \r"))
		synctest.Wait()
		if len(l.of(device.PortBack)) != 0 || len(l.of(device.Indication)) != 1 || len(l.of(device.FramesRefused)) != 1 {
			t.Fatalf("a foreign gauge was taken for ours: %+v", l.all())
		}
		w.Send([]byte("01A+002.000mm \r"))
		synctest.Wait()
		if len(l.of(device.PortBack)) != 1 || len(l.of(device.Indication)) != 2 {
			t.Errorf("%+v", l.all())
		}
	})
}

// Row 5: open but deaf: told once, reopened ever more slowly, back once.

func TestDeafPort(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var l log
		w := o.Plug("p0")
		b := start(t, device.Options{Rigs: []*config.Rig{rig(1, signed)}, Opener: &o, Stamper: bubble{}, Sink: &l})
		w.Send([]byte("+001.000\r\n"))
		time.Sleep(2 * time.Hour)
		lost := l.of(device.PortLost)
		if len(lost) != 1 || !strings.Contains(lost[0].Detail, "no frame") {
			t.Fatalf("%+v", l.all())
		}
		if n := b.Stats()[0].Reconnects; n < 5 || n > 20 {
			t.Errorf("%d reopenings in two hours", n)
		}
		w.Send([]byte("+001.000\r\n"))
		synctest.Wait()
		time.Sleep(time.Minute)
		if len(l.of(device.PortBack)) != 1 {
			t.Errorf("%+v", l.all())
		}
	})
}

// A gauge that sends on its button is never silent.

func TestButtonGaugeIsNeverDeaf(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var l log
		f := signed
		f.Button = true
		w := o.Plug("p0")
		b := start(t, device.Options{Rigs: []*config.Rig{rig(1, f)}, Opener: &o, Stamper: bubble{}, Sink: &l})
		time.Sleep(6 * time.Hour)
		w.Send([]byte("+001.000\r\n"))
		synctest.Wait()
		if len(l.all()) != 1 || b.Stats()[0].Reconnects != 0 {
			t.Errorf("%+v", l.all())
		}
	})
}

// Nor is one whose rig says silent_after: none.

func TestGaugeThatMayBeSilentIsNeverDeaf(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var l log
		r := rig(1, signed)
		r.Gauges[0].SilentAfter = &config.Never
		o.Plug("p0")
		b := start(t, device.Options{Rigs: []*config.Rig{r}, Opener: &o, Stamper: bubble{}, Sink: &l})
		time.Sleep(6 * time.Hour)
		if len(l.all()) != 0 || b.Stats()[0].Reconnects != 0 {
			t.Errorf("%+v", l.all())
		}
	})
}

// Row 7: a stale value repeated is kept, every time.

func TestRepeatedValueIsKept(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var l log
		w := o.Plug("p0")
		b := start(t, device.Options{Rigs: []*config.Rig{rig(1, signed)}, Opener: &o, Stamper: bubble{}, Sink: &l})
		w.Send([]byte(strings.Repeat("+001.000\r\n", 10_000)))
		b.WaitConsumed(t.Context(), "p0", 100_000)
		if n := len(l.of(device.Indication)); n != 10_000 {
			t.Errorf("%d of 10000 identical readings", n)
		}
	})
}

// Row 8: quiet for far more than a hundred time-outs, then a frame.

func TestLongQuiet(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var l log
		w := o.Plug("p0")
		b := start(t, device.Options{Rigs: []*config.Rig{rig(1, signed)}, Opener: &o, Stamper: bubble{}, Sink: &l, DeafAfter: -1})
		time.Sleep(time.Hour) // 18,000 time-outs of 200 ms
		w.Send([]byte("+001.000\r\n"))
		synctest.Wait()
		if len(l.all()) != 1 || b.Stats()[0].Reconnects != 0 {
			t.Errorf("%+v", l.all())
		}
	})
}

// Row 9: short reads of every length.

func TestShortReads(t *testing.T) {
	for n := 1; n < 12; n++ {
		synctest.Test(t, func(t *testing.T) {
			var o devicetest.Opener
			var l log
			w := o.Plug("p0")
			w.Pieces(n)
			b := start(t, device.Options{Rigs: []*config.Rig{rig(1, signed)}, Opener: &o, Stamper: bubble{}, Sink: &l})
			w.Send([]byte(strings.Repeat("+001.000\r\n", 20)))
			b.WaitConsumed(t.Context(), "p0", 200)
			if got := len(l.of(device.Indication)); got != 20 {
				t.Errorf("reads of %d bytes: %d of 20 readings", n, got)
			}
		})
	}
}

// Row 11: noise is refused and counted; told at once, then once a minute, and

// at the end.

func TestNoise(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var l log
		w := o.Plug("p0")
		b, err := device.Open(device.Options{Rigs: []*config.Rig{rig(1, signed)}, Opener: &o, Stamper: bubble{}, Sink: &l})
		if err != nil {
			t.Fatal(err)
		}
		ended := make(chan error)
		go func() { ended <- b.Run(t.Context()) }()
		for range 150 { // one damaged and one good frame a second
			w.Send([]byte("+0\x001.000\r\n+001.000\r\n"))
			time.Sleep(time.Second)
		}
		b.Close()
		if err := <-ended; err != nil {
			t.Error(err)
		}
		told, sum := l.of(device.FramesRefused), 0
		for _, r := range told {
			sum += r.N
		}
		if len(told) != 4 || sum != 150 || told[0].N != 1 || len(l.of(device.Indication)) != 150 {
			t.Errorf("%d events about %d frames, %d readings: %+v", len(told), sum, len(l.of(device.Indication)), told)
		}
	})
}

// Rows 13 to 16: the unit key, status characters, texts that are no number,

// minus nought.

func TestUnitStatusAndNoReading(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var l log
		w := o.Plug("p0")
		start(t, device.Options{Rigs: []*config.Rig{bus(1, addressed(""))}, Opener: &o, Stamper: bubble{}, Sink: &l})
		w.Send([]byte("01A+009.804mm \r01A+000.386in \r01A+000.386inH\r01A-000.000mmB\rErr\r"))
		synctest.Wait()
		var got []string
		for _, r := range l.all() {
			got = append(got, fmt.Sprintf("%d %v %v %s %s %s", r.Kind, r.MM, r.Shown, r.Unit, r.Status, r.Detail))
		}
		want := []string{
			"0 9.804 9.804 mm  ",
			fmt.Sprintf("%d 0 0 in  ", device.UnitKey), "0 9.8044 0.386 in  ",
			"0 9.8044 0.386 in hold ",
			fmt.Sprintf("%d 0 0 mm  ", device.UnitKey), "0 0 0 mm battery-low ",
			fmt.Sprintf("%d 0 0   over-range", device.NoReading),
		}
		if strings.Join(got, "\n") != strings.Join(want, "\n") {
			t.Errorf("got\n%s\nwant\n%s", strings.Join(got, "\n"), strings.Join(want, "\n"))
		}
	})
}

// Row 17: a press of the button between the questions is a reading like any.

func TestButtonAndPoll(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var l log
		f := askedFrame(time.Second, 200*time.Millisecond)
		f.Button = true
		w := o.Plug("p0")
		answer(t, w, func(string) (string, time.Duration) { return "+001.000\r\n", 50 * time.Millisecond })
		b := start(t, device.Options{Rigs: []*config.Rig{rig(1, f)}, Opener: &o, Stamper: bubble{}, Sink: &l})
		time.Sleep(500 * time.Millisecond)
		w.Send([]byte("+002.000\r\n"))
		time.Sleep(10 * time.Second)
		if n := len(l.of(device.Indication)); n != 12 || b.Stats()[0].Refused != 0 {
			t.Errorf("%d readings: %+v", n, l.all())
		}
	})
}

// Row 18: an echo is dropped; a reply that begins like the request is not.

// Row 19: a late answer is not credited to the gauge asked next, whether the

// frame names its channel or not; and a dead gauge does not starve the others.

// Row 21: a write that blocks for ever resets the port.

func TestStuckWrite(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var l log
		o.Plug("p0").StickWrites()
		start(t, device.Options{Rigs: []*config.Rig{rig(1, askedFrame(time.Second, 200*time.Millisecond))}, Opener: &o, Stamper: bubble{}, Sink: &l})
		time.Sleep(10 * time.Second)
		if lost := l.of(device.PortLost); len(lost) != 1 || !strings.Contains(lost[0].Detail, "takes no bytes") {
			t.Errorf("%+v", l.all())
		}
		if o.Opens("p0") < 3 {
			t.Errorf("opened %d times", o.Opens("p0"))
		}
	})
}

// Row 22: a close that hangs delays the end by CloseWithin, no more, and is told.

func TestHangingClose(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var l log
		release := o.Plug("p0").HangClose()
		b, err := device.Open(device.Options{Rigs: []*config.Rig{rig(1, signed)}, Opener: &o, Stamper: bubble{}, Sink: &l})
		if err != nil {
			t.Fatal(err)
		}
		ended := make(chan error, 1)
		go func() { ended <- b.Run(t.Context()) }()
		<-b.Tried()
		before := time.Now()
		b.Close()
		if d := time.Since(before); d > 3*time.Second {
			t.Errorf("Close took %v", d)
		}
		if err := <-ended; err == nil || !strings.Contains(err.Error(), "p0 did not close") {
			t.Errorf("Run: %v", err)
		}
		release()
	})
}

// Row 25: a port not yet permitted just after plugging in is tried again.

func TestPermissionComesLate(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var l log
		w := o.Plug("p0")
		o.FailNext("p0", fs.ErrPermission, fs.ErrPermission, fs.ErrNotExist)
		start(t, device.Options{Rigs: []*config.Rig{rig(1, signed)}, Opener: &o, Stamper: bubble{}, Sink: &l})
		time.Sleep(5 * time.Second)
		w.Send([]byte("+001.000\r\n"))
		synctest.Wait()
		if len(l.of(device.PortLost)) != 1 || len(l.of(device.PortBack)) != 1 || len(l.of(device.Indication)) != 1 {
			t.Errorf("%+v", l.all())
		}
	})
}

// Attempts are paced: an hour without the port costs some 360 tries, and the

// loss is told once.

func TestBackoffPace(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var l log
		start(t, device.Options{Rigs: []*config.Rig{rig(1, signed)}, Opener: &o, Stamper: bubble{}, Sink: &l})
		time.Sleep(time.Hour)
		if n := o.Opens("p0"); n < 300 || n > 450 {
			t.Errorf("%d attempts in an hour", n)
		}
		if n := len(l.all()); n != 1 {
			t.Errorf("%d events", n)
		}
	})
}

// Rigs share a bus and a probe: one question, a reading for each rig.

// Two descriptions on one port: each decoder hears all bytes, and only what

// none of them reads is refused.
