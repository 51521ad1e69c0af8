package segment

import (
	"errors"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"strings"
)

// OSOptions chooses how the real file system is used.
type OSOptions struct {
	// SyncOnCloseOnly makes Sync and SyncDir do nothing, and Close of a
	// written file sync it: for virtual time, where a simulated year would
	// otherwise wait for tens of thousands of syncs.
	SyncOnCloseOnly bool
}

// OSFS is the FS over a real folder, which no name can leave.
func OSFS(root *os.Root, opts OSOptions) FS { return osFS{root, opts} }

type osFS struct {
	root *os.Root
	opts OSOptions
}

type osFile struct {
	*os.File
	lazy, written bool
}

func (f *osFile) Write(p []byte) (int, error) {
	f.written = true
	return f.File.Write(p)
}

func (f *osFile) Sync() error {
	if f.lazy {
		return nil
	}
	return dataSync(f.File)
}

func (f *osFile) Close() error {
	if f.lazy && f.written {
		if err := dataSync(f.File); err != nil {
			f.File.Close()
			return err
		}
	}
	return f.File.Close()
}

func (o osFS) open(name string, flag int) (File, error) {
	f, err := o.root.OpenFile(filepath.FromSlash(name), flag, 0o644)
	if err != nil {
		return nil, err
	}
	return &osFile{File: f, lazy: o.opts.SyncOnCloseOnly}, nil
}

func (o osFS) Create(name string) (File, error) {
	return o.open(name, os.O_RDWR|os.O_CREATE|os.O_EXCL|os.O_APPEND)
}

func (o osFS) Append(name string) (File, error) {
	return o.open(name, os.O_RDWR|os.O_CREATE|os.O_APPEND)
}

func (o osFS) Open(name string) (File, error) { return o.open(name, os.O_RDONLY) }

func (o osFS) Rename(from, to string) error {
	return o.root.Rename(filepath.FromSlash(from), filepath.FromSlash(to))
}

func (o osFS) Remove(name string) error { return o.root.Remove(filepath.FromSlash(name)) }

func (o osFS) ReadDir(dir string) ([]fs.DirEntry, error) {
	f, err := o.root.Open(filepath.FromSlash(dir))
	if err != nil {
		return nil, err
	}
	defer f.Close()
	entries, err := f.ReadDir(-1)
	if err != nil {
		return nil, err
	}
	sortEntries(entries)
	return entries, nil
}

func (o osFS) MkdirAll(dir string) error { return o.root.MkdirAll(filepath.FromSlash(dir), 0o775) }

func (o osFS) SyncDir(dir string) error {
	if o.opts.SyncOnCloseOnly {
		return nil
	}
	f, err := o.root.Open(filepath.FromSlash(dir))
	if err != nil {
		return err
	}
	defer f.Close()
	return syncFolder(f)
}

// readDirIfAny lists dir, sorted; a missing one is empty.
func readDirIfAny(fsys FS, dir string) ([]fs.DirEntry, error) {
	entries, err := fsys.ReadDir(dir)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, nil
	}
	return entries, err
}

// readFull reads exactly len(p) bytes at off.
func readFull(f io.ReaderAt, p []byte, off int64) error {
	n, err := f.ReadAt(p, off)
	if n == len(p) {
		return nil
	}
	if err == nil || err == io.EOF {
		return io.ErrUnexpectedEOF
	}
	return err
}

func sortEntries(entries []fs.DirEntry) {
	slices.SortFunc(entries, func(a, b fs.DirEntry) int { return strings.Compare(a.Name(), b.Name()) })
}
