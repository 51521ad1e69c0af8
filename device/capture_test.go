package device_test

import (
	"os"
	"strings"
	"testing"
	"testing/synctest"
	"time"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/device/devicetest"
)

// What was recorded plays back to the same readings, losses included.
func TestRecordAndPlayback(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var first, second log
		var file strings.Builder
		rigs := []*config.Rig{rig(1, askedFrame(time.Second, 300*time.Millisecond))}
		record := &devicetest.Record{Opener: &o, W: &file}
		w := o.Plug("p0")
		answer(t, w, func(string) (string, time.Duration) { return "+001.250\r\n", 30 * time.Millisecond })
		b := start(t, device.Options{Rigs: rigs, Opener: record, Stamper: bubble{}, Sink: &first, Backoff: device.Backoff{Jitter: -1}})
		time.Sleep(3*time.Second + 500*time.Millisecond)
		o.Unplug("p0")
		synctest.Wait()
		b.Close()
		if record.Err() != nil {
			t.Fatal(record.Err())
		}
		play, err := devicetest.NewPlayback(strings.NewReader(file.String()))
		if err != nil {
			t.Fatal(err)
		}
		b = start(t, device.Options{Rigs: rigs, Opener: play, Stamper: bubble{}, Sink: &second, Backoff: device.Backoff{Jitter: -1}})
		time.Sleep(4 * time.Second)
		b.Close()
		if err := play.Left(); err != nil {
			t.Error(err)
		}
		if got, want := len(second.of(device.Indication)), len(first.of(device.Indication)); got != want || got != 4 {
			t.Errorf("%d readings played, %d recorded", got, want)
		}
		if len(second.of(device.PortLost)) != 1 {
			t.Errorf("%+v", second.all())
		}
	})
}

// A capture kept as a file, written by hand by the format's description.
func TestPlaybackOfFile(t *testing.T) {
	f, err := os.Open("testdata/stream.capture")
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	play, err := devicetest.NewPlayback(f)
	if err != nil {
		t.Fatal(err)
	}
	synctest.Test(t, func(t *testing.T) {
		var l log
		start(t, device.Options{Rigs: []*config.Rig{rig(1, signed)}, Opener: play, Stamper: bubble{}, Sink: &l})
		time.Sleep(10 * time.Second)
		got := l.of(device.Indication)
		if len(got) != 3 || got[1].At.Boot-got[0].At.Boot != int64(time.Second) || got[2].MM != -1.252 || len(l.of(device.PortBack)) != 1 {
			t.Errorf("%+v", l.all())
		}
		if err := play.Left(); err != nil {
			t.Error(err)
		}
	})
}

func TestBadCaptures(t *testing.T) {
	for in, want := range map[string]string{
		"x":                                 "capture:1",
		"# gaugelog capture 1\n0 < p0 zz":   "capture:2",
		"# gaugelog capture 1\n\n0 jump p0": "capture:3",
		"# gaugelog capture 1\nnow open p0": "no time",
		"# gaugelog capture 1\n0 open":      "columns",
	} {
		if _, err := devicetest.NewPlayback(strings.NewReader(in)); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%q: %v", in, err)
		}
	}
}
