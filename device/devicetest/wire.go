// Package devicetest holds fakes of serial ports for tests: in-memory ports
// with scripted faults ([Opener], [Wire]), and openers that record a real
// port's traffic to a file and play it back ([Record], [Playback]).
//
// It promises that the fakes block only on channels and plain time, so they
// work inside testing/synctest, and that a fault happens exactly where the
// test puts it.
package devicetest

import (
	"context"
	"fmt"
	"io/fs"
	"sync"
	"time"

	"gaugelog/config"
	"gaugelog/device"
)

// Opener hands out in-memory ports by name. Its zero value knows no port;
// Plug adds one.
type Opener struct {
	mu    sync.Mutex
	wires map[string]*Wire
	fails map[string][]error
	opens map[string]int
}

// Plug makes a port of that name openable and returns the gauge's end of it.
// A port plugged in before under this name is unplugged first.
func (o *Opener) Plug(name string) *Wire {
	o.mu.Lock()
	defer o.mu.Unlock()
	if o.wires == nil {
		o.wires = map[string]*Wire{}
	}
	if old := o.wires[name]; old != nil {
		old.unplug()
	}
	w := &Wire{wake: make(chan struct{}, 1), sent: make(chan []byte, 64), gone: make(chan struct{})}
	o.wires[name] = w
	return w
}

// Unplug takes the port away: its reader gets ErrUnplugged, bytes not yet
// read are lost, and opening it fails until it is plugged in again.
func (o *Opener) Unplug(name string) {
	o.mu.Lock()
	defer o.mu.Unlock()
	if w := o.wires[name]; w != nil {
		w.unplug()
		delete(o.wires, name)
	}
}

// FailNext makes the next openings of the name fail, one error each.
func (o *Opener) FailNext(name string, errs ...error) {
	o.mu.Lock()
	defer o.mu.Unlock()
	if o.fails == nil {
		o.fails = map[string][]error{}
	}
	o.fails[name] = append(o.fails[name], errs...)
}

// Opens counts the attempts to open the name.
func (o *Opener) Opens(name string) int {
	o.mu.Lock()
	defer o.mu.Unlock()
	return o.opens[name]
}

// Open implements device.Opener.
func (o *Opener) Open(_ context.Context, name string, _ config.Line) (device.Port, error) {
	o.mu.Lock()
	defer o.mu.Unlock()
	if o.opens == nil {
		o.opens = map[string]int{}
	}
	o.opens[name]++
	if errs := o.fails[name]; len(errs) > 0 {
		o.fails[name] = errs[1:]
		return nil, errs[0]
	}
	w := o.wires[name]
	if w == nil {
		return nil, fmt.Errorf("no port %s is plugged in: %w", name, fs.ErrNotExist)
	}
	w.mu.Lock()
	defer w.mu.Unlock()
	if w.open {
		return nil, fmt.Errorf("%s: %w: this test", name, device.ErrHeld)
	}
	w.open = true
	return &port{w: w, closed: make(chan struct{})}, nil
}

// Wire is the gauge's end of an in-memory port.
type Wire struct {
	mu        sync.Mutex
	pending   []byte
	open      bool
	unplugged bool
	piece     int  // longest Read, 0: no limit
	stuck     bool // Write blocks
	hang      chan struct{}
	wake      chan struct{}
	sent      chan []byte
	gone      chan struct{}
}

// Send puts bytes on the line towards the program. It never blocks.
func (w *Wire) Send(p []byte) {
	w.mu.Lock()
	w.pending = append(w.pending, p...)
	w.mu.Unlock()
	w.rouse()
}

// Asked returns the channel of what the program wrote, one slice a Write.
func (w *Wire) Asked() <-chan []byte { return w.sent }

// Pieces limits every Read to n bytes.
func (w *Wire) Pieces(n int) { w.mu.Lock(); w.piece = n; w.mu.Unlock() }

// StickWrites makes writes block until the port is closed or unplugged.
func (w *Wire) StickWrites() { w.mu.Lock(); w.stuck = true; w.mu.Unlock() }

// HangClose makes Close block until release is called.
func (w *Wire) HangClose() (release func()) {
	hang := make(chan struct{})
	w.mu.Lock()
	w.hang = hang
	w.mu.Unlock()
	return sync.OnceFunc(func() { close(hang) })
}

func (w *Wire) rouse() {
	select {
	case w.wake <- struct{}{}:
	default:
	}
}

func (w *Wire) unplug() {
	w.mu.Lock()
	if !w.unplugged {
		w.unplugged, w.pending = true, nil
		close(w.gone)
	}
	w.mu.Unlock()
}

// readTimeout is that of a fake port's Read.
const readTimeout = 200 * time.Millisecond

// port is the program's end.
type port struct {
	w      *Wire
	once   sync.Once
	closed chan struct{}
}

func (p *port) Read(b []byte) (int, error) {
	timer := time.NewTimer(readTimeout)
	defer timer.Stop()
	for {
		p.w.mu.Lock()
		n := len(b)
		if p.w.piece > 0 {
			n = min(n, p.w.piece)
		}
		n = copy(b[:n], p.w.pending)
		p.w.pending = p.w.pending[:copy(p.w.pending, p.w.pending[n:])]
		p.w.mu.Unlock()
		if n > 0 {
			return n, nil
		}
		select {
		case <-p.closed:
			return 0, device.ErrClosed
		case <-p.w.gone:
			return 0, device.ErrUnplugged
		case <-p.w.wake:
		case <-timer.C:
			return 0, device.ErrQuiet
		}
	}
}

func (p *port) Write(b []byte) (int, error) {
	p.w.mu.Lock()
	stuck := p.w.stuck
	p.w.mu.Unlock()
	sent := p.w.sent
	if stuck {
		sent = nil
	}
	select {
	case <-p.closed:
		return 0, device.ErrClosed
	default:
	}
	select {
	case sent <- append([]byte(nil), b...):
		return len(b), nil
	case <-p.closed:
		return 0, device.ErrClosed
	case <-p.w.gone:
		return 0, device.ErrUnplugged
	}
}

func (p *port) Drain() error {
	p.w.mu.Lock()
	p.w.pending = p.w.pending[:0]
	p.w.mu.Unlock()
	return nil
}

func (p *port) Close() error {
	p.once.Do(func() {
		p.w.mu.Lock()
		hang := p.w.hang
		p.w.mu.Unlock()
		if hang != nil {
			<-hang
		}
		close(p.closed)
		p.w.mu.Lock()
		p.w.open = false
		p.w.mu.Unlock()
	})
	return nil
}
