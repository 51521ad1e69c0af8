package ingest

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"time"

	"github.com/gofrs/flock"

	"gaugelog/ingest/segment"
)

// Names of the lock files in a run folder. They hold no data: the first names
// the recorder that has the run, and is empty when none has.
const (
	runLockName   = ".recorder.lock"
	marksLockName = ".marks.lock"
)

// marksLockWait is how long a mark waits for another one's lock.
const marksLockWait = 10 * time.Second

// HeldError says that another recorder has the run.
type HeldError struct {
	// Holder is what that recorder said of itself; empty where it said nothing.
	Holder string
}

func (e *HeldError) Error() string {
	who := e.Holder
	if who == "" {
		who = "another recorder"
	}
	return "this run is being recorded by " + who + "\nmend: end that one first, or record into another folder"
}

// Dir is a run folder on a real disk.
type Dir struct {
	path string
	root *os.Root
	fs   segment.FS
}

// DirOptions chooses how a run folder is opened.
type DirOptions struct {
	// Create makes the folder, and those above it, where they are missing.
	Create bool
	// Virtual leaves syncing to the closing of files, for virtual time.
	Virtual bool
}

// OpenDir opens the run folder at path.
func OpenDir(path string, o DirOptions) (*Dir, error) {
	if o.Create {
		// As open to the group as the umask lets it be: a service sets that so that
		// technicians can enter marks.
		if err := os.MkdirAll(path, 0o775); err != nil {
			return nil, err
		}
	}
	root, err := os.OpenRoot(path)
	if err != nil {
		return nil, err
	}
	d := &Dir{path: path, root: root, fs: segment.OSFS(root, segment.OSOptions{SyncOnCloseOnly: o.Virtual})}
	return d, nil
}

// FS is the folder's file system, which no name can leave.
func (d *Dir) FS() segment.FS { return d.fs }

// Path is the path it was opened by.
func (d *Dir) Path() string { return d.path }

// Close lets go of the folder. A recorder in it must have been closed.
func (d *Dir) Close() error { return d.root.Close() }

// Lock returns the function that [Options.Lock] wants: it takes the kernel's
// lock of the run, which a crash gives back, and leaves holder's words for
// whoever is refused. With an empty holder nothing is written.
func (d *Dir) Lock(holder string) func() (func() error, error) {
	return func() (func() error, error) {
		path := filepath.Join(d.path, runLockName)
		lock := flock.New(path, flock.SetFlag(os.O_CREATE|os.O_RDWR), flock.SetPermissions(0o644))
		got, err := lock.TryLock()
		if err != nil {
			return nil, fmt.Errorf("locking the run folder: %w", err)
		}
		if !got {
			said, _ := os.ReadFile(path) // refused on some systems; then nobody is named
			return nil, errors.Join(&HeldError{Holder: strings.TrimSpace(string(said))}, lock.Close())
		}
		if holder != "" {
			writeHolder(path, holder+"\n")
		}
		d.shareWithGroup(runLockName)
		return func() error {
			if holder != "" {
				writeHolder(path, "")
			}
			return lock.Close()
		}, nil
	}
}

// writeHolder leaves the holder's words beside the lock. They are a courtesy:
// on a full disk, or where a locked file cannot be written, nobody is named.
func writeHolder(path, text string) { _ = os.WriteFile(path, []byte(text), 0o644) }

// Holder says who is recording into the folder; running is false where nobody is.
func (d *Dir) Holder() (holder string, running bool, err error) {
	unlock, err := d.Lock("")()
	var held *HeldError
	if errors.As(err, &held) {
		return held.Holder, true, nil
	}
	if err != nil {
		return "", false, err
	}
	return "", false, unlock()
}

// AppendMark enters a mark under the marks lock, from whatever process, and
// returns its id when it is on disk. Where the run has ended, SHA256SUMS is
// brought up to date.
func (d *Dir) AppendMark(m Mark, clock Clock) (string, error) {
	ctx, cancel := context.WithTimeout(context.Background(), marksLockWait)
	defer cancel()
	lock := flock.New(filepath.Join(d.path, marksLockName), flock.SetPermissions(0o644))
	got, err := lock.TryLockContext(ctx, 20*time.Millisecond)
	if err != nil && !errors.Is(err, context.DeadlineExceeded) {
		return "", errors.Join(fmt.Errorf("locking the marks of %s: %w", d.path, err), lock.Close())
	}
	if err != nil || !got {
		return "", errors.Join(fmt.Errorf("another mark has been holding the lock for %s: %w", marksLockWait, err), lock.Close())
	}
	defer lock.Close()
	d.shareWithGroup(marksLockName)
	// The state before the time: a clock set in between must not make a time of
	// before its setting count as one of after it.
	state := clock.State()
	id, err := AppendMark(d.fs, m, clock.Now(), state)
	d.shareWithGroup(marksName)
	if err != nil {
		return "", err
	}
	return id, d.renewMarksSum()
}

// renewMarksSum brings the sum of the marks file up to date where it stands in
// SHA256SUMS, which it does once the run has ended.
func (d *Dir) renewMarksSum() error {
	known, err := segment.ReadSums(d.fs)
	if err != nil {
		return err
	}
	if _, ended := known[marksName]; !ended {
		return nil
	}
	unlock, err := d.Lock("")()
	var held *HeldError
	if errors.As(err, &held) {
		return nil // a recorder goes on with the run; it sees to the sums
	}
	if err != nil {
		return err
	}
	return errors.Join(segment.UpdateSums(d.fs, marksName), unlock())
}

// DiskFree is the free space on the folder's disk, in bytes.
func (d *Dir) DiskFree() (int64, error) { return diskFree(d.path) }

// shareWithGroup lets the folder's group write a file where it may write the
// folder, so that a mark can be entered from another user's shell. A file of
// another user is left as it is.
func (d *Dir) shareWithGroup(name string) {
	info, err := d.root.Stat(".")
	if err != nil || info.Mode()&0o020 == 0 {
		return
	}
	file, err := d.root.Stat(name)
	if err != nil || file.Mode()&0o060 == 0o060 {
		return
	}
	_ = d.root.Chmod(name, file.Mode().Perm()|(info.Mode()&fs.ModePerm&0o060))
}
