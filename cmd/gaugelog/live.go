package main

import (
	"bufio"
	"context"
	"fmt"
	"io"
	"strings"
	"time"

	"gaugelog/config"
	"gaugelog/device"
)

// live reads instruments for a command that talks with a person, outside any
// recording.
type live struct {
	readings chan device.Reading
	bank     *device.Bank
	done     chan error
}

// readingsKept bounds what waits for a person who thinks; the oldest go first.
const readingsKept = 4096

// listenLive opens the ports of the rig's gauges and reads until close.
func listenLive(ctx context.Context, rig *config.Rig, opener device.Opener) (*live, error) {
	l := &live{readings: make(chan device.Reading, readingsKept), done: make(chan error, 1)}
	bank, err := device.Open(device.Options{Rigs: []*config.Rig{rig}, Opener: opener, Sink: l})
	if err != nil {
		return nil, wrong(err, mendOf(err))
	}
	l.bank = bank
	go func() { l.done <- bank.Run(ctx) }()
	return l, nil
}

// Take keeps a reading; where nobody fetches them the oldest is let go.
func (l *live) Take(r device.Reading) {
	for {
		select {
		case l.readings <- r:
			return
		default:
		}
		select {
		case <-l.readings:
		default:
		}
	}
}

// forget throws away what came before now.
func (l *live) forget() {
	for {
		select {
		case <-l.readings:
		default:
			return
		}
	}
}

func (l *live) close() error {
	err := l.bank.Close()
	<-l.done
	return err
}

// gaugeOf finds a gauge of the rig and returns a rig that holds it alone.
func gaugeOf(rig *config.Rig, name string) (*config.Rig, config.Gauge, error) {
	var names []string
	for _, g := range rig.Gauges {
		if g.Name == name {
			alone := *rig
			alone.Gauges, alone.Probes = []config.Gauge{g}, nil
			return &alone, g, nil
		}
		names = append(names, g.Name)
	}
	return nil, config.Gauge{}, wrongf("its gauges are: "+strings.Join(names, ", "), "the rig has no gauge %q", name)
}

// troubleWords tells of a reading that is none, for a person; "" for one.
func troubleWords(r device.Reading) string {
	switch r.Kind {
	case device.PortLost:
		return fmt.Sprintf("port %s: %s", r.Port, r.Detail)
	case device.NoReading:
		return fmt.Sprintf("gauge %s shows no number: %s", r.Gauge, r.Detail)
	case device.FramesRefused:
		return fmt.Sprintf("port %s: %d damaged frames, %s", r.Port, r.N, r.Detail)
	}
	return ""
}

// typed hands over the lines of a text input until it ends or ctx does. The
// goroutine may wait in Read until the process ends: a terminal cannot be
// asked to give up.
func typed(ctx context.Context, in io.Reader) <-chan string {
	out := make(chan string)
	go func() {
		defer close(out)
		lines := bufio.NewScanner(in)
		for lines.Scan() {
			select {
			case out <- strings.TrimSpace(lines.Text()):
			case <-ctx.Done():
				return
			}
		}
	}()
	return out
}

// average is the mean of a gauge's indications once it has settled: those that
// come within span after the first, or the one a button sends.
func (l *live) average(ctx context.Context, errOut io.Writer, settle, span, patience time.Duration) (mm float64, n int, err error) {
	if err := sleep(ctx, settle); err != nil {
		return 0, 0, err
	}
	l.forget()
	sum, end := 0.0, time.NewTimer(patience)
	defer end.Stop()
	for {
		select {
		case r := <-l.readings:
			if r.Kind != device.Indication {
				if w := troubleWords(r); w != "" {
					fmt.Fprintln(errOut, w)
				}
				continue
			}
			if n++; n == 1 {
				end.Reset(span)
			}
			sum += r.MM
		case <-end.C:
			if n == 0 {
				return 0, 0, fmt.Errorf("no reading came within %s", patience)
			}
			return sum / float64(n), n, nil
		case <-ctx.Done():
			return 0, 0, ctx.Err()
		}
	}
}

func sleep(ctx context.Context, d time.Duration) error {
	t := time.NewTimer(d)
	defer t.Stop()
	select {
	case <-t.C:
		return nil
	case <-ctx.Done():
		return ctx.Err()
	}
}

// spanFlag reads a duration flag such as "2 s".
func spanFlag(name, text string) (time.Duration, error) {
	d, err := config.ParseDuration(text)
	if err != nil {
		return 0, wrong(fmt.Errorf("--%s: %w", name, err), mendOf(err))
	}
	if d.Value < 0 {
		return 0, wrongf("give a time such as 2s", "--%s is less than nothing", name)
	}
	return time.Duration(d.Value * float64(time.Second)), nil
}

// lasting is ctx for as long as --for says; for good where it says nothing.
func lasting(ctx context.Context, text string) (context.Context, context.CancelFunc, error) {
	if text == "" {
		ctx, stop := context.WithCancel(ctx)
		return ctx, stop, nil
	}
	d, err := spanFlag("for", text)
	if err != nil {
		return nil, nil, err
	}
	ctx, stop := context.WithTimeout(ctx, d)
	return ctx, stop, nil
}
