package segment

import (
	"errors"
	"fmt"
	"io/fs"
	"path"
)

// ReadFile returns a whole file, which must fit into memory. Its error names
// the file; that it is missing can be told by fs.ErrNotExist.
func ReadFile(fsys FS, name string) ([]byte, error) {
	f, err := fsys.Open(name)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	info, err := f.Stat()
	if err != nil {
		return nil, fmt.Errorf("reading %s: %w", name, err)
	}
	b := make([]byte, info.Size())
	if err := readFull(f, b, 0); err != nil {
		return nil, fmt.Errorf("reading %s: %w", name, err)
	}
	return b, nil
}

// ReplaceFile makes name hold text, durably and in one step: whatever fails and
// whenever the power does, the file is there whole, as it was or as it is to
// be. What an earlier attempt left beside it under name + ".partial" goes. The
// folder must be there.
func ReplaceFile(fsys FS, name string, text []byte) error {
	partial := name + ".partial"
	if err := fsys.Remove(partial); err != nil && !errors.Is(err, fs.ErrNotExist) {
		return fmt.Errorf("writing %s: %w", name, err)
	}
	err := writeFile(fsys, partial, text)
	if err == nil {
		err = fsys.Rename(partial, name)
	}
	if err != nil {
		_ = fsys.Remove(partial) // what is left of it goes next time
		return fmt.Errorf("writing %s: %w", name, err)
	}
	if err := fsys.SyncDir(path.Dir(name)); err != nil {
		return fmt.Errorf("writing %s: %w", name, err)
	}
	return nil
}

// writeFile makes a file and syncs its bytes.
func writeFile(fsys FS, name string, text []byte) error {
	f, err := fsys.Create(name)
	if err != nil {
		return err
	}
	_, err = f.Write(text)
	if err == nil {
		err = f.Sync()
	}
	return errors.Join(err, f.Close())
}
