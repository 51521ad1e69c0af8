package segment

import (
	"bytes"
	"fmt"
	"hash/crc32"
	"io"
	"path"

	"github.com/klauspost/compress/zstd"
)

// Compressed tells what Compress did.
type Compressed struct {
	// Name is the compressed segment, its name in the run folder.
	Name string
	// Plain and Packed are the bytes before and behind.
	Plain, Packed int64
}

// Compress turns the plain segment number into a Zstandard one and removes the
// plain file once the new one is on disk and was read back byte for byte. The
// segment must have no writer any more; an unfinished tail is kept as it is. A
// damaged segment is left plain, and the *Damage is the error.
//
// The new file grows as NAME.partial in the run folder itself (nothing but
// segments lies in readings/) and is renamed when whole, so a crash at any
// point leaves at least one whole file; calling Compress again finishes.
func Compress(fs FS, number int) (Compressed, error) {
	plain := SegmentName(ReadingsDir, number)
	out := Compressed{Name: plain + ".zst"}
	partial := path.Base(out.Name) + ".partial"
	src, err := fs.Open(plain)
	if err != nil {
		return out, err
	}
	defer src.Close()
	if err := fs.Remove(partial); err != nil && !isNotExist(err) {
		return out, err
	}
	ix, err := pack(fs, src, plain, partial, &out)
	if err == nil {
		err = compareUnpacked(fs, src, partial, ix, out.Plain)
	}
	if err != nil {
		_ = fs.Remove(partial) // on a full disk its space is what is missing most
		return out, err
	}
	if err := fs.Rename(partial, out.Name); err != nil {
		return out, err
	}
	for _, dir := range []string{ReadingsDir, "."} {
		if err := fs.SyncDir(dir); err != nil {
			return out, err
		}
	}
	if err := fs.Remove(plain); err != nil {
		return out, err
	}
	return out, fs.SyncDir(ReadingsDir)
}

// pack writes the frames and the index of src to partial and syncs it.
func pack(fs FS, src File, plain, partial string, out *Compressed) (ix *frameIndex, err error) {
	dst, err := fs.Create(partial)
	if err != nil {
		return nil, err
	}
	defer func() {
		if cerr := dst.Close(); err == nil {
			err = cerr
		}
	}()
	enc, err := zstd.NewWriter(nil, zstd.WithEncoderConcurrency(1), zstd.WithWindowSize(encoderWindow),
		zstd.WithLowerEncoderMem(true), zstd.WithEncoderCRC(true))
	if err != nil {
		return nil, err
	}
	defer enc.Close()
	info, err := src.Stat()
	if err != nil {
		return nil, err
	}
	p := packer{dst: dst, enc: enc, name: plain, ix: new(frameIndex)}
	s := splitter{r: io.NewSectionReader(src, 0, info.Size()), about: frameSize, size: info.Size()}
	for final := false; !final; {
		at := s.off
		p.text, final, err = s.next(p.text)
		if err != nil {
			return nil, fmt.Errorf("%s: %w", plain, err)
		}
		if err := p.frame(at, final); err != nil {
			return nil, err
		}
	}
	index := appendIndex(nil, p.head, p.last, p.ix.frames)
	if _, err := dst.Write(index); err != nil {
		return nil, err
	}
	out.Plain, out.Packed = info.Size(), p.offset+int64(len(index))
	return p.ix, dst.Sync()
}

type packer struct {
	dst          File
	enc          *zstd.Encoder
	name         string
	ix           *frameIndex
	text, stored []byte
	items        []item
	head, last   []byte
	offset       int64
}

func (p *packer) frame(at int64, final bool) error {
	if len(p.text) == 0 {
		return nil
	}
	p.items = splitBlocks(p.text, p.items[:0])
	for _, it := range p.items {
		switch {
		case it.kind == itemLoss || it.kind == itemTail && !final || it.kind == itemBlock && !it.whole:
			d := Damage{File: p.name, Block: it.c.block, Offset: at + int64(it.from), Length: int64(it.to - it.from),
				First: it.c.first, Last: it.c.last, Lines: -1, Why: "damaged, so it is left uncompressed: " + it.why}
			return d
		case it.kind == itemHeader && at == 0 && it.from == 0:
			p.head = append(p.head[:0], p.text[:it.to]...)
		case it.kind == itemBlock:
			p.last = append(p.last[:0], p.text[it.from+int(it.c.length):it.to]...)
		}
	}
	f := chunkInfo(p.items)
	p.stored = p.enc.EncodeAll(p.text, p.stored[:0])
	f.offset, f.size, f.crc = p.offset, int64(len(p.stored)), crc32.Checksum(p.stored, castagnoli)
	f.at, f.text = at, int64(len(p.text))
	p.ix.frames = append(p.ix.frames, f)
	p.offset += f.size
	_, err := p.dst.Write(p.stored)
	return err
}

// chunkInfo sums up the blocks of a chunk for seeking.
func chunkInfo(items []item) (f frameInfo) {
	f.set = true
	lines := int64(0)
	for i := range items {
		it := &items[i]
		switch it.kind {
		case itemBlock:
			if !it.whole || !it.c.clock.Synced && !it.c.clock.Given {
				f.set = false
			}
			if it.c.lines > 0 {
				if lines == 0 || it.c.first < f.first {
					f.first = it.c.first
				}
				if lines == 0 || it.c.last > f.last {
					f.last = it.c.last
				}
				lines += it.c.lines
			}
		case itemHeader:
			f.set = f.set && (it.h.Clock.Synced || it.h.Clock.Given)
		case itemLoss:
			f.set = false
		}
	}
	return f
}

// compareUnpacked reads the new file back from its own name and compares it
// with the plain one.
func compareUnpacked(fs FS, src File, name string, ix *frameIndex, size int64) error {
	file, err := fs.Open(name)
	if err != nil {
		return err
	}
	defer file.Close()
	info, err := file.Stat()
	if err != nil {
		return err
	}
	back := readFrameIndex(file, info.Size())
	if back == nil || len(back.frames) != len(ix.frames) {
		return fmt.Errorf("%s: reading it back gave no index; the plain segment stays", name)
	}
	dec := newFrameDecoder(zstd.IgnoreChecksum(false))
	defer dec.Close()
	var stored, text, want []byte
	at := int64(0)
	for i := range back.frames {
		f := &back.frames[i]
		stored, want = grow(stored, f.size), grow(want, f.text)
		if err := readFull(file, stored, f.offset); err != nil {
			return fmt.Errorf("%s: %w", name, err)
		}
		if text, err = f.unpack(dec, stored, text); err != nil {
			return fmt.Errorf("%s: reading back frame %d: %w; the plain segment stays", name, i+1, err)
		}
		if err := readFull(src, want, f.at); err != nil {
			return err
		}
		if !bytes.Equal(text, want) {
			return fmt.Errorf("%s: frame %d does not unpack to what was packed; the plain segment stays", name, i+1)
		}
		at += f.text
	}
	if at != size {
		return fmt.Errorf("%s: unpacks to %d bytes of %d; the plain segment stays", name, at, size)
	}
	return nil
}
