package glance

import (
	"errors"
	"io/fs"
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
	for _, at := range instants {
		i, err := n.holding(fsys, at)
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
// first. Segments begin in order of time; a few are opened, whatever their
// number.
func (n names) holding(fsys segment.FS, at int64) (i int, err error) {
	i = sort.Search(len(n), func(i int) bool {
		d, openErr := segment.OpenFolder(some{fsys, n[i : i+1]})
		if openErr != nil {
			err = openErr
			return true
		}
		if begun := d.Starts(); len(begun) == 1 {
			return begun[0].Time > at
		}
		first, _, ok := d.Span()
		return ok && first > at
	})
	return max(0, i-1), err
}
