package device

import (
	"context"
	"errors"

	"gaugelog/config"
)

// Errors of a Port. They are distinct: quiet, unplugged and closed by us are
// three different things.
var (
	// ErrQuiet: nothing came within the read time-out.
	ErrQuiet = errors.New("no bytes within the time-out")
	// ErrUnplugged: the port's device is gone.
	ErrUnplugged = errors.New("the port is gone")
	// ErrClosed: Close was called on this side.
	ErrClosed = errors.New("the port was closed")
	// ErrHeld: another program holds the port; the error wrapping it names it.
	ErrHeld = errors.New("the port is held by another program")
)

// Port is an open serial line. One goroutine reads; Close may be called from
// another and makes Read return ErrClosed.
type Port interface {
	Read(p []byte) (int, error)
	Write(p []byte) (int, error)
	// Drain throws away what was received and not yet read.
	Drain() error
	Close() error
}

// Opener opens ports by the name the rig file gives. The real one resolves
// stable identities; fakes hand out in-memory ports.
type Opener interface {
	Open(ctx context.Context, name string, line config.Line) (Port, error)
}
