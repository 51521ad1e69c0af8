package device

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"sync"
	"sync/atomic"
	"syscall"
	"time"

	"go.bug.st/serial"

	"gaugelog/config"
)

// SystemOpener opens the machine's serial ports. A name is a stable identity
// (usb:VID:PID:SERIAL, by-path:NAME), resolved anew at each opening, or the
// path of a device. A port is locked before it is opened; one that is held
// gives an error wrapping ErrHeld that names the holder. The zero value works
// on the machine's own tree.
type SystemOpener struct {
	// Root stands for "/" where identities are looked up (/sys, /dev); tests
	// give a tree of their own. Empty means "/".
	Root string
	// LockDir is where the locks lie; empty means DefaultLockDir().
	LockDir string
}

// readTimeout bounds one Read of a real port: it is also how long Close waits
// for the reader to step out of the library.
const readTimeout = 200 * time.Millisecond

// Check reports, without opening anything, whether the name is ill-formed or
// fits more than one device. A device that is not there is no error.
func (o SystemOpener) Check(name string) error {
	_, err := Resolve(o.Root, name)
	if errors.Is(err, ErrAmbiguous) || errors.Is(err, errBadName) {
		return err
	}
	return nil
}

// Open resolves, locks, opens and sets up the port.
func (o SystemOpener) Open(_ context.Context, name string, line config.Line) (Port, error) {
	path, err := Resolve(o.Root, name)
	if err != nil {
		return nil, err
	}
	mode, err := modeOf(line)
	if err != nil {
		return nil, err
	}
	lock, err := lockPort(o.LockDir, path)
	if err != nil {
		return nil, err
	}
	p, err := openLocked(path, mode, line)
	if err != nil {
		lock.release()
		return nil, fmt.Errorf("%s: %w", path, describeOpen(err))
	}
	p.lock = lock
	return p, nil
}

func openLocked(path string, mode *serial.Mode, line config.Line) (*systemPort, error) {
	if err := checkTerminal(path); err != nil {
		return nil, err
	}
	port, err := serial.Open(path, mode)
	if err != nil {
		return nil, err
	}
	p := &systemPort{port: port}
	if err := p.setUp(line); err != nil {
		port.Close()
		return nil, err
	}
	return p, nil
}

// setUp puts right what the library leaves: the read time-out, inheritance by
// child processes, descriptors select cannot watch, a lock other programs see,
// and the levels of the modem lines.
func (p *systemPort) setUp(line config.Line) error {
	if err := p.port.SetReadTimeout(readTimeout); err != nil {
		return err
	}
	var err error
	if p.fd, err = secure(p.port); err != nil {
		return err
	}
	if err := level(line.DTR, p.port.SetDTR); err != nil {
		return fmt.Errorf("setting DTR: %w", err)
	}
	if err := level(line.RTS, p.port.SetRTS); err != nil {
		return fmt.Errorf("setting RTS: %w", err)
	}
	return nil
}

// level sets a modem line; a port without modem lines (a pseudo-terminal) has
// nothing to set.
func level(want string, set func(bool) error) error {
	if want == "" {
		return nil
	}
	err := set(want == "on")
	if errors.Is(err, syscall.ENOTTY) || errors.Is(err, syscall.EINVAL) {
		return nil
	}
	return err
}

// modeOf maps line settings to the library's.
func modeOf(l config.Line) (*serial.Mode, error) {
	m := &serial.Mode{BaudRate: l.Baud, DataBits: l.DataBits}
	if l.Baud < 50 || l.Baud > 4_000_000 {
		return nil, fmt.Errorf("line speed of %d baud: it must be from 50 to 4000000", l.Baud)
	}
	if l.DataBits < 5 || l.DataBits > 8 {
		return nil, fmt.Errorf("%d data bits: 5 to 8 are possible", l.DataBits)
	}
	var ok bool
	if m.Parity, ok = parities[l.Parity]; !ok {
		return nil, fmt.Errorf("parity %q: none, even, odd, mark and space are possible", l.Parity)
	}
	if m.StopBits, ok = stopBits[l.StopBits]; !ok {
		return nil, fmt.Errorf("%q stop bits: 1, 1.5 and 2 are possible", l.StopBits)
	}
	return m, nil
}

var parities = map[string]serial.Parity{
	"none": serial.NoParity, "even": serial.EvenParity, "odd": serial.OddParity,
	"mark": serial.MarkParity, "space": serial.SpaceParity,
}

var stopBits = map[string]serial.StopBits{
	"1": serial.OneStopBit, "1.5": serial.OnePointFiveStopBits, "2": serial.TwoStopBits,
}

// describeOpen turns the library's errors into words of ours. All of them may
// pass: a port just plugged in may be missing, busy or not yet permitted.
func describeOpen(err error) error {
	var pe *serial.PortError
	if errors.As(err, &pe) {
		switch pe.Code() {
		case serial.PortBusy:
			return fmt.Errorf("%w, which has claimed it for itself alone", ErrHeld)
		case serial.PermissionDenied:
			return fmt.Errorf("%w (is this user in the group that owns the port?)", fs.ErrPermission)
		}
	}
	return err
}

// systemPort is one open port of the machine. It keeps the library's Close
// away from a Read or Write in progress: the library closes the descriptor
// first and wakes the reader afterwards, and another file may by then have
// got the number.
type systemPort struct {
	port serial.Port
	fd   int
	lock *portLock

	closing atomic.Bool
	using   sync.RWMutex // held for reading inside the library
	reading atomic.Bool
	once    sync.Once
	err     error
}

// Read waits up to 200 ms for bytes. It may be called from one goroutine.
func (p *systemPort) Read(b []byte) (int, error) {
	if len(b) == 0 {
		return 0, nil // the library would call that a closed port
	}
	if !p.reading.CompareAndSwap(false, true) {
		panic("device: two goroutines read one port")
	}
	defer p.reading.Store(false)
	p.using.RLock()
	defer p.using.RUnlock()
	if p.closing.Load() {
		return 0, ErrClosed
	}
	n, err := p.port.Read(b)
	switch {
	case p.closing.Load() && n == 0:
		return 0, ErrClosed
	case n > 0:
		return n, nil // an error would come again at the next Read
	case err == nil:
		return 0, ErrQuiet
	}
	return 0, p.fault(err)
}

// Write sends b, waiting up to a second for a line that takes no bytes.
func (p *systemPort) Write(b []byte) (int, error) {
	p.using.RLock()
	defer p.using.RUnlock()
	if p.closing.Load() {
		return 0, ErrClosed
	}
	if err := writable(p.fd, &p.closing, time.Second); err != nil {
		return 0, err
	}
	n, err := p.port.Write(b)
	for errors.Is(err, syscall.EINTR) {
		n, err = p.port.Write(b)
	}
	if err != nil {
		return n, p.fault(err)
	}
	return n, nil
}

// fault tells an unplugged port from one closed here: the library gives the
// same error for both.
func (p *systemPort) fault(err error) error {
	if p.closing.Load() {
		return ErrClosed
	}
	var pe *serial.PortError
	if errors.As(err, &pe) && pe.Code() == serial.PortClosed {
		return ErrUnplugged
	}
	return fmt.Errorf("%w: %w", ErrUnplugged, err)
}

// Drain throws away received bytes. Call it from the goroutine that reads, or
// a Read in progress may block without limit.
func (p *systemPort) Drain() error {
	p.using.RLock()
	defer p.using.RUnlock()
	if p.closing.Load() {
		return ErrClosed
	}
	return p.port.ResetInputBuffer()
}

// Close waits until the reader has left the library (at most the read
// time-out), closes and gives the lock back. A second Close does nothing.
// A write the driver will not finish is not waited for: the kernel keeps the
// device it writes to, whatever becomes of the descriptor.
func (p *systemPort) Close() error {
	p.once.Do(func() {
		p.closing.Store(true)
		for end := time.Now().Add(5 * readTimeout); ; time.Sleep(time.Millisecond) {
			if p.using.TryLock() {
				defer p.using.Unlock()
				break
			}
			if time.Now().After(end) {
				break
			}
		}
		p.err = p.port.Close()
		p.lock.release()
	})
	return p.err
}
