package segment

import (
	"fmt"
	"hash/crc32"
	"io"
	"io/fs"
	"os"
	"path"
)

// Log appends to marks.lp or events.lp. Each Append is one write: a header
// where one is needed, the lines, and their checkpoint; it returns when they
// are on disk. Several processes may each have a Log on one file if all hold
// one lock during Append. An unfinished tail that another process (or an error)
// left is never parsed nor cut off: the next header says how long it is.
type Log struct {
	fsys   FS
	name   string
	header Header

	// good is where the last valid comment ends; chain and block continue it.
	good  int64
	chain uint32
	block int64
	// last is the header in force at good, nil where there is none.
	last *header
	// file is what the last Append saw of the file, to know it again.
	file fs.FileInfo
	// failed is where the file may end at most if nobody wrote behind an Append
	// of ours that failed; 0 where the last one succeeded.
	failed int64
	enc    lineEncoder
	buf    []byte
}

// Entry is one line for a Log.
type Entry struct {
	Point *Point
	Time  int64 // ns since 1970 UTC
}

// OpenLog prepares to append to name in the run folder; the file is made by
// the first Append. Header.Kind is filled in from the name.
func OpenLog(fs FS, name string, h Header) (*Log, error) {
	h.Kind = path.Base(name)
	if ext := path.Ext(h.Kind); ext != "" {
		h.Kind = h.Kind[:len(h.Kind)-len(ext)]
	}
	h.Number, h.Torn, h.Suspect = 0, 0, nil
	if err := h.check(); err != nil {
		return nil, err
	}
	return &Log{fsys: fs, name: name, header: h}, nil
}

// Append writes entries and returns when they are on disk, with the state of
// the clock at their writing (Given where a person typed their instants).
// Equal stamps within one Append of one series are raised by a nanosecond. The
// caller holds the lock. After an error the entries are not in the log; Append
// may be called again.
func (l *Log) Append(clock ClockState, entries ...Entry) error {
	if len(entries) == 0 {
		return nil
	}
	f, err := l.fsys.Append(l.name)
	if err != nil {
		return &WriteError{l.name, "create", l.good, err}
	}
	before := *l
	err = l.append(f, clock, entries)
	if cerr := f.Close(); err == nil && cerr != nil {
		// A file may be synced by its closing: then nothing of it counts.
		after := l.good
		l.good, l.chain, l.block, l.last, l.failed = before.good, before.chain, before.block, before.last, after
		err = &WriteError{l.name, "close", l.good, cerr}
	}
	return err
}

func (l *Log) append(f File, clock ClockState, entries []Entry) error {
	info, err := f.Stat()
	if err != nil {
		return &WriteError{l.name, "stat", l.good, err}
	}
	size := info.Size()
	if replaced := l.file != nil && l.file.Sys() != nil && !os.SameFile(l.file, info); replaced || size < l.good {
		// Somebody put another file there, or cut it. What stands in it now
		// counts; refusing would end the recording for the sake of its log.
		l.good, l.chain, l.block, l.last, l.failed = 0, 0, 0, nil, 0
	}
	l.file = info
	if err := l.catchUp(f, size); err != nil {
		return err
	}
	b := l.buf[:0]
	chain, headed := l.chain, l.last
	torn := size - l.good
	if torn > 0 {
		b = append(b, '\n')
	}
	if torn > 0 || headed == nil || headed.Boot != l.header.Boot || headed.Run != l.header.Run || headed.Rig != l.header.Rig {
		h := header{Header: l.header, after: chain}
		h.Clock = clock
		if h.Torn = torn; torn > 0 {
			h.Torn++
		}
		b = h.append(b)
		chain, headed = h.self, &h
	}
	start := len(b)
	c := checkpoint{block: l.block + 1, clock: clock, after: chain}
	l.enc.stamps = new(Stamps)
	for _, e := range entries {
		var t int64
		if b, t, err = l.enc.point(b, e.Point, e.Time); err != nil {
			return err
		}
		l.enc.stamps.took(e.Point.Measurement, seriesName(e.Point), t)
		if c.lines == 0 || t < c.first {
			c.first = t
		}
		if c.lines == 0 || t > c.last {
			c.last = t
		}
		c.lines++
	}
	if c.length = int64(len(b) - start); c.length > MaxBlock {
		return ErrBlockFull
	}
	c.crc = crc32.Update(chain, castagnoli, b[start:])
	b = c.append(b)
	l.buf = b
	if err := l.put(f, size, b); err != nil {
		l.failed = size + int64(len(b))
		return err
	}
	l.good, l.chain, l.block, l.last = size+int64(len(b)), c.self, c.block, headed
	return nil
}

func (l *Log) put(f File, size int64, b []byte) error {
	if _, err := f.Write(b); err != nil {
		return &WriteError{l.name, "write", l.good, err}
	}
	if err := f.Sync(); err != nil {
		return &WriteError{l.name, "sync", l.good, err}
	}
	if l.good == 0 {
		if err := l.fsys.SyncDir(path.Dir(l.name)); err != nil {
			return &WriteError{l.name, "sync-dir", l.good, err}
		}
	}
	return nil
}

// catchUp takes in what other processes appended since the last look. What a
// failed Append of this Log left is skipped, unless another process has already
// judged it and gone on.
func (l *Log) catchUp(f File, size int64) error {
	if mine := l.failed; mine > 0 {
		l.failed = 0
		if size <= mine {
			return nil
		}
	}
	if size == l.good {
		return nil // nobody else wrote, as nearly always
	}
	s := splitter{r: io.NewSectionReader(f, l.good, size-l.good), about: chunkSize, size: size - l.good}
	base := l.good
	for {
		at := base + s.off
		chunk, final, err := s.next(nil)
		if err != nil {
			return fmt.Errorf("%s: %w", l.name, err)
		}
		for _, it := range splitBlocks(chunk, nil) {
			switch it.kind {
			case itemHeader:
				h := it.h
				l.last, l.chain, l.good = &h, h.self, at+int64(it.to)
			case itemBlock:
				l.chain, l.block, l.good = it.c.self, it.c.block, at+int64(it.to)
			}
		}
		if final {
			return nil
		}
	}
}
