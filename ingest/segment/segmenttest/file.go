package segmenttest

import (
	"fmt"
	"io"
	"io/fs"
	"path"
	"slices"
	"time"
)

type file struct {
	fs     *FS
	name   string
	node   *node
	writes bool
	closed bool
}

// Write appends. A failing write leaves half of p in the file, as a full disk
// does.
func (f *file) Write(p []byte) (int, error) {
	f.fs.mu.Lock()
	defer f.fs.mu.Unlock()
	if f.closed || !f.writes {
		return 0, &fs.PathError{Op: "write", Path: f.name, Err: fs.ErrClosed}
	}
	if err := f.fs.call("write", f.name); err != nil {
		n := len(p) / 2
		f.node.data = append(f.node.data, p[:n]...)
		return n, err
	}
	f.node.data = append(f.node.data, p...)
	return len(p), nil
}

func (f *file) ReadAt(p []byte, off int64) (int, error) {
	f.fs.mu.Lock()
	defer f.fs.mu.Unlock()
	if err := f.fs.call("read", f.name); err != nil {
		return 0, err
	}
	if off >= int64(len(f.node.data)) {
		return 0, io.EOF
	}
	n := copy(p, f.node.data[off:])
	if n < len(p) {
		return n, io.EOF
	}
	return n, nil
}

// Sync makes the bytes durable. What a failing Sync covered never becomes so,
// even if a later one succeeds: the system has dropped it.
func (f *file) Sync() error {
	f.fs.mu.Lock()
	defer f.fs.mu.Unlock()
	n := f.node
	if err := f.fs.call("sync", f.name); err != nil {
		n.lost = append(n.lost, [2]int{len(n.synced), len(n.data)})
		return err
	}
	// Bytes are only ever appended, so that those here now stay as they are.
	n.synced = n.data[:len(n.data):len(n.data)]
	if len(n.lost) > 0 {
		n.synced = slices.Clone(n.synced)
	}
	for _, l := range n.lost {
		clear(n.synced[l[0]:l[1]])
	}
	return nil
}

func (f *file) Close() error {
	f.fs.mu.Lock()
	defer f.fs.mu.Unlock()
	if f.closed {
		return fmt.Errorf("%s: %w", f.name, fs.ErrClosed)
	}
	f.closed = true
	return f.fs.call("close", f.name)
}

func (f *file) Stat() (fs.FileInfo, error) {
	f.fs.mu.Lock()
	defer f.fs.mu.Unlock()
	if err := f.fs.call("stat", f.name); err != nil {
		return nil, err
	}
	return info{path.Base(f.name), int64(len(f.node.data)), false}, nil
}

type info struct {
	name string
	size int64
	dir  bool
}

func (i info) Name() string       { return i.name }
func (i info) Size() int64        { return i.size }
func (i info) ModTime() time.Time { return time.Time{} }
func (i info) IsDir() bool        { return i.dir }
func (i info) Sys() any           { return nil }
func (i info) Mode() fs.FileMode {
	if i.dir {
		return fs.ModeDir | 0o755
	}
	return 0o644
}
