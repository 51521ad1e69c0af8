package segment

import (
	"os"

	"golang.org/x/sys/unix"
)

// dataSync makes a file's data and size durable.
func dataSync(f *os.File) error {
	conn, err := f.SyscallConn()
	if err != nil {
		return err
	}
	var serr error
	err = conn.Control(func(fd uintptr) {
		for {
			// An interrupted call did nothing yet; it is not a failed one.
			if serr = unix.Fdatasync(int(fd)); serr != unix.EINTR {
				return
			}
		}
	})
	if err == nil && serr != nil {
		err = &os.PathError{Op: "fdatasync", Path: f.Name(), Err: serr}
	}
	return err
}

func syncFolder(f *os.File) error { return f.Sync() }
