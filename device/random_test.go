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

// A stream with random pauses, splits, damage and losses, compared with a
// model that knows what was sent: every frame sent intact while the port was
// open arrives, once and in order; nothing else does.
func TestRandomFaultsAgainstModel(t *testing.T) {
	seeds := uint64(60)
	if testing.Short() {
		seeds = 6
	}
	for seed := range seeds {
		synctest.Test(t, func(t *testing.T) { randomFaults(t, seed) })
	}
}

func randomFaults(t *testing.T, seed uint64) {
	random := rand.New(rand.NewPCG(seed, 7))
	var o devicetest.Opener
	var l log
	w := o.Plug("p0")
	start(t, device.Options{Rigs: []*config.Rig{rig(1, signed)}, Opener: &o, Stamper: bubble{}, Sink: &l, DeafAfter: -1})
	var want []float64
	losses, damaged := 0, 0
	synctest.Wait()
	for i := range 300 {
		text := []byte(fmt.Sprintf("+%03d.%03d\r\n", i/1000+random.IntN(900), i%1000))
		var value float64
		fmt.Sscanf(string(text), "%f", &value)
		switch random.IntN(12) {
		case 0: // damage: a byte that no frame of this grammar holds
			text[random.IntN(8)] = 0x80 | byte(random.IntN(128))
			w.Send(text)
			damaged++
		case 1: // a partial frame, then the port is lost
			w.Send(text[:random.IntN(len(text))])
			synctest.Wait()
			o.Unplug("p0")
			losses++
			time.Sleep(time.Duration(random.IntN(100)) * time.Second)
			w = o.Plug("p0")
			time.Sleep(15 * time.Second)
		case 2: // quiet
			time.Sleep(time.Duration(random.IntN(20)) * time.Second)
			fallthrough
		default:
			cut := random.IntN(len(text) + 1)
			w.Send(text[:cut])
			if random.IntN(2) == 0 {
				time.Sleep(time.Duration(random.IntN(100)) * time.Millisecond)
			}
			w.Send(text[cut:])
			want = append(want, value)
		}
		synctest.Wait()
	}
	w.Send([]byte("+999.999\r\n")) // so that a last loss is over
	want = append(want, 999.999)
	synctest.Wait()
	var got []float64
	for _, r := range l.of(device.Indication) {
		got = append(got, r.MM)
	}
	if fmt.Sprint(got) != fmt.Sprint(want) {
		t.Fatalf("seed %d: %d readings, %d sent intact", seed, len(got), len(want))
	}
	lost, back := len(l.of(device.PortLost)), len(l.of(device.PortBack))
	if lost != back || lost > losses || losses > 0 && lost == 0 {
		t.Errorf("seed %d: %d losses, %d told, %d returns told", seed, losses, lost, back)
	}
	if damaged > 0 && len(l.of(device.FramesRefused)) == 0 {
		t.Errorf("seed %d: %d damaged frames, none told", seed, damaged)
	}
}
