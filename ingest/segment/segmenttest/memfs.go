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
	"io/fs"
	"path"
	"slices"
	"strings"
	"sync"

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
