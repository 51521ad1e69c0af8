package segment

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
)

// MakeFolder makes the folder into, which must not exist (else the error is
// fs.ErrExist), and lets fill lay its files: all of it appears at once, under
// its name, or after an error nothing does.
func MakeFolder(into string, fill func(FS) error) (err error) {
	into = filepath.Clean(into)
	if _, err := os.Lstat(into); err == nil {
		return fmt.Errorf("%s: %w", into, fs.ErrExist)
	}
	if err := os.MkdirAll(filepath.Dir(into), 0o755); err != nil {
		return err
	}
	work, err := os.MkdirTemp(filepath.Dir(into), ".making-*")
	if err != nil {
		return err
	}
	defer func() {
		if err != nil {
			err = errors.Join(err, os.RemoveAll(work))
		}
	}()
	if err := os.Chmod(work, 0o755); err != nil {
		return err
	}
	root, err := os.OpenRoot(work)
	if err != nil {
		return err
	}
	if err := errors.Join(fill(OSFS(root, OSOptions{SyncOnCloseOnly: true})), root.Close()); err != nil {
		return err
	}
	return os.Rename(work, into)
}
