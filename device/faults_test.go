package device_test

import (
	"fmt"
	"io/fs"
	"math/rand/v2"
	"strings"
	"testing"
	"testing/synctest"
	"time"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/device/devicetest"
)

// addressed is a frame in which the instrument names its channel.
func addressed(request string) config.Frame {
	return config.Frame{
		Name: "addressed", Kind: "text", End: "\r", Request: request, Every: seconds(time.Second), Timeout: seconds(200 * time.Millisecond),
		Pattern:    `(?P<channel>\d\d)A(?P<value>[+-]\d{3}\.\d{3})(?P<unit>mm|in)(?P<status>[HB ])`,
		Statuses:   map[string]string{"H": "hold", "B": "battery-low"},
		NoReadings: map[string]string{"Err": "over-range"},
	}
}

// bus makes a rig of gauges g1.. on channels 01.. of port p0.
func bus(n int, f config.Frame) *config.Rig {
	r := &config.Rig{Frames: []config.Frame{f}}
	for i := range n {
		r.Gauges = append(r.Gauges, config.Gauge{
			Name: fmt.Sprintf("g%d", i+1), Port: "p0", Channel: fmt.Sprintf("%02d", i+1), Frame: f.Name,
		})
	}
	return r
}

// answer plays gauges on a wire: reply says what to send to a request, after
// how long; "" is silence.
func answer(t *testing.T, w *devicetest.Wire, reply func(request string) (string, time.Duration)) {
	ctx := t.Context()
	go func() {
		for {
			select {
			case q := <-w.Asked():
				text, after := reply(string(q))
				if text == "" {
					continue
				}
				if after == 0 {
					w.Send([]byte(text))
					continue
				}
				time.AfterFunc(after, func() { w.Send([]byte(text)) })
			case <-ctx.Done():
				return
			}
		}
	}()
}

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
func TestEcho(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var l log
		f := addressed("{channel}A?\r")
		w := o.Plug("p0")
		n := 0
		answer(t, w, func(q string) (string, time.Duration) {
			if n++; n%2 == 0 {
				return "01A+001.000mm \r", 0 // shares "01A" with the request
			}
			return q + "01A+001.000mm \r", 0
		})
		b := start(t, device.Options{Rigs: []*config.Rig{bus(1, f)}, Opener: &o, Stamper: bubble{}, Sink: &l})
		time.Sleep(9*time.Second + 500*time.Millisecond)
		if s := b.Stats()[0]; s.Echoes != 5 || s.Frames != 10 || s.Refused != 0 {
			t.Errorf("%+v", s)
		}
	})
}

// Row 19: a late answer is not credited to the gauge asked next, whether the
// frame names its channel or not; and a dead gauge does not starve the others.
func TestLateAnswerAndDeadGauge(t *testing.T) {
	t.Run("named", func(t *testing.T) { lateAnswers(t, true) })
	t.Run("nameless", func(t *testing.T) { lateAnswers(t, false) })
}

func lateAnswers(t *testing.T, named bool) {
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var l log
		f := addressed("{channel}?\r")
		if !named {
			f.Pattern = `(?P<value>[+-]\d{3}\.\d{3})(?P<unit>mm)`
		}
		w := o.Plug("p0")
		random := rand.New(rand.NewPCG(1, 2))
		answer(t, w, func(q string) (string, time.Duration) {
			text := fmt.Sprintf("+%03d.000mm", q[1]-'0') // gauge k reads k mm
			if named {
				text = q[:2] + "A" + text + " "
			}
			switch q[1] {
			case '1': // late at random, up to twice the time-out
				return text + "\r", time.Duration(random.IntN(400)) * time.Millisecond
			case '2':
				return "", 0 // dead
			}
			return text + "\r", 20 * time.Millisecond
		})
		start(t, device.Options{Rigs: []*config.Rig{bus(4, f)}, Opener: &o, Stamper: bubble{}, Sink: &l})
		time.Sleep(10 * time.Minute)
		count := map[string]int{}
		for _, r := range l.of(device.Indication) {
			count[r.Gauge]++
			if want := float64(r.Gauge[1] - '0'); r.MM != want {
				t.Fatalf("gauge %s was credited with %v mm", r.Gauge, r.MM)
			}
		}
		if count["g2"] != 0 || count["g3"] < 550 || count["g4"] < 550 || count["g1"] < 50 {
			t.Errorf("readings in 600 s: %v", count)
		}
		if n := len(l.of(device.PortLost)); n != 0 {
			t.Errorf("%d losses of a port that answers", n)
		}
	})
}

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
func TestRigsShareProbeAndBus(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var l log
		f := addressed("{channel}?\r")
		air := config.Frame{Name: "air", Kind: "text", End: "\n", Pattern: `T(?P<temp>[+-]\d\d\.\d\d) H(?P<rh>\d\d\.\d)`}
		one, two := bus(1, f), bus(2, f)
		two.Gauges = two.Gauges[1:]
		for _, r := range []*config.Rig{one, two} {
			r.Frames = append(r.Frames, air)
			r.Probes = []config.Probe{{Name: "air", Port: "p1", Frame: "air", Temperature: "temp", Humidity: "rh"}}
		}
		w, probe := o.Plug("p0"), o.Plug("p1")
		answer(t, w, func(q string) (string, time.Duration) {
			return q[:2] + "A+00" + q[1:2] + ".000mm \r", time.Millisecond
		})
		start(t, device.Options{Rigs: []*config.Rig{one, two}, Opener: &o, Stamper: bubble{}, Sink: &l})
		probe.Send([]byte("T+20.31 H48.2\n"))
		time.Sleep(3*time.Second + 500*time.Millisecond)
		rigs := [2]int{}
		for _, r := range l.of(device.Indication) {
			if r.Gauge != fmt.Sprintf("g%d", r.Rig+1) || r.MM != float64(r.Rig+1) {
				t.Fatalf("%+v", r)
			}
			rigs[r.Rig]++
		}
		if rigs != [2]int{4, 4} {
			t.Errorf("readings a rig: %v", rigs)
		}
		ambient := l.of(device.Ambient)
		if len(ambient) != 2 || ambient[0].Rig != 0 || ambient[1].Rig != 1 || ambient[0].Celsius != 20.31 || ambient[1].HumidityPercent != 48.2 {
			t.Errorf("%+v", ambient)
		}
	})
}

// Two descriptions on one port: each decoder hears all bytes, and only what
// none of them reads is refused.
func TestTwoDescriptionsOnOnePort(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var l log
		r := rig(1, signed)
		r.Frames = append(r.Frames, config.Frame{Name: "air", Kind: "text", End: "\r\n", Pattern: `T(?P<temp>[+-]\d\d\.\d\d)`})
		r.Probes = []config.Probe{{Name: "air", Port: "p0", Frame: "air", Temperature: "temp"}}
		w := o.Plug("p0")
		b := start(t, device.Options{Rigs: []*config.Rig{r}, Opener: &o, Stamper: bubble{}, Sink: &l})
		w.Send([]byte("+001.000\r\nT+20.00\r\njunk\r\nT+21.00\r\n+002.000\r\n"))
		synctest.Wait()
		var kinds []device.Kind
		for _, r := range l.all() {
			kinds = append(kinds, r.Kind)
		}
		if fmt.Sprint(kinds) != fmt.Sprint([]device.Kind{device.Indication, device.Ambient, device.FramesRefused, device.Ambient, device.Indication}) ||
			b.Stats()[0].Refused != 1 {
			t.Errorf("%v, %+v", kinds, b.Stats()[0])
		}
	})
}

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
