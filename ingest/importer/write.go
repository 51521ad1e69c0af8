package importer

import (
	"errors"

	"gaugelog/ingest/segment"
)

// rollSize is when a segment is closed, as a recording's are by default.
const rollSize = 16_000_000

// blockLines is how many lines make a block.
const blockLines = 8192

// folderWriter writes readings into segments.
type folderWriter struct {
	fs     segment.FS
	header segment.Header
	w      *segment.Writer
	stamps segment.Stamps
	number int
	lines  int
	last   int64
}

// add appends readings.
func (f *folderWriter) add(list []reading) error {
	for i := range list {
		r := &list[i]
		err := f.one(r)
		switch {
		case errors.Is(err, segment.ErrBlockFull):
			if err = f.checkpoint(); err == nil {
				err = f.one(r)
			}
		case errors.Is(err, segment.ErrClockBack):
			if err = f.roll(); err == nil {
				f.stamps.Forget()
				err = f.one(r)
			}
		}
		if err != nil {
			return err
		}
		f.last = r.at
		if f.lines++; f.lines >= blockLines {
			if err := f.checkpoint(); err != nil {
				return err
			}
		}
		if f.w.Size() >= rollSize {
			if err := f.roll(); err != nil {
				return err
			}
		}
	}
	return nil
}

// one appends one reading to the segment, which it opens if there is none.
func (f *folderWriter) one(r *reading) error {
	if f.w == nil {
		f.number++
		h := f.header
		h.Clock = segment.ClockState{Wall: r.at, Given: true}
		w, err := segment.NewWriter(f.fs, segment.ReadingsDir, f.number, segment.WriterOptions{Header: h, Stamps: &f.stamps})
		if err != nil {
			return err
		}
		f.w = w
	}
	if r.probe {
		return f.w.Ambient(r.name, r.celsius, r.humidity, r.at)
	}
	return f.w.Indication(&segment.Shown{Gauge: r.name, MM: r.mm, Time: r.at, Shown: r.shown, Unit: r.unit, Status: plain(r.status)})
}

// clock says that the stamps were given; the wall clock stands at the last.
func (f *folderWriter) clock() segment.ClockState {
	return segment.ClockState{Wall: f.last, Given: true}
}

func (f *folderWriter) checkpoint() error {
	f.lines = 0
	return f.w.Checkpoint(f.clock())
}

func (f *folderWriter) roll() error {
	if f.w == nil {
		return nil
	}
	err := f.w.Close(f.clock())
	f.w, f.lines = nil, 0
	return err
}

// seal closes the last segment, compresses all of them and enters their sums.
func (f *folderWriter) seal(marks bool) error {
	if err := f.roll(); err != nil {
		return err
	}
	names := []string{segment.RigFile}
	for n := 1; n <= f.number; n++ {
		c, err := segment.Compress(f.fs, n)
		if err != nil {
			return err
		}
		names = append(names, c.Name)
	}
	if marks {
		names = append(names, segment.MarksFile)
	}
	return segment.UpdateSums(f.fs, names...)
}
