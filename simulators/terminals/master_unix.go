//go:build unix

package terminals

import (
	"os"

	"golang.org/x/sys/unix"
)

// waitable returns a master the runtime can wait on: one whose reads and
// writes heed deadlines and end when it is closed. The library that opened it
// has put it in blocking mode. f is closed.
func waitable(f *os.File) (*os.File, error) {
	defer f.Close()
	fd, err := unix.FcntlInt(f.Fd(), unix.F_DUPFD_CLOEXEC, 0)
	if err != nil {
		return nil, err
	}
	if err := unix.SetNonblock(fd, true); err != nil {
		unix.Close(fd)
		return nil, err
	}
	return os.NewFile(uintptr(fd), f.Name()), nil
}
