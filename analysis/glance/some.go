package glance

import (
	"errors"
	"io/fs"
	"math"
	"path"
	"slices"
	"sort"
	"strings"

	"gaugelog/ingest/segment"
)

// some shows a run folder with some of its segments only.
type some struct {
	segment.FS
	names names
}

// ReadDir lists the segments shown.
func (s some) ReadDir(dir string) ([]fs.DirEntry, error) {
	all, err := s.FS.ReadDir(dir)
	if err != nil || dir != segment.ReadingsDir {
		return all, err
	}
	return slices.DeleteFunc(slices.Clone(all), func(e fs.DirEntry) bool { return !slices.Contains(s.names, plain(e.Name())) }), nil
}

// names are segments by their names without .zst, in order.
type names []string

func plain(name string) string { return strings.TrimSuffix(name, ".zst") }

// segmentsOf lists all segments of a run.
func segmentsOf(fsys segment.FS) (names, error) {
	entries, err := fsys.ReadDir(segment.ReadingsDir)
	if err != nil && !errors.Is(err, fs.ErrNotExist) {
		return nil, err
	}
	var all names
	for _, e := range entries {
		all = append(all, plain(e.Name()))
	}
	slices.Sort(all)
	return slices.Compact(all), nil
}

// ends are the first segment and the last two.
func (n names) ends() names {
	if len(n) <= 3 {
		return n
	}
	return append(slices.Clone(n[:1]), n[len(n)-2:]...)
}

// with opens the ends and the segments that hold some instants; d are the ends.
func (n names) with(fsys segment.FS, d *segment.Folder, instants ...int64) (*segment.Folder, error) {
	if len(n) <= 3 {
		return d, nil
	}
	want, have := n.ends(), len(n.ends())
	begun := map[string]int64{} // each is looked at once
	for _, s := range d.Starts() {
		begun[plain(path.Base(s.Name))] = s.Time
	}
	for _, at := range instants {
		i, err := n.holding(fsys, d, at, begun)
		if err != nil {
			return nil, err
		}
		if !slices.Contains(want, n[i]) {
			want = append(want, n[i])
		}
	}
	if len(want) == have {
		return d, nil
	}
	return segment.OpenFolder(some{fsys, want})
}

// holding is the last segment that begins at an instant or before it, or the
// first. Segments begin in order of time; a few are looked at, whatever their
// number.
func (n names) holding(fsys segment.FS, d *segment.Folder, at int64, begun map[string]int64) (i int, err error) {
	i = sort.Search(len(n), func(i int) bool {
		t, known := begun[n[i]]
		if !known && err == nil {
			t, err = begins(fsys, d, n[i])
			begun[n[i]] = t
		}
		return t > at
	})
	return max(0, i-1), err
}

// begins is when a segment begins; a foreign one's readings tell.
func begins(fsys segment.FS, d *segment.Folder, name string) (int64, error) {
	if s, ok := d.StartOf(name); ok {
		return s.Time, nil
	}
	one, err := segment.OpenFolder(some{fsys, names{name}})
	if err != nil {
		return 0, err
	}
	first, _, ok := one.Span()
	if !ok {
		first = math.MinInt64
	}
	return first, nil
}
