package segment

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"hash/crc32"
	"io"
	"strconv"

	"github.com/klauspost/compress/zstd"
)

const (
	// encoderWindow is the window of our frames: what a reader must keep.
	encoderWindow = 256 << 10
	// maxWindow bounds the memory a foreign compressed file may ask for.
	maxWindow = 8 << 20
	// maxFrame bounds the text of one frame.
	maxFrame = 4 * (MaxBlock + maxComment)
	// skippable is the magic number of the frame that holds the index (RFC 8878,
	// section 3.1.2): decoders pass over it.
	skippable = 0x184D2A50

	frameWord  = "#frame "
	framesWord = "#frames count="
	// indexEnd is the length of the index's last line, which is always the same.
	indexEnd = len(framesWord) + 8 + len(" length=") + 10 + len(" self=") + 8 + 1
)

// frameInfo is one frame of a compressed segment, or one chunk of a plain one.
type frameInfo struct {
	offset, size int64 // in the file
	crc          uint32
	at, text     int64 // of the text
	first, last  int64 // least and greatest stamp, as written; 0, 0 if none
	set          bool  // all its stamps stand as written, and all is whole
}

// frameIndex is what the skippable frame at the end of a compressed segment
// says.
type frameIndex struct {
	own, headed bool
	header      header
	hasLast     bool
	last        checkpoint
	frames      []frameInfo
}

func (f *frameInfo) append(b []byte) []byte {
	b = append(b, frameWord...)
	b = appendInt(b, "offset=", f.offset)
	b = appendInt(b, "size=", f.size)
	b = appendCRC(b, "crc=", f.crc)
	b = appendInt(b, "at=", f.at)
	b = appendInt(b, "text=", f.text)
	b = appendInt(b, "first=", f.first)
	b = appendInt(b, "last=", f.last)
	set := "no"
	if f.set {
		set = "yes"
	}
	b = appendText(b, "set=", set)
	b[len(b)-1] = '\n'
	return b
}

func parseFrame(line []byte) (f frameInfo, ok bool) {
	rest, found := bytes.CutPrefix(line, []byte(frameWord))
	if !found {
		return f, false
	}
	r := fieldReader{rest: append(rest[:len(rest):len(rest)], ' ')}
	f.offset = r.int("offset=")
	f.size = r.int("size=")
	f.crc = r.crc("crc=")
	f.at = r.int("at=")
	f.text = r.int("text=")
	f.first = r.int("first=")
	f.last = r.int("last=")
	f.set = r.text("set=") == "yes"
	return f, !r.bad && len(r.rest) == 0 && f.size > 0 && f.text > 0 && f.text <= maxFrame
}

// appendIndex appends the skippable frame. head and last are comments of the
// text, verbatim with their newlines, or empty.
func appendIndex(b, head, last []byte, frames []frameInfo) []byte {
	b = binary.LittleEndian.AppendUint32(b, skippable)
	b = append(b, 0, 0, 0, 0)
	start := len(b)
	b = append(b, head...)
	b = append(b, last...)
	for i := range frames {
		b = frames[i].append(b)
	}
	b = append(b, fmt.Sprintf("%s%08d length=%010d ", framesWord, len(frames), len(b)-start+indexEnd)...)
	b, _ = seal(b, start)
	binary.LittleEndian.PutUint32(b[start-4:], uint32(len(b)-start))
	return b
}

// readFrameIndex reads the index of a compressed segment; nil where there is
// none that is whole.
func readFrameIndex(file File, size int64) *frameIndex {
	if size < int64(indexEnd)+8 {
		return nil
	}
	end := make([]byte, indexEnd)
	if readFull(file, end, size-int64(indexEnd)) != nil || !bytes.HasPrefix(end, []byte(framesWord)) {
		return nil
	}
	p := len(framesWord) + 8 + len(" length=")
	length, err := strconv.ParseInt(string(end[p:p+10]), 10, 64)
	if err != nil || length < int64(indexEnd) || length+8 > size || length > 64<<20 {
		return nil
	}
	count, err := strconv.Atoi(string(end[len(framesWord) : len(framesWord)+8]))
	if err != nil {
		return nil
	}
	text := make([]byte, 8+length)
	if readFull(file, text, size-length-8) != nil ||
		binary.LittleEndian.Uint32(text) != skippable || int64(binary.LittleEndian.Uint32(text[4:])) != length {
		return nil
	}
	text = text[8:]
	cut := len(text) - 1 - 8
	self := fieldReader{rest: append(bytes.Clone(text[cut:cut+8]), ' ')}
	if string(text[cut-len("self="):cut]) != "self=" || self.crc("") != crc32.Checksum(text[:cut-len("self=")], castagnoli) || self.bad || text[len(text)-1] != '\n' {
		return nil
	}
	ix := parseIndex(text)
	if ix == nil || len(ix.frames) != count || !ix.contiguous(size-length-8) {
		return nil
	}
	return ix
}

func parseIndex(text []byte) *frameIndex {
	ix := new(frameIndex)
	for line := range bytes.Lines(text[:len(text)-indexEnd]) {
		line = line[:len(line)-1]
		if h, err := parseHeader(line); err == nil && !ix.headed {
			ix.header, ix.headed, ix.own = h, true, true
		} else if c, ok := parseCheckpoint(line); ok && !ix.hasLast {
			ix.last, ix.hasLast, ix.own = c, true, true
		} else if f, ok := parseFrame(line); ok {
			ix.frames = append(ix.frames, f)
		} else {
			return nil
		}
	}
	return ix
}

func (ix *frameIndex) contiguous(end int64) bool {
	var offset, at int64
	for _, f := range ix.frames {
		if f.offset != offset || f.at != at {
			return false
		}
		offset, at = offset+f.size, at+f.text
	}
	return offset == end
}

// errStored says that a frame's bytes are not those that were written.
var errStored = errors.New("its stored bytes do not match their CRC-32C")

// unpack turns one stored frame into its text. A frame whose bytes changed but
// that unpacks to the right length gives its text and errStored: the blocks in
// it carry checks of their own.
func (f *frameInfo) unpack(dec *zstd.Decoder, stored, buf []byte) ([]byte, error) {
	text, err := dec.DecodeAll(stored, buf[:0])
	if err != nil {
		return buf[:0], fmt.Errorf("it does not unpack: %w", err)
	}
	if int64(len(text)) != f.text {
		return text[:0], fmt.Errorf("it unpacks to %d bytes, %d were written", len(text), f.text)
	}
	if crc32.Checksum(stored, castagnoli) != f.crc {
		return text, errStored
	}
	return text, nil
}

// newFrameDecoder returns a decoder of single frames. One that reads what is
// checked otherwise (the stored bytes by the index, the text by the CRC-32C of
// each block) need not work out the frame's own checksum, which costs about a
// tenth of unpacking.
func newFrameDecoder(checksum zstd.DOption) *zstd.Decoder {
	dec, err := zstd.NewReader(nil, zstd.WithDecoderConcurrency(1), zstd.WithDecoderMaxMemory(maxFrame),
		zstd.WithDecoderLowmem(true), checksum)
	if err != nil {
		panic(err) // the options are fixed
	}
	return dec
}

// compressedWhole tells whether a compressed segment verifies: each stored
// frame against the index or, without one, by unpacking.
func compressedWhole(fs FS, name string) bool {
	file, err := fs.Open(name)
	if err != nil {
		return false
	}
	defer file.Close()
	info, err := file.Stat()
	if err != nil {
		return false
	}
	ix := readFrameIndex(file, info.Size())
	if ix == nil {
		f := segFile{name: name, compressed: true, limit: -1}
		text, closeText, err := openText(file, &f)
		if err != nil {
			return false
		}
		defer closeText()
		n, err := io.Copy(io.Discard, text)
		return err == nil && n > 0
	}
	var stored []byte
	for _, fr := range ix.frames {
		stored = grow(stored, fr.size)
		if readFull(file, stored, fr.offset) != nil || crc32.Checksum(stored, castagnoli) != fr.crc {
			return false
		}
	}
	return true
}

// grow returns b with length n, its contents undefined.
func grow(b []byte, n int64) []byte {
	if int64(cap(b)) < n {
		return make([]byte, n)
	}
	return b[:n]
}
