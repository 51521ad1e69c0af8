package segment

import (
	"errors"
	"io"
	"io/fs"

	"github.com/klauspost/compress/zstd"
)

// splitter cuts a text into chunks of whole blocks (own files) or whole lines
// (foreign ones), of about the same length, in memory bounded by the longest block.
type splitter struct {
	r       io.Reader
	about   int // how long a chunk is at least, but for the last
	foreign bool
	carry   []byte
	off     int64 // of the next chunk in the text
	eof     bool
	err     error
	// size is the length of the text where it is known: no more is set aside
	// while the text is not longer than that.
	size int64
}

// next returns the next chunk in buf's storage; final is true for the last,
// which may end in an unfinished tail. An own chunk that is not final and holds
// no valid comment is lost as a whole: no block can be that long. On an error
// the chunk holds what was read before it, and is the last.
func (s *splitter) next(buf []byte) (chunk []byte, final bool, err error) {
	buf = append(buf[:0], s.carry...)
	s.carry = s.carry[:0]
	for target := s.about; ; target *= 2 {
		buf = s.fill(buf, target)
		if s.eof {
			s.off += int64(len(buf))
			return buf, true, s.err
		}
		cut := 0
		if s.foreign {
			cut = lastLineCut(buf)
		} else {
			cut = lastCut(buf)
		}
		if cut == 0 && target < 2*(MaxBlock+maxComment) {
			continue
		}
		if cut == 0 {
			cut = len(buf) - MaxBlock - maxComment
		}
		s.carry = append(s.carry, buf[cut:]...)
		s.off += int64(cut)
		return buf[:cut], false, nil
	}
}

func (s *splitter) fill(buf []byte, target int) []byte {
	// One byte more than there is, so that the end is seen. A file that another
	// process appends to may have grown since it was measured.
	if rest := s.size - s.off + 1; s.size > 0 && rest > int64(len(buf)) {
		target = int(min(int64(target), rest))
	}
	if cap(buf) < target {
		grown := make([]byte, len(buf), target)
		copy(grown, buf)
		buf = grown
	}
	for len(buf) < target && !s.eof {
		n, err := s.r.Read(buf[len(buf):target])
		buf = buf[:len(buf)+n]
		if err != nil {
			s.eof = true
			if err != io.EOF {
				s.err = err
			}
		}
	}
	return buf
}

// lastLineCut returns where the last whole line of foreign text ends.
func lastLineCut(text []byte) int {
	p := 0
	for {
		n := entryEnd(text[p:])
		if n < 0 {
			return p
		}
		p += n
	}
}

// openText gives a segment's text as a stream, unpacked where it is compressed
// and cut where a later segment wrote the end again.
func openText(file File, f *segFile) (text io.Reader, closeText func(), err error) {
	info, err := file.Stat()
	if err != nil {
		return nil, nil, err
	}
	text, closeText = io.NewSectionReader(file, 0, info.Size()), func() {}
	if f.compressed {
		dec, err := zstd.NewReader(text, zstd.WithDecoderConcurrency(1), zstd.WithDecoderLowmem(true),
			zstd.WithDecoderMaxWindow(maxWindow))
		if err != nil {
			return nil, nil, err
		}
		text, closeText = dec, dec.Close
	}
	if f.limit >= 0 {
		text = io.LimitReader(text, f.limit)
	}
	return text, closeText, nil
}

func isNotExist(err error) bool { return errors.Is(err, fs.ErrNotExist) }
