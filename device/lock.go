package device

import (
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"sync"

	"github.com/gofrs/flock"
)

// portLock is our own lock on a device: a file that names its holder, locked
// by the kernel, so that it ends with the process whatever happens.
type portLock struct{ f *flock.Flock }

// DefaultLockDir is where port locks lie: /run/lock where it can be written,
// else the directory for temporary files.
func DefaultLockDir() string { return findLockDir() }

var findLockDir = sync.OnceValue(func() string {
	const dir = "/run/lock"
	if f, err := os.CreateTemp(dir, ".gaugelog-*"); err == nil {
		f.Close()
		os.Remove(f.Name())
		return dir
	}
	return os.TempDir()
})

// lockName is the lock file of a device, by the real path of its node.
func lockName(dir, path string) string {
	if dir == "" {
		dir = DefaultLockDir()
	}
	if real, err := filepath.EvalSymlinks(path); err == nil {
		path = real
	}
	name := strings.Map(func(r rune) rune {
		if r == '/' || r == '\\' || r == ':' {
			return '-'
		}
		return r
	}, strings.TrimPrefix(path, "/dev/"))
	return filepath.Join(dir, "gaugelog-port-"+strings.TrimPrefix(name, "-")+".lock")
}

// lockPort takes the lock, or says who holds it.
func lockPort(dir, path string) (*portLock, error) {
	name := lockName(dir, path)
	// A lock that another user left is opened as it is: it may not be written,
	// and in a folder like /run/lock Linux lets nobody open another's file with
	// leave to make it (protected_regular).
	flag := os.O_RDONLY
	if _, err := os.Stat(name); err != nil {
		flag = os.O_CREATE | os.O_RDWR
	}
	f := flock.New(name, flock.SetFlag(flag), flock.SetPermissions(0o666))
	ok, err := f.TryLock()
	if err != nil {
		return nil, fmt.Errorf("locking %s: %w", path, err)
	}
	if !ok {
		return nil, fmt.Errorf("%s: %w: %s", path, ErrHeld, holderOf(name))
	}
	signLock(name)
	return &portLock{f}, nil
}

// signLock leaves the holder's name in the lock, and the lock to be signed by
// whoever comes next. Where another's may not be written nobody is named.
func signLock(name string) {
	_ = os.Chmod(name, 0o666)
	f, err := os.OpenFile(name, os.O_WRONLY|os.O_TRUNC, 0)
	if err != nil {
		return
	}
	fmt.Fprintf(f, "%d %s\n", os.Getpid(), filepath.Base(os.Args[0]))
	f.Close()
}

func holderOf(name string) string {
	text, err := os.ReadFile(name)
	pid, program, ok := strings.Cut(strings.TrimSpace(string(text)), " ")
	if err != nil || !ok {
		return "an unnamed process"
	}
	return fmt.Sprintf("process %s (%s)", pid, program)
}

// heldBy tells who holds the device, "" if nobody of us does. It takes the
// lock for an instant, and makes no file.
func heldBy(dir, path string) string {
	name := lockName(dir, path)
	if _, err := os.Stat(name); err != nil {
		return ""
	}
	f := flock.New(name, flock.SetFlag(os.O_RDONLY))
	defer f.Close()
	if ok, err := f.TryRLock(); err != nil || ok {
		return ""
	}
	return holderOf(name)
}

// release gives the lock back. The file stays: removing it would let two
// programs lock two files of one name.
func (l *portLock) release() {
	if l != nil {
		os.Truncate(l.f.Path(), 0)
		l.f.Close()
	}
}
