package rollup

import (
	"bytes"
	"encoding/gob"
	"fmt"
	"sync"

	"github.com/klauspost/compress/zstd"
)

// formatName opens a stored summary; another layout gets another name.
const formatName = "gaugelog summary 1"

// largest bounds what Load unpacks, in bytes: some thousand channels of a day.
const largest = 64 << 20

// stored is a summary with what it was made of.
type stored struct {
	Format, Of string
	Summary    *Summary
}

var (
	packer = sync.OnceValues(func() (*zstd.Encoder, error) {
		return zstd.NewWriter(nil, zstd.WithEncoderConcurrency(1), zstd.WithLowerEncoderMem(true), zstd.WithWindowSize(1<<20))
	})
	unpacker = sync.OnceValues(func() (*zstd.Decoder, error) {
		return zstd.NewReader(nil, zstd.WithDecoderConcurrency(1), zstd.WithDecoderLowmem(true), zstd.WithDecoderMaxMemory(largest))
	})
)

// Save gives a summary as bytes, gob compressed by Zstandard with its checksum;
// of says what it was made of, to the letter.
func (s *Summary) Save(of string) ([]byte, error) {
	var b bytes.Buffer
	if err := gob.NewEncoder(&b).Encode(stored{formatName, of, s}); err != nil {
		return nil, fmt.Errorf("storing a summary: %w", err)
	}
	z, err := packer()
	if err != nil {
		return nil, err
	}
	return z.EncodeAll(b.Bytes(), nil), nil
}

// Load reads a summary back, and refuses one that is torn or damaged, was made
// of something else, or is of other channels or another layout: its readings are
// then read anew.
func Load(packed []byte, of string, names []string) (*Summary, error) {
	z, err := unpacker()
	if err != nil {
		return nil, err
	}
	plain, err := z.DecodeAll(packed, nil)
	if err != nil {
		return nil, fmt.Errorf("the stored summary cannot be unpacked: %w", err)
	}
	var s stored
	if err := gob.NewDecoder(bytes.NewReader(plain)).Decode(&s); err != nil {
		return nil, fmt.Errorf("the stored summary cannot be read: %w", err)
	}
	if s.Format != formatName || s.Of != of || s.Summary == nil || !s.Summary.fits(names) {
		return nil, ErrOther
	}
	return s.Summary, nil
}

// fits refuses other channels and bins of other sizes.
func (s *Summary) fits(names []string) bool {
	if len(s.Names) != len(names) || len(s.Series) != len(names) {
		return false
	}
	for i := range names {
		w := &s.Series[i].Whole
		if s.Names[i] != names[i] || w.Width < second || w.Width%second != 0 || len(w.Bins) > mostWhole {
			return false
		}
	}
	return true
}
