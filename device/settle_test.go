package device_test

import (
	"errors"
	"testing"
	"testing/synctest"
	"time"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/device/devicetest"
)

// In virtual time a question ends when the conductor says that the line is
// quiet: not after the patience that a busy machine is given. What came of an
// answer by then is refused with it, and the next question is a fresh one.
func TestQuestionEndsWithTheQuietLine(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var l log
		asked := config.Frame{Name: "asked", Kind: "text", Request: "?", End: `\r`, Unit: "mm", Pattern: `(?P<value>[+-]\d\.\d{3})`}
		r := rig(1, asked)
		w := o.Plug("p0")
		replies := []string{"", "+1.2", "?+1.2", "+1.234\r", "?+1.235\r"}
		heard := make(chan int, 1)
		answer(t, w, func(string) (string, time.Duration) {
			next := replies[0]
			replies = replies[1:]
			heard <- len(next)
			return next, 0
		})
		b := start(t, device.Options{Rigs: []*config.Rig{r}, Opener: &o, Sink: &l, Stamper: everySecond{8}, Conducted: true, Patience: time.Hour})
		began, sent := time.Now(), 0
		for i, want := range []error{device.ErrQuiet, device.ErrQuiet, device.ErrQuiet, nil, nil} {
			ended := make(chan error, 1)
			go func() { ended <- b.Ask(t.Context(), 0, "g0") }()
			sent += <-heard
			synctest.Wait()
			if err := b.WaitConsumed(t.Context(), "p0", int64(sent)); err != nil {
				t.Fatal(err)
			}
			if err := <-ended; !errors.Is(err, want) {
				t.Errorf("question %d: %v, want %v", i, err, want)
			}
		}
		if took := time.Since(began); took > time.Second {
			t.Errorf("five questions took %v", took)
		}
		if got := l.of(device.Indication); len(got) != 2 || got[0].MM != 1.234 || got[1].MM != 1.235 {
			t.Errorf("%+v", l.all())
		}
	})
}
