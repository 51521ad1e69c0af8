package device_test

import (
	"fmt"
	"sync"
	"testing"
	"time"

	"gaugelog/config"
	"gaugelog/device"
)

// signed is an exact-width streamed frame.
var signed = config.Frame{
	Name: "signed", Kind: "text", End: "\r\n", Unit: "mm", Pattern: `(?P<value>[+-]\d{3}\.\d{3})`,
}

// asked is a frame that must be asked for.
func askedFrame(every, timeout time.Duration) config.Frame {
	f := signed
	f.Name, f.Request = "asked", "?\r"
	f.Every, f.Timeout = seconds(every), seconds(timeout)
	return f
}

func seconds(d time.Duration) *config.Duration {
	return &config.Duration{Quantity: config.Quantity{Value: d.Seconds()}}
}

// rig makes a rig of gauges "g0", "g1".. each on its own port "p0", "p1"...
func rig(n int, f config.Frame) *config.Rig {
	r := &config.Rig{Frames: []config.Frame{f}}
	for i := range n {
		r.Gauges = append(r.Gauges, config.Gauge{Name: fmt.Sprintf("g%d", i), Port: fmt.Sprintf("p%d", i), Frame: f.Name})
	}
	return r
}

// log is a Sink that keeps everything.
type log struct {
	mu  sync.Mutex
	got []device.Reading
}

func (l *log) Take(r device.Reading) {
	l.mu.Lock()
	l.got = append(l.got, r)
	l.mu.Unlock()
}

func (l *log) all() []device.Reading {
	l.mu.Lock()
	defer l.mu.Unlock()
	return append([]device.Reading(nil), l.got...)
}

func (l *log) of(k device.Kind) []device.Reading {
	var out []device.Reading
	for _, r := range l.all() {
		if r.Kind == k {
			out = append(out, r)
		}
	}
	return out
}

// start opens a bank and runs it; the test's end closes it.
func start(t *testing.T, o device.Options) *device.Bank {
	t.Helper()
	b, err := device.Open(o)
	if err != nil {
		t.Fatal(err)
	}
	ended := make(chan error, 1)
	go func() { ended <- b.Run(t.Context()) }()
	<-b.Tried()
	t.Cleanup(func() {
		b.Close()
		if err := <-ended; err != nil {
			t.Error(err)
		}
	})
	return b
}

// bubble is the clock of a synctest bubble, on which both clocks agree.
type bubble struct{}

func (bubble) Now() device.Instant {
	now := time.Now().UnixNano()
	return device.Instant{Wall: now, Boot: now}
}

func (b bubble) Stamp(string, int64) device.Instant { return b.Now() }
