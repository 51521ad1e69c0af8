package device_test

import (
	"encoding/binary"
	"fmt"
	"math/rand/v2"
	"strings"
	"testing"
	"testing/synctest"
	"time"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/device/devicetest"
	"gaugelog/device/frame"
)

// modbusFrame reads two registers as thousandths of a millimetre.
func modbusFrame() config.Frame {
	return config.Frame{
		Name: "bus", Kind: "modbus", Unit: "mm", Every: seconds(time.Second), Timeout: seconds(200 * time.Millisecond),
		Modbus: &config.Modbus{Function: "holding", Register: 0, Type: "int32", Scale: number("0.001", 0.001)},
	}
}

// modbusBus makes a rig of gauges g1.. at bus addresses 1.. of port p0.
func modbusBus(n int) *config.Rig {
	r := &config.Rig{Frames: []config.Frame{modbusFrame()}}
	for i := range n {
		r.Gauges = append(r.Gauges, config.Gauge{Name: fmt.Sprintf("g%d", i+1), Port: "p0", Channel: fmt.Sprint(i + 1), Frame: "bus"})
	}
	return r
}

// closed appends the CRC.
func closed(b []byte) string {
	c := frame.CRC16(b)
	return string(append(b, byte(c), byte(c>>8)))
}

// reads is the answer of the instrument at an address.
func reads(address byte, thousandths int32) string {
	return closed(binary.BigEndian.AppendUint32([]byte{address, 3, 4}, uint32(thousandths)))
}

// A bus of three gauges of which the first is often late, by up to twice its
// time-out, and the second is dead: the third is read at its interval, and no
// answer counts for another gauge.
func TestModbusBusWithDeadAndLateGauges(t *testing.T) {
	for _, echoes := range []bool{false, true} {
		t.Run(fmt.Sprintf("echo %v", echoes), func(t *testing.T) { modbusBusTest(t, echoes) })
	}
}

func modbusBusTest(t *testing.T, echoes bool) {
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var l log
		w := o.Plug("p0")
		random := rand.New(rand.NewPCG(3, 4))
		answer(t, w, func(q string) (string, time.Duration) {
			if want := closed([]byte{q[0], 3, 0, 0, 0, 2}); q != want {
				t.Errorf("asked %x, want %x", q, want)
			}
			if echoes {
				w.Send([]byte(q))
			}
			switch q[0] {
			case 1:
				return reads(1, 1000), time.Duration(random.IntN(400)) * time.Millisecond
			case 2:
				return "", 0
			}
			return reads(3, 3000), 20 * time.Millisecond
		})
		b := start(t, device.Options{Rigs: []*config.Rig{modbusBus(3)}, Opener: &o, Stamper: bubble{}, Sink: &l})
		time.Sleep(10 * time.Minute)
		count := map[string]int{}
		for _, r := range l.of(device.Indication) {
			count[r.Gauge]++
			if want := float64(r.Gauge[1] - '0'); r.MM != want {
				t.Fatalf("gauge %s was credited with %v mm", r.Gauge, r.MM)
			}
		}
		t.Logf("readings in 600 s: %v", count)
		if count["g2"] != 0 || count["g3"] < 580 || count["g1"] < 50 {
			t.Errorf("readings in 600 s: %v", count)
		}
		if n := len(l.of(device.PortLost)); n != 0 {
			t.Errorf("%d losses of a port that answers", n)
		}
		if echo := b.Stats()[0].Echoes; (echo > 0) != echoes {
			t.Errorf("%d echoes", echo)
		}
	})
}

// A damaged answer, a refusal and a foreign answer are told of by their own
// reasons, and the next question goes on.
func TestModbusRefusals(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var l log
		w := o.Plug("p0")
		replies := []string{
			reads(1, 1000), closed([]byte{1, 0x83, 2}), reads(1, 2000)[:7] + "\x00\x00", reads(2, 9000), reads(1, 3000),
		}
		answer(t, w, func(string) (string, time.Duration) {
			if len(replies) == 0 {
				return "", 0
			}
			next := replies[0]
			replies = replies[1:]
			return next, 10 * time.Millisecond
		})
		b := start(t, device.Options{Rigs: []*config.Rig{modbusBus(1)}, Opener: &o, Stamper: bubble{}, Sink: &l, RefusedEvery: time.Nanosecond})
		time.Sleep(7 * time.Second)
		var got []string
		for _, r := range l.all() {
			switch r.Kind {
			case device.Indication:
				got = append(got, fmt.Sprint(r.MM))
			case device.FramesRefused:
				for _, why := range []string{"illegal data address", "wrong checksum", "another address"} {
					if strings.Contains(r.Detail, why) {
						got = append(got, why)
					}
				}
			}
		}
		if s := strings.Join(got, ", "); s != "1, illegal data address, wrong checksum, another address, 3" {
			t.Errorf("%s", s)
		}
		if s := b.Stats()[0]; s.Frames != 2 || s.Refused != 3 {
			t.Errorf("%+v", s)
		}
	})
}

// Two channels of one converter share an address; a late answer of the first
// must not be read as the second's, though it looks the same.
func TestModbusTwoRegistersOfOneAddress(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var l log
		one, two := modbusFrame(), modbusFrame()
		address := 5
		one.Modbus.Address, two.Modbus.Address = &address, &address
		two.Name, two.Modbus.Register = "second", 16
		r := &config.Rig{Frames: []config.Frame{one, two}, Gauges: []config.Gauge{
			{Name: "g1", Port: "p0", Frame: "bus"}, {Name: "g2", Port: "p0", Frame: "second"},
		}}
		random := rand.New(rand.NewPCG(5, 6))
		w := o.Plug("p0")
		answer(t, w, func(q string) (string, time.Duration) {
			if q[3] == 16 {
				return reads(5, 2000), 20 * time.Millisecond
			}
			return reads(5, 1000), time.Duration(random.IntN(390)) * time.Millisecond
		})
		start(t, device.Options{Rigs: []*config.Rig{r}, Opener: &o, Stamper: bubble{}, Sink: &l})
		time.Sleep(10 * time.Minute)
		count := map[string]int{}
		for _, r := range l.of(device.Indication) {
			count[r.Gauge]++
			if want := float64(r.Gauge[1] - '0'); r.MM != want {
				t.Fatalf("gauge %s was credited with %v mm", r.Gauge, r.MM)
			}
		}
		if count["g1"] < 50 || count["g2"] < 500 {
			t.Errorf("readings in 600 s: %v", count)
		}
	})
}

// A SCPI instrument is asked who it is once an opening; another one plugged
// into its port is never read.
func TestSCPIIdentity(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var l log
		f := config.Frame{Name: "scpi", Kind: "scpi", Unit: "mm", Every: seconds(time.Second), Timeout: seconds(200 * time.Millisecond),
			SCPI: &config.SCPI{Query: "READ?", Identity: `,1187,`}}
		identities := 0
		plug := func(serial, value string) {
			w := o.Plug("p0")
			answer(t, w, func(q string) (string, time.Duration) {
				switch q {
				case "*IDN?\n":
					identities++
					return "MADEUP,INDICATOR," + serial + ",1.0\r\n", 10 * time.Millisecond
				case "READ?\n":
					return value + "\r\n", 10 * time.Millisecond
				}
				t.Errorf("asked %q", q)
				return "", 0
			})
		}
		plug("1187", "+1.250E+00")
		start(t, device.Options{Rigs: []*config.Rig{rig(1, f)}, Opener: &o, Stamper: bubble{}, Sink: &l, Backoff: device.Backoff{Jitter: -1}})
		time.Sleep(10*time.Second + 500*time.Millisecond)
		if n := len(l.of(device.Indication)); n != 11 || identities != 1 {
			t.Fatalf("%d readings, identity asked %d times", n, identities)
		}
		plug("2000", "+9.000E+00")
		time.Sleep(20 * time.Second)
		if n := len(l.of(device.Indication)); n != 11 || len(l.of(device.FramesRefused)) != 1 || len(l.of(device.PortBack)) != 0 {
			t.Fatalf("a foreign instrument was read: %+v", l.all())
		}
		plug("1187", "9.91E37")
		time.Sleep(20 * time.Second)
		if n := len(l.of(device.NoReading)); n < 5 || len(l.of(device.PortBack)) != 1 || l.of(device.NoReading)[0].Detail != frame.NotANumber {
			t.Errorf("%+v", l.all())
		}
	})
}

// A streamed frame without terminator counts by what follows: the next one,
// or a pause of the line.
func TestBinaryStream(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var l log
		f := countsFrame()
		f.Checksum = &config.Checksum{Kind: "sum8", At: at(-1)}
		w := o.Plug("p0")
		start(t, device.Options{Rigs: []*config.Rig{rig(1, f)}, Opener: &o, Stamper: bubble{}, Sink: &l})
		one := fromHex(t, "AA 55 00 04 D2 01 00 D6") // 1.234, hold
		w.Send(one[:5])
		time.Sleep(10 * time.Millisecond)
		w.Send(one[5:])
		synctest.Wait()
		if n := len(l.all()); n != 0 {
			t.Fatalf("a frame counted before anything followed: %+v", l.all())
		}
		time.Sleep(60 * time.Millisecond)
		if n := len(l.of(device.Indication)); n != 1 {
			t.Fatalf("after a pause: %+v", l.all())
		}
		w.Send(append(append([]byte{}, one...), one[:2]...))
		synctest.Wait()
		if n := len(l.of(device.Indication)); n != 2 {
			t.Fatalf("after the next one's sync: %+v", l.all())
		}
		time.Sleep(100 * time.Millisecond) // the rest of it never came
		got := l.of(device.Indication)
		if len(got) != 2 || got[0].MM != 1.234 || got[0].Status != "hold" || len(l.of(device.FramesRefused)) != 1 {
			t.Errorf("%+v", l.all())
		}
		if first := got[0].At.Boot; got[1].At.Boot-first < int64(60*time.Millisecond) {
			t.Errorf("stamps %d, %d: not those of the first bytes", first, got[1].At.Boot)
		}
	})
}

// In virtual time the pauses are those of the sender's schedule, and an
// answer that is whole is the answer.
func TestConductedFramesWithoutTerminator(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var l log
		stream, asked := countsFrame(), countsFrame()
		stream.Checksum, asked.Checksum = nil, nil
		stream.Binary.Sync = ""
		asked.Name, asked.Request = "asked", "?"
		asked.Timeout = seconds(200 * time.Millisecond)
		r := rig(2, stream)
		r.Frames = append(r.Frames, asked)
		r.Gauges[1].Frame = asked.Name
		w, a := o.Plug("p0"), o.Plug("p1")
		one := string(fromHex(t, "AA 55 00 04 D2 01 00 D6"))
		replies := []string{one, one[:5], one + "\x00", one}
		answer(t, a, func(string) (string, time.Duration) {
			next := replies[0]
			replies = replies[1:]
			return next, 0
		})
		// One frame of eight bytes a second.
		b := start(t, device.Options{Rigs: []*config.Rig{r}, Opener: &o, Sink: &l, Stamper: everySecond{8}, Conducted: true})
		w.Send([]byte(strings.Repeat(one, 32)))
		if err := b.WaitConsumed(t.Context(), "p0", 256); err != nil {
			t.Fatal(err)
		}
		got := l.of(device.Indication)
		if len(got) != 32 || got[31].At.Boot != 31e9 || got[31].MM != 1.234 {
			t.Fatalf("%d readings", len(got))
		}
		for i, want := range []error{nil, device.ErrRefused, device.ErrRefused, nil} {
			if err := b.Ask(t.Context(), 0, "g1"); err != want {
				t.Errorf("question %d: %v, want %v", i, err, want)
			}
		}
		if n := len(l.of(device.Indication)); n != 34 {
			t.Errorf("%d readings", n)
		}
	})
}

// everySecond is a schedule of frames of n bytes, one a second on p0.
type everySecond struct{ n int64 }

func (s everySecond) Stamp(port string, offset int64) device.Instant {
	at := offset / s.n * 1e9
	if port != "p0" {
		at = 0
	}
	return device.Instant{Wall: at, Boot: at}
}

func TestKindsRefusedBeforeOpening(t *testing.T) {
	for want, change := range map[string]func(*config.Rig){
		"no bus address":        func(r *config.Rig) { r.Gauges[0].Channel = "A" },
		"addresses are 1 to":    func(r *config.Rig) { r.Gauges[0].Channel = "248" },
		"modbus function":       func(r *config.Rig) { r.Frames[0].Modbus.Function = "coil" },
		"modbus type":           func(r *config.Rig) { r.Frames[0].Modbus.Type = "int8" },
		"carry no unit":         func(r *config.Rig) { r.Frames[0].Unit = "" },
		"cannot be read at":     func(r *config.Rig) { r.Frames[0].Modbus.Status = at(200) },
		"needs its modbus":      func(r *config.Rig) { r.Frames[0].Modbus = nil },
		"needs its query":       func(r *config.Rig) { r.Frames[0].Kind = "scpi" },
		"needs its nibbles":     func(r *config.Rig) { r.Frames[0].Kind = "nibbles" },
		"needs its binary":      func(r *config.Rig) { r.Frames[0].Kind = "binary" },
		"carries an indication": func(r *config.Rig) { r.Probes = []config.Probe{{Name: "air", Port: "p0", Frame: "bus", Channel: "1"}} },
	} {
		r := modbusBus(1)
		change(r)
		var l log
		_, err := device.Open(device.Options{Rigs: []*config.Rig{r}, Opener: &devicetest.Opener{}, Sink: &l})
		if err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%v, want %q", err, want)
		}
	}
}
