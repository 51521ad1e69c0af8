package segment

import (
	"errors"
	"fmt"
	"hash/crc32"
	"path"
	"strconv"
	"strings"
)

// ReadingsDir is the folder of segments inside a run folder.
const ReadingsDir = "readings"

// WriteError says that a segment failed under its writer. The file must not be
// written to again, nor its Sync be tried again: a system may drop the pages of
// a failed write and report success the next time. Continue takes what was not
// yet synced into a new segment.
type WriteError struct {
	File string
	// Op is what failed: create, write, sync, sync-dir or close.
	Op string
	// Synced is how many bytes of the file are known to be on disk.
	Synced int64
	Err    error
}

func (e *WriteError) Error() string {
	return fmt.Sprintf("%s: %s failed behind byte %d: %v", e.File, e.Op, e.Synced, e.Err)
}

// Unwrap returns the system's error.
func (e *WriteError) Unwrap() error { return e.Err }

// errClosed is what a Writer answers behind Close.
var errClosed = errors.New("the segment is closed")

// WriterOptions is what NewWriter needs to know beside the place.
type WriterOptions struct {
	// Header goes to the top of the file; Kind and Number are filled in.
	Header Header
	// Stamps keeps stamps increasing across segments; nil starts afresh.
	Stamps *Stamps
}

// Writer writes one segment. Lines gather in memory until Checkpoint puts them
// on disk, with one write and one Sync. Not safe for use by several goroutines.
type Writer struct {
	fs     FS
	f      File
	name   string
	number int
	header Header
	enc    lineEncoder
	// buf holds the lines since the last completed Checkpoint.
	buf         []byte
	lines       int64
	first, last int64
	chain       uint32
	block       int64
	size        int64
	synced      bool // the clock, sticky
	err         error
}

// SegmentName is the slash-separated name of a plain segment in dir.
func SegmentName(dir string, number int) string {
	return path.Join(dir, fmt.Sprintf("%06d.lp", number))
}

// segmentNumber reads a name such as 000012.lp or 000012.lp.zst; 0 if it is none.
func segmentNumber(base string) (number int, compressed bool) {
	stem, compressed := strings.CutSuffix(base, ".zst")
	stem, ok := strings.CutSuffix(stem, ".lp")
	if !ok || len(stem) < 6 {
		return 0, compressed
	}
	n, err := strconv.ParseUint(stem, 10, 31)
	if err != nil || fmt.Sprintf("%06d", n) != stem {
		return 0, compressed
	}
	return int(n), compressed
}

// NextNumber returns the number of the next segment in dir: one more than the
// greatest there, 1 where dir is empty or missing.
func NextNumber(fs FS, dir string) (int, error) {
	entries, err := readDirIfAny(fs, dir)
	if err != nil {
		return 0, err
	}
	next := 1
	for _, e := range entries {
		if n, _ := segmentNumber(e.Name()); n >= next {
			next = n + 1
		}
	}
	return next, nil
}

// NewWriter makes segment number in dir (made if missing), writes its header
// and makes file and folder durable. It fails if the segment exists, plain or
// compressed.
func NewWriter(fs FS, dir string, number int, opts WriterOptions) (*Writer, error) {
	w := &Writer{fs: fs, name: SegmentName(dir, number), number: number, header: opts.Header}
	w.header.Kind, w.header.Number = "readings", number
	if number < 1 {
		return nil, fmt.Errorf("segment number %d: numbers start at 1", number)
	}
	if err := w.header.check(); err != nil {
		return nil, err
	}
	w.enc.stamps = opts.Stamps
	if w.enc.stamps == nil {
		w.enc.stamps = new(Stamps)
	}
	if err := fs.MkdirAll(dir); err != nil {
		return nil, &WriteError{w.name, "create", 0, err}
	}
	if f, err := fs.Open(w.name + ".zst"); err == nil {
		f.Close()
		return nil, &WriteError{w.name, "create", 0, errors.New("it exists, compressed")}
	}
	f, err := fs.Create(w.name)
	if err != nil {
		return nil, &WriteError{w.name, "create", 0, err}
	}
	w.f = f
	if err := w.start(dir); err != nil {
		// Nothing of value is in it; leaving it would add one empty file for
		// every try on a full disk.
		f.Close()
		_ = fs.Remove(w.name)
		return nil, err
	}
	return w, nil
}

func (w *Writer) start(dir string) error {
	h := header{Header: w.header}
	text := h.append(nil)
	if _, err := w.f.Write(text); err != nil {
		return &WriteError{w.name, "write", 0, err}
	}
	if err := w.f.Sync(); err != nil {
		return &WriteError{w.name, "sync", 0, err}
	}
	if err := w.fs.SyncDir(dir); err != nil {
		return &WriteError{w.name, "sync-dir", 0, err}
	}
	if err := w.fs.SyncDir(path.Dir(dir)); err != nil {
		return &WriteError{w.name, "sync-dir", 0, err}
	}
	w.chain, w.size, w.synced = h.self, int64(len(text)), h.Clock.Synced
	return nil
}

// Continue starts the next free segment after old failed: its header names old
// as suspect, and its first lines are old's unsynced ones. They are not on disk
// before the next Checkpoint. old is closed and must not be used again.
func Continue(old *Writer, clock ClockState) (*Writer, error) {
	dir := path.Dir(old.name)
	number, err := NextNumber(old.fs, dir)
	if err != nil {
		return nil, err
	}
	h := old.header
	h.Clock = clock
	h.Clock.Synced = clock.Synced || old.synced
	if old.block > 0 {
		// Something of old is on disk, so the suspects it names are settled.
		h.Suspect = nil
	}
	h.Suspect = append(h.Suspect[:len(h.Suspect):len(h.Suspect)], Suspect{old.number, old.size})
	w, err := NewWriter(old.fs, dir, number, WriterOptions{Header: h, Stamps: old.enc.stamps})
	if err != nil {
		return nil, err
	}
	w.buf = append(w.buf, old.buf...)
	w.lines, w.first, w.last = old.lines, old.first, old.last
	if old.f != nil {
		old.f.Close()
		old.f = nil
	}
	if old.err == nil {
		old.err = errClosed
	}
	return w, nil
}

// Indication appends one indication in memory. Its stamp is raised to one
// nanosecond after the gauge's last where it is not later. It allocates
// nothing once the buffers have grown. Errors: ErrClockBack, ErrBlockFull, a
// value or name that cannot be written (nothing is taken in each case), or the
// writer's earlier failure.
func (w *Writer) Indication(in *Shown) error {
	if w.err != nil {
		return w.err
	}
	buf, t, err := w.enc.indication(w.buf, in)
	if err != nil {
		return err
	}
	return w.took(buf, t, "indication", in.Gauge)
}

// Ambient appends one reading of a probe, in degree Celsius and percent; a NaN
// is left out. Errors are those of Indication.
func (w *Writer) Ambient(probe string, celsius, humidityPercent float64, at int64) error {
	if w.err != nil {
		return w.err
	}
	buf, t, err := w.enc.ambient(w.buf, probe, celsius, humidityPercent, at)
	if err != nil {
		return err
	}
	return w.took(buf, t, "ambient", probe)
}

// Append appends any line at the instant at (ns since 1970 UTC). Tags must be
// in order of key. Errors are those of Indication.
func (w *Writer) Append(p *Point, at int64) error {
	if w.err != nil {
		return w.err
	}
	buf, t, err := w.enc.point(w.buf, p, at)
	if err != nil {
		return err
	}
	return w.took(buf, t, p.Measurement, seriesName(p))
}

func (w *Writer) took(buf []byte, t int64, measurement, name string) error {
	if len(buf) > MaxBlock {
		w.buf = buf[:len(w.buf)]
		return ErrBlockFull
	}
	w.buf = buf
	w.enc.stamps.took(measurement, name, t)
	if w.lines == 0 || t < w.first {
		w.first = t
	}
	if w.lines == 0 || t > w.last {
		w.last = t
	}
	w.lines++
	return nil
}

// Checkpoint puts what was appended, and its checkpoint comment, on disk: one
// write and one Sync. clock must be of the instant of the last lines, before
// any step of the wall clock: call it before appending lines stamped after one.
// On an error (a *WriteError) the segment has failed for good; see Continue.
func (w *Writer) Checkpoint(clock ClockState) error {
	if w.err != nil {
		return w.err
	}
	return w.put(clock, false)
}

// Close seals the segment: a last checkpoint, said twice, and no more lines.
// The file is closed whatever happens; the error is that of Checkpoint.
func (w *Writer) Close(clock ClockState) error {
	err := w.err
	if err == nil {
		err = w.put(clock, true)
	}
	if w.f != nil {
		if cerr := w.f.Close(); err == nil && cerr != nil {
			err = &WriteError{w.name, "close", w.size, cerr}
		}
		w.f = nil
	}
	if w.err == nil {
		w.err = errClosed
	}
	if errors.Is(err, errClosed) {
		return nil
	}
	return err
}

func (w *Writer) put(clock ClockState, end bool) error {
	w.synced = w.synced || clock.Synced
	clock.Synced = w.synced
	c := checkpoint{
		block: w.block + 1, lines: w.lines, length: int64(len(w.buf)),
		crc: crc32.Update(w.chain, castagnoli, w.buf), first: w.first, last: w.last,
		clock: clock, end: end, after: w.chain,
	}
	lines := len(w.buf)
	w.buf = c.append(w.buf)
	if end {
		_, text := c.closing()
		w.buf = append(w.buf, text...)
	}
	written := len(w.buf)
	_, err := w.f.Write(w.buf)
	w.buf = w.buf[:lines]
	if err != nil {
		w.err = &WriteError{w.name, "write", w.size, err}
		return w.err
	}
	if err := w.f.Sync(); err != nil {
		w.err = &WriteError{w.name, "sync", w.size, err}
		return w.err
	}
	w.size += int64(written)
	w.block, w.chain = c.block, c.self
	w.buf, w.lines, w.first, w.last = w.buf[:0], 0, 0, 0
	return nil
}

// Unsynced returns the whole lines that no completed Checkpoint covers. The
// slice is valid until the next call of any method.
func (w *Writer) Unsynced() []byte { return w.buf }

// UnsyncedLines counts them.
func (w *Writer) UnsyncedLines() int64 { return w.lines }

// Size is the number of bytes on disk; with those in memory, what the file
// will have after the next Checkpoint but for its comment.
func (w *Writer) Size() int64 { return w.size + int64(len(w.buf)) }

// Name is the segment's name in the run folder; Number its number.
func (w *Writer) Name() string { return w.name }

// Number is the segment's number.
func (w *Writer) Number() int { return w.number }

// Err returns why the writer takes no more lines, nil while it does.
func (w *Writer) Err() error { return w.err }

// Stamps returns the last stamps, to hand to the next segment's writer.
func (w *Writer) Stamps() *Stamps { return w.enc.stamps }
