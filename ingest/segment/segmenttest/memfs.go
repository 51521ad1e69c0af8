// Package segmenttest is a file system in memory for tests of everything that
// writes a run folder. It forgets what was not synced, in the ways a power cut
// does, and fails any call it is told to.
//
// It promises that a crash keeps exactly what the rules of POSIX promise and a
// random part of the rest: data by Sync of the file, names by SyncDir of the
// folder, and that what a failed Sync covered never becomes durable.
package segmenttest

import (
	"errors"
	"fmt"
	"io"
	"io/fs"
	"math/rand/v2"
	"path"
	"slices"
	"strings"
	"sync"
	"time"

	"gaugelog/ingest/segment"
)

// node is one file's bytes.
type node struct {
	data   []byte
	synced []byte // what a crash keeps for certain
	lost   [][2]int
}

// nameOp is a change of names that no SyncDir made durable yet.
type nameOp struct {
	dirs     []string
	from, to string // create: from ""; remove: to ""
	node     *node
}

// FS is the file system. All methods may be called at once.
type FS struct {
	mu      sync.Mutex
	names   map[string]*node
	durable map[string]*node
	dirs    map[string]bool
	pending []nameOp

	calls int
	fail  *Failure
}

// Failure says which calls fail.
type Failure struct {
	// At is the number of the first call to fail, from 1.
	At int
	// Only, where not empty, counts and fails calls of these kinds alone:
	// create, append, open, rename, remove, readdir, mkdir, syncdir, write,
	// read, sync, close, stat.
	Only []string
	// Name, where not empty, counts and fails calls on that file alone.
	Name string
	// Persistent fails all later calls (of those kinds) too.
	Persistent bool
	// Err is what they return.
	Err error
}

// ErrInjected is a fault of no particular kind.
var ErrInjected = errors.New("injected fault")

// New returns an empty file system.
func New() *FS {
	return &FS{names: map[string]*node{}, durable: map[string]*node{}, dirs: map[string]bool{".": true}}
}

// Inject makes calls fail from now on; it starts the count anew. nil stops it.
func (m *FS) Inject(f *Failure) {
	m.mu.Lock()
	defer m.mu.Unlock()
	m.fail, m.calls = f, 0
}

// Calls counts the calls (of the kinds that count) since Inject.
func (m *FS) Calls() int {
	m.mu.Lock()
	defer m.mu.Unlock()
	return m.calls
}

// call counts one call and says whether it fails. The lock is held.
func (m *FS) call(kind, name string) error {
	if m.fail != nil && len(m.fail.Only) > 0 && !slices.Contains(m.fail.Only, kind) {
		return nil
	}
	if m.fail != nil && m.fail.Name != "" && m.fail.Name != name {
		return nil
	}
	m.calls++
	if f := m.fail; f != nil && f.At > 0 && (m.calls == f.At || f.Persistent && m.calls > f.At) {
		return &fs.PathError{Op: kind, Path: name, Err: f.Err}
	}
	return nil
}

// Crash returns a file system as a power cut at this moment could leave it.
// With keep, all unsynced bytes and names survive (as when only the process was
// killed); otherwise a random part does, cut, with zeros or old bytes in it.
func (m *FS) Crash(rng *rand.Rand, keep bool) *FS {
	m.mu.Lock()
	defer m.mu.Unlock()
	c := New()
	for d := range m.dirs {
		c.dirs[d] = true
	}
	names := make(map[string]*node, len(m.names))
	for n, f := range m.durable {
		names[n] = f
	}
	// Half of the crashes keep names in the order of their changes, as a
	// journal does; the others any of them, as POSIX allows.
	ops, any := len(m.pending), false
	if !keep {
		ops, any = rng.IntN(ops+1), rng.IntN(2) == 0
	}
	for i, op := range m.pending {
		if any && rng.IntN(2) == 0 || !any && i < ops {
			op.apply(names)
		}
	}
	for _, n := range slices.Sorted(func(yield func(string) bool) {
		for n := range names {
			if !yield(n) {
				return
			}
		}
	}) {
		data := names[n].crash(rng, keep)
		c.names[n] = &node{data: data, synced: slices.Clone(data)}
		c.durable[n] = c.names[n]
	}
	return c
}

func (op nameOp) apply(names map[string]*node) {
	if op.from != "" {
		delete(names, op.from)
	}
	if op.to != "" {
		names[op.to] = op.node
	}
}

// crash returns bytes that a power cut could leave: the synced ones, and of the
// rest nothing, a prefix, or a prefix with a stretch of zeros in it.
func (n *node) crash(rng *rand.Rand, keep bool) []byte {
	if keep {
		return slices.Clone(n.data)
	}
	out := slices.Clone(n.synced)
	more := len(n.data) - len(out)
	if more <= 0 {
		return out
	}
	start := len(out)
	out = append(out, n.data[start:start+rng.IntN(more+1)]...)
	if len(out) > start && rng.IntN(2) == 0 {
		from := start + rng.IntN(len(out)-start)
		to := from + rng.IntN(len(out)-from+1)
		clear(out[from:to])
	}
	return out
}

// Bytes returns a file's bytes, nil where it does not exist.
func (m *FS) Bytes(name string) []byte {
	m.mu.Lock()
	defer m.mu.Unlock()
	if n := m.names[name]; n != nil {
		return slices.Clone(n.data)
	}
	return nil
}

// Put makes or replaces a file, durable at once.
func (m *FS) Put(name string, data []byte) {
	m.mu.Lock()
	defer m.mu.Unlock()
	n := &node{data: slices.Clone(data), synced: slices.Clone(data)}
	m.names[name], m.durable[name] = n, n
	for d := path.Dir(name); d != "."; d = path.Dir(d) {
		m.dirs[d] = true
	}
}

// Names lists all files in order.
func (m *FS) Names() []string {
	m.mu.Lock()
	defer m.mu.Unlock()
	var out []string
	for n := range m.names {
		out = append(out, n)
	}
	slices.Sort(out)
	return out
}

func missing(op, name string) error { return &fs.PathError{Op: op, Path: name, Err: fs.ErrNotExist} }

func (m *FS) change(op nameOp) {
	op.apply(m.names)
	m.pending = append(m.pending, op)
}

// Create implements segment.FS.
func (m *FS) Create(name string) (segment.File, error) {
	m.mu.Lock()
	defer m.mu.Unlock()
	if err := m.call("create", name); err != nil {
		return nil, err
	}
	if m.names[name] != nil {
		return nil, &fs.PathError{Op: "create", Path: name, Err: fs.ErrExist}
	}
	return m.make(name)
}

func (m *FS) make(name string) (segment.File, error) {
	if !m.dirs[path.Dir(name)] {
		return nil, missing("create", name)
	}
	n := new(node)
	m.change(nameOp{dirs: []string{path.Dir(name)}, to: name, node: n})
	return &file{fs: m, name: name, node: n, writes: true}, nil
}

// Append implements segment.FS.
func (m *FS) Append(name string) (segment.File, error) {
	m.mu.Lock()
	defer m.mu.Unlock()
	if err := m.call("append", name); err != nil {
		return nil, err
	}
	if n := m.names[name]; n != nil {
		return &file{fs: m, name: name, node: n, writes: true}, nil
	}
	return m.make(name)
}

// Open implements segment.FS.
func (m *FS) Open(name string) (segment.File, error) {
	m.mu.Lock()
	defer m.mu.Unlock()
	if err := m.call("open", name); err != nil {
		return nil, err
	}
	n := m.names[name]
	if n == nil {
		return nil, missing("open", name)
	}
	return &file{fs: m, name: name, node: n}, nil
}

// Rename implements segment.FS.
func (m *FS) Rename(from, to string) error {
	m.mu.Lock()
	defer m.mu.Unlock()
	if err := m.call("rename", from); err != nil {
		return err
	}
	n := m.names[from]
	if n == nil {
		return missing("rename", from)
	}
	m.change(nameOp{dirs: []string{path.Dir(from), path.Dir(to)}, from: from, to: to, node: n})
	return nil
}

// Remove implements segment.FS.
func (m *FS) Remove(name string) error {
	m.mu.Lock()
	defer m.mu.Unlock()
	if err := m.call("remove", name); err != nil {
		return err
	}
	if m.names[name] == nil {
		return missing("remove", name)
	}
	m.change(nameOp{dirs: []string{path.Dir(name)}, from: name})
	return nil
}

// MkdirAll implements segment.FS. Folders are durable at once.
func (m *FS) MkdirAll(dir string) error {
	m.mu.Lock()
	defer m.mu.Unlock()
	if err := m.call("mkdir", dir); err != nil {
		return err
	}
	for ; dir != "."; dir = path.Dir(dir) {
		m.dirs[dir] = true
	}
	return nil
}

// SyncDir implements segment.FS.
func (m *FS) SyncDir(dir string) error {
	m.mu.Lock()
	defer m.mu.Unlock()
	if err := m.call("syncdir", dir); err != nil {
		return err
	}
	// What a name was before counts with it: a file that was renamed out of a
	// folder does not come back when that one is synced.
	done := make([]bool, len(m.pending))
	before := map[string]bool{}
	for i, op := range slices.Backward(m.pending) {
		done[i] = slices.Contains(op.dirs, dir) || before[op.to]
		if done[i] && op.from != "" {
			before[op.from] = true
		}
	}
	var rest []nameOp
	for i, op := range m.pending {
		if done[i] {
			op.apply(m.durable)
		} else {
			rest = append(rest, op)
		}
	}
	m.pending = rest
	return nil
}

// ReadDir implements segment.FS.
func (m *FS) ReadDir(dir string) ([]fs.DirEntry, error) {
	m.mu.Lock()
	defer m.mu.Unlock()
	if err := m.call("readdir", dir); err != nil {
		return nil, err
	}
	if !m.dirs[dir] {
		return nil, missing("readdir", dir)
	}
	var out []fs.DirEntry
	for name, n := range m.names {
		if path.Dir(name) == dir {
			out = append(out, fs.FileInfoToDirEntry(info{path.Base(name), int64(len(n.data)), false}))
		}
	}
	for d := range m.dirs {
		if d != "." && path.Dir(d) == dir {
			out = append(out, fs.FileInfoToDirEntry(info{path.Base(d), 0, true}))
		}
	}
	slices.SortFunc(out, func(a, b fs.DirEntry) int { return strings.Compare(a.Name(), b.Name()) })
	return out, nil
}

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
