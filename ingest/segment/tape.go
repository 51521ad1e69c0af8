package segment

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"math"
	"strings"

	"github.com/klauspost/compress/zstd"
)

// Tape reads one file of a run folder from a place on, stretch by stretch, for
// those that remember how far they came. A place is an offset in the file's
// text, so that it holds when the segment is compressed meanwhile. Not safe for
// use by several goroutines.
type Tape struct {
	file  File
	close func()
	s     splitter
	base  int64 // of the splitter's text
	m     merger
	j     job
	names *interner
	done  bool
}

// ErrNoPlace says that a file cannot be read on from an offset: what was read
// once is not there any more. Begin it anew.
var ErrNoPlace = errors.New("the file does not hold what was read of it before")

// Stretch is what one call of Tape.Next gives: whole blocks.
type Stretch struct {
	*Batch
	// To is the place behind it, the offset to go on from.
	To int64
	// Unset counts lines of a boot whose clock was never set: their instants
	// may be wrong, and may be put right when more of the run is known.
	Unset int64
}

// Names lists the run's segments in order, by the names their plain text has
// or would have.
func (d *Folder) Names() []string {
	var all []string
	for i := range d.files {
		all = append(all, plainName(d.files[i].name))
	}
	return all
}

// RunID is the run's id as the first whole header of a segment says it; empty
// where none does.
func (d *Folder) RunID() string {
	for i := range d.files {
		if d.files[i].headed {
			return d.files[i].header.Run
		}
	}
	return ""
}

func plainName(name string) string { return strings.TrimSuffix(name, ".zst") }

// Tape opens a segment (by a name that Names gives) or a log (MarksFile,
// EventsFile) at an offset that was 0 or the To of a Stretch. A missing file is
// an error that is fs.ErrNotExist; an offset that lies behind no comment of the
// file any more (its end was lost, or was written again elsewhere) is
// ErrNoPlace. The caller must call Close.
func (d *Folder) Tape(name string, offset int64) (*Tape, error) {
	f := &segFile{name: name, limit: -1}
	if name == MarksFile || name == EventsFile {
		if _, err := storedSize(d.fs, name); err != nil {
			return nil, err
		}
		if err := d.look(f); err != nil {
			return nil, err
		}
	} else {
		found := false
		for i := range d.files {
			if plainName(d.files[i].name) == name {
				f, found = &d.files[i], true
			}
		}
		if !found {
			return nil, fmt.Errorf("%s is no segment of the run", name)
		}
	}
	file, err := d.fs.Open(f.name)
	if err != nil {
		return nil, err
	}
	t := &Tape{file: file, close: func() {}, names: newInterner(nil)}
	t.m.init(d, ReadOptions{Workers: 1, From: math.MinInt64, To: math.MaxInt64})
	t.j.file, t.j.frame, t.j.limit = f, &frameInfo{}, math.MaxInt64
	if err := t.seek(f, offset); err != nil {
		t.Close()
		return nil, fmt.Errorf("%s: %w", f.name, err)
	}
	return t, nil
}

func storedSize(fs FS, name string) (int64, error) {
	file, err := fs.Open(name)
	if err != nil {
		return 0, err
	}
	defer file.Close()
	info, err := file.Stat()
	if err != nil {
		return 0, err
	}
	return info.Size(), nil
}

// seek goes to the offset, and takes the clock's state from the comment before.
func (t *Tape) seek(f *segFile, offset int64) error {
	lead := min(offset, maxComment)
	text, err := t.textFrom(f, offset-lead)
	if err != nil {
		return err
	}
	before := make([]byte, lead)
	if _, err := io.ReadFull(text, before); err == io.EOF || err == io.ErrUnexpectedEOF {
		return ErrNoPlace
	} else if err != nil {
		return err
	}
	t.m.boot = f.header.Boot
	if offset > 0 && f.own {
		line, _ := bytes.CutSuffix(before, []byte{'\n'})
		line = line[bytes.LastIndexByte(line, '\n')+1:]
		if c, ok := parseCheckpoint(line); ok {
			t.m.prev, t.m.chain, t.m.chained = &c.clock, c.self, true
		} else if h, err := parseHeader(line); err == nil {
			t.m.boot, t.m.prev, t.m.chain, t.m.chained = h.Boot, &h.Clock, h.self, true
		} else {
			return ErrNoPlace
		}
	}
	t.base = offset
	t.s = splitter{r: text, about: chunkSize, foreign: !f.own}
	return nil
}

// textFrom gives the file's text from a place on; in a compressed segment with
// an index only the frames from there on are unpacked.
func (t *Tape) textFrom(f *segFile, at int64) (io.Reader, error) {
	info, err := t.file.Stat()
	if err != nil {
		return nil, err
	}
	offset, skip := at, int64(0)
	if f.compressed {
		offset, skip = 0, at
		if f.index != nil {
			for _, fr := range f.index.frames {
				if fr.at <= at {
					offset, skip = fr.offset, at-fr.at
				}
			}
		}
	}
	var text io.Reader = io.NewSectionReader(t.file, offset, max(0, info.Size()-offset))
	if f.compressed {
		dec, err := zstd.NewReader(text, zstd.WithDecoderConcurrency(1), zstd.WithDecoderLowmem(true), zstd.WithDecoderMaxWindow(maxWindow))
		if err != nil {
			return nil, err
		}
		t.close = dec.Close
		text = dec
	}
	if _, err := io.CopyN(io.Discard, text, skip); err != nil && err != io.EOF {
		return nil, err
	}
	if f.limit >= 0 {
		text = io.LimitReader(text, max(0, f.limit-at))
	}
	return text, nil
}

// Next gives the next stretch, valid until the next call; io.EOF where no whole
// block is left. Damage is left out, as a Reader does.
func (t *Tape) Next() (Stretch, error) {
	if t.done {
		return Stretch{}, io.EOF
	}
	j := &t.j
	j.base = t.base + t.s.off
	j.items = j.items[:0]
	j.batch.reset()
	j.text, j.final, j.fail = t.s.next(j.text[:0])
	t.done = j.final
	if j.fail != nil {
		return Stretch{}, fmt.Errorf("%s: %w", j.file.name, j.fail)
	}
	unset := t.unset()
	j.decode(t.names)
	j.names = t.names.names
	end := 0
	for i := range j.items {
		if it := &j.items[i]; it.kind == itemHeader || it.kind == itemBlock {
			end = max(end, it.to)
		}
	}
	if !j.final {
		end = len(j.text)
	}
	t.m.merge(j)
	if end == 0 {
		return Stretch{}, io.EOF
	}
	return Stretch{Batch: &j.batch, To: j.base + int64(end), Unset: t.unset() - unset}, nil
}

func (t *Tape) unset() (n int64) {
	for _, s := range t.m.report.Unset {
		n += s.Lines
	}
	return n
}

// Gauges names the gauges by their numbers in a Batch.
func (t *Tape) Gauges() []string { return t.m.names }

// Sync makes what was read durable, which its writer may not yet have done.
func (t *Tape) Sync() error { return t.file.Sync() }

// Close lets go of the file.
func (t *Tape) Close() error {
	t.close()
	return t.file.Close()
}
