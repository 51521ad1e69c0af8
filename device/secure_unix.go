//go:build unix

package device

import (
	"errors"
	"fmt"
	"reflect"
	"sync/atomic"
	"time"

	"go.bug.st/serial"
	"golang.org/x/sys/unix"
)

// maxSelect is FD_SETSIZE: the library's Read panics on a higher descriptor.
const maxSelect = 1024

// secure finds the descriptors behind an open port, refuses those the library
// cannot watch, keeps them from child processes and locks the device itself
// against other programs that lock. It returns the port's descriptor.
func secure(port serial.Port) (int, error) {
	v := reflect.Indirect(reflect.ValueOf(port))
	if v.Kind() != reflect.Struct {
		return -1, errors.New("device: the serial library's port is of an unknown shape")
	}
	handle, pipe := v.FieldByName("handle"), reflect.Indirect(v.FieldByName("closeSignal"))
	if !handle.IsValid() || !handle.CanInt() || pipe.Kind() != reflect.Struct {
		return -1, errors.New("device: the serial library's port has an unknown shape")
	}
	fds := []int64{handle.Int(), pipe.FieldByName("rd").Int(), pipe.FieldByName("wr").Int()}
	for _, fd := range fds {
		if fd >= maxSelect {
			return -1, fmt.Errorf("the process has too many open files (descriptor %d, a port needs one below %d)", fd, maxSelect)
		}
		unix.CloseOnExec(int(fd))
	}
	fd := int(fds[0])
	if err := unix.Flock(fd, unix.LOCK_EX|unix.LOCK_NB); errors.Is(err, unix.EWOULDBLOCK) {
		return -1, fmt.Errorf("%w, which has locked the device", ErrHeld)
	}
	return fd, nil
}

// writable waits until the line takes bytes.
func writable(fd int, closing *atomic.Bool, limit time.Duration) error {
	for end := time.Now().Add(limit); ; {
		n, err := unix.Poll([]unix.PollFd{{Fd: int32(fd), Events: unix.POLLOUT}}, 50)
		switch {
		case closing.Load():
			return ErrClosed
		case n > 0:
			return nil
		case err != nil && !errors.Is(err, unix.EINTR):
			return fmt.Errorf("%w: %w", ErrUnplugged, err)
		case time.Now().After(end):
			return fmt.Errorf("the line took no bytes for %v", limit)
		}
	}
}

// checkTerminal refuses a path that is no character device: opening a plain
// file as a port would pass bytes of anything.
func checkTerminal(path string) error {
	var st unix.Stat_t
	if err := unix.Stat(path, &st); err != nil {
		return err
	}
	if st.Mode&unix.S_IFMT != unix.S_IFCHR {
		return errors.New("is no serial port")
	}
	return nil
}
