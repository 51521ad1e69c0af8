package ingest

import (
	"errors"
	"fmt"
	"io"

	"gaugelog/ingest/segment"
)

// writeNew makes a file, durable with its name in dir. It appears whole or not
// at all: a power cut may leave any bytes in a file that was being written.
func writeNew(fsys segment.FS, dir, name string, text []byte) error {
	partial := name + ".partial"
	if exists(fsys, partial) {
		if err := fsys.Remove(partial); err != nil {
			return fmt.Errorf("writing %s: %w", name, err)
		}
	}
	f, err := fsys.Create(partial)
	if err != nil {
		return err
	}
	_, err = f.Write(text)
	if err == nil {
		err = f.Sync()
	}
	if cerr := f.Close(); err == nil {
		err = cerr
	}
	if err == nil {
		err = fsys.Rename(partial, name)
	}
	if err == nil {
		err = fsys.SyncDir(dir)
	}
	if err != nil {
		return fmt.Errorf("writing %s: %w", name, err)
	}
	return nil
}

func openSized(fsys segment.FS, name string) (segment.File, int64, error) {
	f, err := fsys.Open(name)
	if err != nil {
		return nil, 0, err
	}
	info, err := f.Stat()
	if err != nil {
		f.Close()
		return nil, 0, err
	}
	return f, info.Size(), nil
}

func readAll(fsys segment.FS, name string) ([]byte, error) {
	f, size, err := openSized(fsys, name)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	text := make([]byte, size)
	n, err := f.ReadAt(text, 0)
	if err != nil && !errors.Is(err, io.EOF) {
		return nil, fmt.Errorf("reading %s: %w", name, err)
	}
	return text[:n], nil
}
