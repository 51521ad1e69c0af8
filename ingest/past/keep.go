package past

import (
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"math"
	"path"
	"strings"

	"gaugelog/ingest/rollup"
	"gaugelog/ingest/segment"
)

// Names in a run folder. A summary grows as the partial file and gets its name
// when it is whole and on disk.
const (
	reportDir = "report"
	Dir       = reportDir + "/live-bins"
	partial   = Dir + "/.partial"
)

// fileOf is where the summary of a segment lies.
func fileOf(part segment.Part) string {
	return path.Join(Dir, strings.TrimSuffix(path.Base(part.Name), ".lp")+".gob.zst")
}

// keyOf says what a summary of the segment is made of, and whether the segment
// is closed: SHA256SUMS names it then.
func keyOf(part segment.Part, sums map[string]string) (of string, closed bool) {
	sum, closed := sums[part.File]
	return fmt.Sprintf("%s %d bytes, written %d, sum %s, counts %d, clock set %t %d",
		part.File, part.Size, part.Modified.UnixNano(), sum, part.Counts, part.ClockSet, part.Offset), closed && part.Own
}

// sums are those of the closed files; none where they cannot be read.
func (p *Past) sums() map[string]string {
	sums, err := segment.ReadSums(p.FS)
	if err != nil {
		p.warn("without checksums no segment counts as closed", err)
	}
	return sums
}

func (p *Past) warn(what string, err error) {
	if p.Log != nil {
		p.Log.Warn(what, "error", err)
	}
}

// load reads the summary of a segment; nil where none fits it.
func (p *Past) load(part segment.Part, of string) *rollup.Summary {
	f, err := p.FS.Open(fileOf(part))
	if err != nil {
		return nil
	}
	defer f.Close()
	info, err := f.Stat()
	if err != nil {
		return nil
	}
	packed := make([]byte, info.Size())
	if _, err := io.ReadFull(io.NewSectionReader(f, 0, info.Size()), packed); err != nil {
		return nil
	}
	s, err := rollup.Load(packed, of, p.Channels.Names())
	if err != nil {
		return nil
	}
	p.settled(part)
	return s
}

// settled notes a segment for which nothing is left to do.
func (p *Past) settled(part segment.Part) {
	if p.done == nil {
		p.done = map[string]bool{}
	}
	p.done[part.File] = true
}

// store puts a summary beside the others, where that is asked for. What cannot be
// stored is made again by the next start.
func (p *Past) store(part segment.Part, of string, s *rollup.Summary) {
	if !p.Keep {
		return
	}
	p.settled(part)
	packed, err := s.Save(of)
	if err == nil {
		err = p.write(fileOf(part), packed)
	}
	if err != nil {
		p.warn("the summary of "+part.Name+" was not stored", err)
	}
}

// write makes a file whole or not at all, whenever the power fails.
func (p *Past) write(name string, b []byte) error {
	if err := p.FS.MkdirAll(Dir); err != nil {
		return err
	}
	if err := p.FS.Remove(partial); err != nil && !errors.Is(err, fs.ErrNotExist) {
		return err
	}
	f, err := p.FS.Create(partial)
	if err != nil {
		return err
	}
	_, err = f.Write(b)
	if err := errors.Join(err, f.Sync(), f.Close()); err != nil {
		return errors.Join(err, p.FS.Remove(partial))
	}
	if err := p.FS.Rename(partial, name); err != nil {
		return err
	}
	return p.FS.SyncDir(Dir)
}

// remember keeps the widths of a book's bins: a summary made from now on needs
// none that are narrower.
func (p *Past) remember(book *rollup.Book) {
	p.widths = rollup.NewBook(p.Channels.Names()...)
	for i := range p.widths.Series {
		p.widths.Series[i].Whole.Width = book.Series[i].Whole.Width
	}
}

// Summarise makes the summaries of segments that were closed since the last look.
// It does nothing before the first Book, or where none are kept.
func (p *Past) Summarise(ctx context.Context) error {
	p.mu.Lock()
	defer p.mu.Unlock()
	if !p.Keep || p.widths == nil {
		return nil
	}
	sums := p.sums()
	fresh := false
	for name := range sums {
		fresh = fresh || path.Dir(name) == segment.ReadingsDir && !p.done[name]
	}
	if !fresh {
		return nil
	}
	folder, err := segment.OpenFolder(p.FS)
	if err != nil {
		return err
	}
	for _, part := range folder.Parts() {
		of, closed := keyOf(part, sums)
		if p.done[part.File] || !closed {
			continue
		}
		s, whole, err := p.summarise(ctx, folder, part, p.widths, math.MaxInt64)
		if ctx.Err() != nil {
			return ctx.Err()
		}
		p.settled(part)
		if err != nil {
			p.warn("no summary was made of "+part.Name, err)
		} else if whole {
			p.store(part, of, s)
		}
	}
	return nil
}
