package ingest

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"maps"
	"slices"
	"strings"

	"gaugelog/ingest/segment"
)

// sumsName is the file that `sha256sum -c` checks.
const sumsName = "SHA256SUMS"

// sums is SHA256SUMS in memory: the hexadecimal SHA-256 of closed files, by
// their slash-separated names within the run folder.
type sums map[string]string

// loadSums reads SHA256SUMS; a missing file is an empty list. Lines that are
// not of the form sha256sum writes are left out: they are made anew.
func loadSums(fsys segment.FS) (sums, error) {
	text, err := readAll(fsys, sumsName)
	if errors.Is(err, fs.ErrNotExist) {
		return sums{}, nil
	}
	if err != nil {
		return nil, err
	}
	s := sums{}
	for line := range strings.Lines(string(text)) {
		sum, name, ok := strings.Cut(strings.TrimRight(line, "\r\n"), "  ")
		if ok && len(sum) == sha256.Size*2 && name != "" {
			s[name] = sum
		}
	}
	return s, nil
}

// add hashes the file as it lies on disk.
func (s sums) add(fsys segment.FS, name string) error {
	f, size, err := openSized(fsys, name)
	if err != nil {
		return err
	}
	defer f.Close()
	h := sha256.New()
	if _, err := io.Copy(h, io.NewSectionReader(f, 0, size)); err != nil {
		return fmt.Errorf("hashing %s: %w", name, err)
	}
	s[name] = hex.EncodeToString(h.Sum(nil))
	return nil
}

// save replaces SHA256SUMS: the new list is whole and synced before it takes
// the old one's name.
func (s sums) save(fsys segment.FS) error {
	var text bytes.Buffer
	for _, name := range slices.Sorted(maps.Keys(s)) {
		fmt.Fprintf(&text, "%s  %s\n", s[name], name)
	}
	return replaceFile(fsys, sumsName, text.Bytes())
}

// writeNew makes a file that must not exist, durable with its name in dir.
func writeNew(fsys segment.FS, dir, name string, text []byte) error {
	f, err := fsys.Create(name)
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
		err = fsys.SyncDir(dir)
	}
	if err != nil {
		return fmt.Errorf("writing %s: %w", name, err)
	}
	return nil
}

// replaceFile puts text in place of a file in the run folder itself.
func replaceFile(fsys segment.FS, name string, text []byte) error {
	fresh := name + ".new"
	if err := fsys.Remove(fresh); err != nil && !errors.Is(err, fs.ErrNotExist) {
		return err
	}
	if err := writeNew(fsys, ".", fresh, text); err != nil {
		return err
	}
	if err := fsys.Rename(fresh, name); err != nil {
		return err
	}
	return fsys.SyncDir(".")
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
