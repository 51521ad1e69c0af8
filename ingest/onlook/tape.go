package onlook

import (
	"errors"
	"io"
	"strings"

	"gaugelog/ingest/segment"
)

// tape follows a run's readings: it remembers how far it came, and reads on.
type tape struct {
	fs     segment.FS
	folder *segment.Folder
	list   string // the segments' names when the folder was opened
	at     string // the segment read last
	offset int64  // how far
	size   int64  // of its file at the last look
	run    string
}

// open looks at the folder's segments anew.
func (t *tape) open() (err error) {
	if t.list, err = t.listed(); err != nil {
		return err
	}
	if t.folder, err = segment.OpenFolder(t.fs); err != nil {
		return err
	}
	if id := t.folder.RunID(); id != "" {
		t.run = id
	}
	return nil
}

// listed is the names of the files among the readings, as one text.
func (t *tape) listed() (string, error) {
	entries, err := t.fs.ReadDir(segment.ReadingsDir)
	if err != nil && !notThere(err) {
		return "", err
	}
	var b strings.Builder
	for _, e := range entries {
		b.WriteString(e.Name())
		b.WriteByte('\n')
	}
	return b.String(), nil
}

func (t *tape) names() []string { return t.folder.Names() }

// follow reads what is new and says whether anything was.
func (t *tape) follow(take func(*segment.Record)) (fresh bool, err error) {
	list, err := t.listed()
	if err != nil {
		return false, err
	}
	changed := list != t.list
	if changed {
		if err := t.open(); err != nil {
			return false, err
		}
	}
	size, _, err := stat(t.fs, t.at)
	if !changed && err == nil && size == t.size {
		return false, nil
	}
	t.size = size
	for _, name := range t.rest() {
		from := int64(0)
		if name == t.at {
			from = t.offset
		}
		to, err := t.read(name, from, func(r *segment.Record) { fresh = true; take(r) })
		if errors.Is(err, segment.ErrNoPlace) {
			// Its end was written again elsewhere: go on behind what it holds now.
			to, err = t.read(name, 0, func(*segment.Record) {})
		}
		if err != nil {
			return fresh, err
		}
		t.at, t.offset = name, to
	}
	t.size, _, _ = stat(t.fs, t.at)
	return fresh, nil
}

// rest is the segment read last and those behind it; all where it is gone.
func (t *tape) rest() []string {
	names := t.names()
	for i, n := range names {
		if n == t.at {
			return names[i:]
		}
	}
	return names
}

// read hands over a segment's records from an offset on, and says how far it came.
func (t *tape) read(name string, offset int64, take func(*segment.Record)) (int64, error) {
	tape, err := t.folder.Tape(name, offset)
	if err != nil {
		return offset, err
	}
	defer tape.Close()
	for {
		s, err := tape.Next()
		if errors.Is(err, io.EOF) {
			return offset, nil
		}
		if err != nil {
			return offset, err
		}
		s.Each(tape.Gauges(), func(r segment.Record) bool { take(&r); return true })
		offset = s.To
	}
}
