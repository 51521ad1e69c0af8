//go:build campaign && linux

package main

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"github.com/creack/pty"
	"golang.org/x/sys/unix"
	"golang.org/x/term"
)

// feeder plays streaming gauges on pseudo-terminals. The n-th frame of each
// gauge shows n thousandths of a millimetre, so that every stored reading says
// which one it is; a frame the terminal has no room for is sent later, never
// left out. It outlives the recorders that read from it.
type feeder struct {
	gauges []*fedGauge
	stop   chan struct{}
	done   sync.WaitGroup
}

type fedGauge struct {
	name          string
	master, slave *os.File
	fd            int // of master; its Fd would make it block again
	next          atomic.Int64
	pending       []byte
}

// newFeeder starts gauges that send rate frames a second each.
func newFeeder(t *testing.T, gauges, rate int) *feeder {
	t.Helper()
	f, err := openFeeder(gauges, rate, 0)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		close(f.stop)
		f.done.Wait()
		for _, g := range f.gauges {
			g.master.Close()
			g.slave.Close()
		}
	})
	return f
}

// openFeeder starts gauges whose first frame has the number behind base.
func openFeeder(gauges, rate int, base int64) (*feeder, error) {
	f := &feeder{stop: make(chan struct{})}
	for i := range gauges {
		master, slave, err := pty.Open()
		if err != nil {
			return nil, err
		}
		// The open slave keeps the terminal alive between two recorders.
		if _, err := term.MakeRaw(int(slave.Fd())); err != nil {
			return nil, err
		}
		fd := int(master.Fd())
		if err := unix.SetNonblock(fd, true); err != nil {
			return nil, err
		}
		g := &fedGauge{name: fmt.Sprintf("g%d", i), master: master, slave: slave, fd: fd}
		g.next.Store(base)
		f.gauges = append(f.gauges, g)
	}
	f.done.Go(func() { f.feed(rate) })
	return f, nil
}

func (f *feeder) feed(rate int) {
	const every = 10 * time.Millisecond
	tick := time.NewTicker(every)
	defer tick.Stop()
	began, sent := time.Now(), 0
	for {
		select {
		case <-f.stop:
			return
		case <-tick.C:
		}
		due := int(time.Since(began).Seconds() * float64(rate))
		for range min(due-sent, rate/10+1) {
			for _, g := range f.gauges {
				g.send()
			}
		}
		sent = due
	}
}

// send writes the next frame, or what is left of the last one.
func (g *fedGauge) send() {
	if len(g.pending) == 0 {
		g.pending = fmt.Appendf(g.pending, "%+09.3f\r\n", float64(g.next.Add(1))/1000)
	}
	n, err := unix.Write(g.fd, g.pending)
	if err != nil && !errors.Is(err, unix.EAGAIN) {
		return
	}
	g.pending = g.pending[max(0, n):]
}

// sent is the number of the last frame of each gauge.
func (f *feeder) sent() map[string]int {
	out := map[string]int{}
	for _, g := range f.gauges {
		out[g.name] = int(g.next.Load())
	}
	return out
}

// ready takes back the exclusive use that a killed recorder left on the ports.
func (f *feeder) ready(t *testing.T) {
	t.Helper()
	for _, g := range f.gauges {
		if err := unix.IoctlSetInt(int(g.slave.Fd()), unix.TIOCNXCL, 0); err != nil {
			t.Fatal(err)
		}
	}
}

// write leaves a rig file and the list of its ports in dir.
func (f *feeder) write(t *testing.T, dir, record string) (rig, ports string) {
	t.Helper()
	rig, ports, err := f.lay(dir, record)
	if err != nil {
		t.Fatal(err)
	}
	return rig, ports
}

func (f *feeder) lay(dir, record string) (rig, ports string, err error) {
	var r, p strings.Builder
	fmt.Fprint(&r, "specimen: {name: fed, section: {shape: rectangle, width: 140 mm, depth: 38 mm}, length: 800 mm}\n"+
		"supports: [{name: left, at: 0 mm}, {name: right, at: 600 mm}]\n"+
		"loads: [{name: pan, at: 300 mm}]\n"+
		`frames: [{name: fed, kind: text, end: "\r\n", pattern: '(?P<value>[+-]\d{4}\.\d{3})', unit: mm, line: {baud: 115200, data_bits: 8, parity: none, stop_bits: 1}}]`+
		"\ngauges:\n")
	for i, g := range f.gauges {
		fmt.Fprintf(&r, "  - {name: %s, at: %d mm, port: %s, frame: fed, sense: down, resolution: 0.001 mm}\n", g.name, 10+10*i, g.slave.Name())
		fmt.Fprintf(&p, "%s %s\n", g.slave.Name(), g.slave.Name())
	}
	fmt.Fprintf(&r, "record: %s\n", record)
	rig, ports = filepath.Join(dir, "rig.yaml"), filepath.Join(dir, "ports.txt")
	for name, text := range map[string]string{rig: r.String(), ports: p.String()} {
		if err := os.WriteFile(name, []byte(text), 0o644); err != nil {
			return "", "", err
		}
	}
	return rig, ports, nil
}
