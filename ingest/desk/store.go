package desk

import (
	"errors"
	"io"
	"io/fs"
	"time"

	"gaugelog/ingest/rollup"
)

// bookFile keeps the bins over a restart, so that a start reads an hour of
// readings at most and not the run; bookBefore is the one stored before it, for
// a file that a power cut has damaged. Both can be made again from the readings,
// so they stand among the outputs.
const (
	reportDir  = "report"
	bookFile   = "report/live-bins.gob.zst"
	bookBefore = "report/live-bins-before.gob.zst"
	bookFresh  = "report/live-bins.partial"
	storeEvery = time.Hour
)

// loadBook reads the stored book, or the one before it; nil where neither fits.
func (d *Desk) loadBook(names []string) *rollup.Book {
	for _, name := range []string{bookFile, bookBefore} {
		if book := d.loadBookFrom(name, names); book != nil {
			return book
		}
	}
	return nil
}

func (d *Desk) loadBookFrom(name string, names []string) *rollup.Book {
	f, err := d.o.FS.Open(name)
	if err != nil {
		return nil
	}
	defer f.Close()
	info, err := f.Stat()
	if err != nil {
		return nil
	}
	status := d.o.Status()
	if status == nil {
		return nil
	}
	book, err := rollup.Load(io.NewSectionReader(f, 0, info.Size()), status.Run, names)
	if err != nil || book.Until >= d.o.Start.Wall {
		return nil
	}
	return book
}

// pendingBook waits until the readings in it are on disk.
type pendingBook struct {
	taken time.Time
	bytes []byte
}

// storeNow stores the bins once an hour, when a sync has completed that began
// after they were taken: after a power cut they hold nothing that was lost.
func (d *Desk) storeNow(now time.Time) {
	if d.stored.IsZero() {
		d.stored = now
	}
	if d.rebuilding {
		return
	}
	if p := d.pending; p != nil {
		if s := d.o.Status(); s != nil && now.Add(-s.SyncAge).After(p.taken) {
			d.pending = nil
			d.write(p.bytes)
		}
		return
	}
	if now.Sub(d.stored) >= storeEvery {
		d.stored = now
		if b := d.encode(); b != nil {
			d.pending = &pendingBook{now, b}
		}
	}
}

// end stores the bins when the recording has ended.
func (d *Desk) end() {
	for {
		select {
		case s := <-d.feed:
			d.add(s)
			continue
		default:
		}
		break
	}
	if s := d.o.Status(); d.o.Alarms == nil && !d.rebuilding && s != nil && s.Closed && s.Fault == "" {
		if b := d.encode(); b != nil {
			d.write(b)
		}
	}
	d.publish(time.Now())
}

func (d *Desk) encode() []byte {
	s := d.o.Status()
	if s == nil {
		return nil
	}
	var b buffer
	if err := d.book.Save(&b, s.Run); err != nil {
		d.o.Log.Error("the bins cannot be stored", "error", err)
		return nil
	}
	return b
}

type buffer []byte

func (b *buffer) Write(p []byte) (int, error) {
	*b = append(*b, p...)
	return len(p), nil
}

// write replaces the stored book in one step, and keeps the one before it.
func (d *Desk) write(b []byte) {
	err := func() error {
		if err := d.o.FS.MkdirAll(reportDir); err != nil {
			return err
		}
		if err := d.o.FS.Remove(bookFresh); err != nil && !errors.Is(err, fs.ErrNotExist) {
			return err
		}
		f, err := d.o.FS.Create(bookFresh)
		if err != nil {
			return err
		}
		_, err = f.Write(b)
		if err := errors.Join(err, f.Sync(), f.Close()); err != nil {
			return err
		}
		if err := d.o.FS.Rename(bookFile, bookBefore); err != nil && !errors.Is(err, fs.ErrNotExist) {
			return err
		}
		return d.o.FS.Rename(bookFresh, bookFile)
	}()
	if err != nil {
		d.o.Log.Warn("the bins were not stored", "error", err)
	}
}
