// Package terminals puts simulated serial ports on real pseudo-terminals, so
// that the same device code reads them as would read a real gauge.
//
// A [Bank] holds one pseudo-terminal a port, in raw mode; the simulator writes
// the master side. It serves virtual time (a conductor writes batches) and
// real time ([Run]). The slave side is not held open: a port nobody reads
// behaves as an unread serial port does, and a reader that was killed leaves
// no lock behind. After Close no goroutine and no descriptor is left.
//
// Pseudo-terminals exist on Linux and other Unix systems; elsewhere Open
// returns an error that says so.
package terminals

import (
	"errors"
	"fmt"
	"os"
	"sync"
	"sync/atomic"
	"time"

	"github.com/creack/pty"
	"golang.org/x/term"
)

// Terminal is one port: its name in the rig file and the device path under
// which another program opens it.
type Terminal struct{ Name, Path string }

// Heard is called with bytes that a port's reader wrote, from one goroutine a
// port. It must not keep them.
type Heard func(port int, b []byte)

// Bank is a set of open pseudo-terminals. Its methods may be called from
// several goroutines, but for Unplug and Plug of one port.
type Bank struct {
	heard Heard
	names []string
	mu    sync.Mutex
	ports []*terminal // nil while unplugged
}

type terminal struct {
	path   string
	master *os.File
	// writing keeps one write whole among others.
	writing sync.Mutex
	// open tells whether somebody has the other side open.
	open atomic.Bool
	stop chan struct{}
	done chan struct{}
}

// Open opens one pseudo-terminal a name. heard may be nil: what readers write
// is then thrown away.
func Open(names []string, heard Heard) (*Bank, error) {
	b := &Bank{heard: heard, names: names, ports: make([]*terminal, len(names))}
	for i := range names {
		if _, err := b.Plug(i); err != nil {
			b.Close()
			return nil, err
		}
	}
	return b, nil
}

// Terminals lists names and paths, in the order of Open; the path of an
// unplugged port is empty.
func (b *Bank) Terminals() []Terminal {
	b.mu.Lock()
	defer b.mu.Unlock()
	out := make([]Terminal, len(b.names))
	for i, name := range b.names {
		out[i].Name = name
		if t := b.ports[i]; t != nil {
			out[i].Path = t.path
		}
	}
	return out
}

// Plug opens a port that is not there and returns its path, which may be
// another than before.
func (b *Bank) Plug(port int) (string, error) {
	if t := b.get(port); t != nil {
		return t.path, nil
	}
	master, slave, err := pty.Open()
	if err != nil {
		return "", fmt.Errorf("no pseudo-terminal for %s: %w", b.names[port], err)
	}
	path := slave.Name()
	_, err = term.MakeRaw(int(slave.Fd()))
	slave.Close()
	if err != nil {
		master.Close()
		return "", fmt.Errorf("raw mode on %s for %s: %w", path, b.names[port], err)
	}
	if master, err = waitable(master); err != nil {
		return "", fmt.Errorf("pseudo-terminal for %s: %w", b.names[port], err)
	}
	t := &terminal{path: path, master: master, stop: make(chan struct{}), done: make(chan struct{})}
	b.mu.Lock()
	b.ports[port] = t
	b.mu.Unlock()
	go b.listen(port, t)
	return path, nil
}

func (b *Bank) get(port int) *terminal {
	b.mu.Lock()
	defer b.mu.Unlock()
	return b.ports[port]
}

// Unplug closes a port: its reader sees it go as it would a pulled cable.
func (b *Bank) Unplug(port int) error {
	b.mu.Lock()
	t := b.ports[port]
	b.ports[port] = nil
	b.mu.Unlock()
	if t == nil {
		return nil
	}
	close(t.stop)
	err := t.master.Close()
	<-t.done
	return err
}

// Close closes all ports and waits for the goroutines.
func (b *Bank) Close() error {
	var errs []error
	for i := range b.names {
		errs = append(errs, b.Unplug(i))
	}
	return errors.Join(errs...)
}

// ErrUnplugged says that a port is unplugged.
var ErrUnplugged = errors.New("the simulated port is unplugged")

// Write writes all of p to a port and waits until the terminal took it, which
// it does as long as somebody reads. patience bounds the waiting (0: no
// bound); what was not taken by then is lost, and os.ErrDeadlineExceeded is
// returned.
func (b *Bank) Write(port int, p []byte, patience time.Duration) error {
	t := b.get(port)
	if t == nil {
		return fmt.Errorf("%s: %w", b.names[port], ErrUnplugged)
	}
	t.writing.Lock()
	defer t.writing.Unlock()
	if patience > 0 {
		// A terminal that knows no deadline waits without one.
		_ = t.master.SetWriteDeadline(time.Now().Add(patience))
	}
	if _, err := t.master.Write(p); err != nil {
		return fmt.Errorf("%s: %w", b.names[port], err)
	}
	return nil
}

// Read tells whether somebody has the port open.
func (b *Bank) Read(port int) bool {
	t := b.get(port)
	return t != nil && t.open.Load()
}

const look = 20 * time.Millisecond // how often a port nobody has open is looked at

// listen reads what a port's reader writes until the port is closed. The
// kernel answers EIO as long as nobody has the other side open.
func (b *Bank) listen(port int, t *terminal) {
	defer close(t.done)
	buf := make([]byte, 512)
	tick := time.NewTicker(look)
	defer tick.Stop()
	for {
		n, err := t.listenOnce(buf)
		if n > 0 && b.heard != nil {
			b.heard(port, buf[:n])
		}
		switch {
		case errors.Is(err, os.ErrClosed):
			return
		case errors.Is(err, os.ErrDeadlineExceeded):
			// The other side is open and said nothing.
			t.open.Store(true)
			continue
		case err == nil:
			t.open.Store(true)
			continue
		}
		t.open.Store(false)
		select {
		case <-t.stop:
			return
		case <-tick.C:
		}
	}
}

// listenOnce reads for a moment only, so that an open but silent other side is
// noticed.
func (t *terminal) listenOnce(buf []byte) (int, error) {
	wait := look
	if t.open.Load() {
		wait = time.Second
	}
	_ = t.master.SetReadDeadline(time.Now().Add(wait))
	return t.master.Read(buf)
}
