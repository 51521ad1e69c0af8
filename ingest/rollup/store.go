package rollup

import (
	"encoding/gob"
	"errors"
	"fmt"
	"io"

	"github.com/klauspost/compress/zstd"
)

// formatName opens a stored book; another layout gets another name.
const formatName = "gaugelog bins 1"

// largest bounds what Load unpacks, in bytes: some two hundred channels.
const largest = 64 << 20

type stored struct {
	Format, Run string
	Book        *Book
}

// Save writes the book of a run, as gob compressed by Zstandard.
func (b *Book) Save(w io.Writer, run string) error {
	z, err := zstd.NewWriter(w, zstd.WithEncoderConcurrency(1))
	if err != nil {
		return err
	}
	if err := gob.NewEncoder(z).Encode(stored{formatName, run, b}); err != nil {
		return errors.Join(fmt.Errorf("storing the bins: %w", err), z.Close())
	}
	return z.Close()
}

// Load reads a book back, and refuses one of another run, other channels or
// another layout: the run is then read anew.
func Load(r io.Reader, run string, names []string) (*Book, error) {
	z, err := zstd.NewReader(r, zstd.WithDecoderConcurrency(1), zstd.WithDecoderMaxMemory(largest))
	if err != nil {
		return nil, err
	}
	defer z.Close()
	var s stored
	if err := gob.NewDecoder(io.LimitReader(z, largest)).Decode(&s); err != nil {
		return nil, fmt.Errorf("the stored bins cannot be read: %w", err)
	}
	if s.Format != formatName || s.Run != run || s.Book == nil {
		return nil, ErrOther
	}
	fresh := NewBook(names...)
	for i := range s.Book.Series {
		if err := s.Book.Series[i].fits(); err != nil {
			return nil, err
		}
	}
	fresh.Origin = s.Book.Origin
	return fresh, fresh.Merge(s.Book)
}

// fits refuses sets of bins of other sizes.
func (s *Series) fits() error {
	if s.Recent.Width != second || s.Days.Width != dayWidth || s.Whole.Width < second || s.Whole.Width%second != 0 ||
		len(s.Whole.Bins) > mostWhole || len(s.Since) > sinceLength {
		return ErrOther
	}
	return nil
}
