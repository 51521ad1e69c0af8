package segment

import "errors"

// A Filler lays down readings whose instants were given (typed, imported, read
// back from elsewhere) as segments from number 1 on, at one go: blocks, rolling,
// compressing and sums are its own affair. Not safe for use by several
// goroutines.
type Filler struct {
	fs     FS
	header Header
	w      *Writer
	stamps Stamps
	number int
	lines  int
	last   int64
}

// A Filler closes a segment at fillSize bytes, as a recording does by default,
// and a block at fillLines lines.
const (
	fillSize  = 16_000_000
	fillLines = 8192
)

// NewFiller prepares to fill an empty run folder.
func NewFiller(fs FS, h Header) *Filler { return &Filler{fs: fs, header: h} }

// Put appends one line of the instant at, ns since 1970 UTC, by a method of
// Writer; put is called again where a block was full or time went back.
func (f *Filler) Put(at int64, put func(*Writer) error) error {
	err := f.one(at, put)
	switch {
	case errors.Is(err, ErrBlockFull):
		if err = f.checkpoint(); err == nil {
			err = f.one(at, put)
		}
	case errors.Is(err, ErrClockBack):
		if err = f.Roll(); err == nil {
			f.stamps.Forget()
			err = f.one(at, put)
		}
	}
	if err != nil {
		return err
	}
	f.last = at
	if f.lines++; f.lines >= fillLines {
		if err := f.checkpoint(); err != nil {
			return err
		}
	}
	if f.w.Size() >= fillSize {
		return f.Roll()
	}
	return nil
}

// one appends to the segment, which it opens if there is none.
func (f *Filler) one(at int64, put func(*Writer) error) error {
	if f.w == nil {
		f.number++
		h := f.header
		h.Clock = ClockState{Wall: at, Given: true}
		w, err := NewWriter(f.fs, ReadingsDir, f.number, WriterOptions{Header: h, Stamps: &f.stamps})
		if err != nil {
			return err
		}
		f.w = w
	}
	return put(f.w)
}

// clock says that the stamps were given; the wall clock stands at the last.
func (f *Filler) clock() ClockState { return ClockState{Wall: f.last, Given: true} }

func (f *Filler) checkpoint() error {
	f.lines = 0
	return f.w.Checkpoint(f.clock())
}

// Roll closes the segment; the next Put begins another.
func (f *Filler) Roll() error {
	if f.w == nil {
		return nil
	}
	err := f.w.Close(f.clock())
	f.w, f.lines = nil, 0
	return err
}

// Seal closes the last segment, compresses all of them and enters their sums
// and those of the other files named.
func (f *Filler) Seal(others ...string) error {
	if err := f.Roll(); err != nil {
		return err
	}
	for n := 1; n <= f.number; n++ {
		c, err := Compress(f.fs, n)
		if err != nil {
			return err
		}
		others = append(others, c.Name)
	}
	return UpdateSums(f.fs, others...)
}
