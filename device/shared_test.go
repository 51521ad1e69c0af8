package device_test

import (
	"fmt"
	"math/rand/v2"
	"testing"
	"testing/synctest"
	"time"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/device/devicetest"
)

func addressed(request string) config.Frame {
	return config.Frame{
		Name: "addressed", Kind: "text", End: "\r", Request: request, Every: seconds(time.Second), Timeout: seconds(200 * time.Millisecond),
		Pattern:    `(?P<channel>\d\d)A(?P<value>[+-]\d{3}\.\d{3})(?P<unit>mm|in)(?P<status>[HB ])`,
		Statuses:   map[string]string{"H": "hold", "B": "battery-low"},
		NoReadings: map[string]string{"Err": "over-range"},
	}
}

func bus(n int, f config.Frame) *config.Rig {
	r := &config.Rig{Frames: []config.Frame{f}}
	for i := range n {
		r.Gauges = append(r.Gauges, config.Gauge{
			Name: fmt.Sprintf("g%d", i+1), Port: "p0", Channel: fmt.Sprintf("%02d", i+1), Frame: f.Name,
		})
	}
	return r
}

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
