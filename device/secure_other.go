//go:build !unix

package device

import (
	"sync/atomic"
	"time"

	"go.bug.st/serial"
)

// Outside Unix the library does not use select, handles are not inherited and
// a port opens for one program only: nothing is left to put right.
func secure(serial.Port) (int, error)                 { return -1, nil }
func writable(int, *atomic.Bool, time.Duration) error { return nil }
func checkTerminal(string) error                      { return nil }
