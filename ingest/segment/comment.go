package segment

import (
	"bytes"
	"errors"
	"fmt"
	"hash/crc32"
	"strconv"
	"strings"
)

// FormatVersion is the version of the files this package writes.
const FormatVersion = 1

// MaxBlock is the greatest length of one block in bytes. A reader needs no
// more memory than this to verify a block, and takes a longer one for damage.
const MaxBlock = 4 << 20

// maxComment bounds the text of a header or checkpoint comment.
const maxComment = 4096

const (
	headerWord     = "#gaugelog "
	checkpointWord = "#checkpoint "
)

// castagnoli is CRC-32C; its check value for "123456789" is e3069283.
var castagnoli = crc32.MakeTable(crc32.Castagnoli)

// Header opens every file: what wrote it and what it belongs to.
type Header struct {
	// Kind is the file's part in the run folder: readings, marks or events.
	Kind string
	// Number is the segment number, from 1; 0 in marks.lp and events.lp.
	Number int
	// Run and Boot identify the run and the boot of the machine; Rig is the
	// SHA-256 of rig.yaml in lower-case hexadecimal. Printable, no blanks.
	Run, Boot, Rig string
	// Program names the writing program and its version; may be empty.
	Program string
	// Clock is the state of the clocks when the header was written.
	Clock ClockState
	// Torn counts the bytes directly before this header that an earlier
	// writer left unfinished (marks.lp and events.lp only).
	Torn int64
	// Suspect names the segments whose ends this one writes again.
	Suspect []Suspect
}

// Suspect says that a segment failed while it was written: what lies behind
// Offset in segment Number counts no more once the segment whose header says
// so holds a whole block, because that block repeats it.
type Suspect struct {
	Number int
	Offset int64
}

// header is a Header as it stands in a file.
type header struct {
	Header
	after, self uint32
}

// checkpoint is the comment behind each block.
type checkpoint struct {
	block       int64 // number of the block, from 1
	lines       int64
	length      int64 // bytes of the block
	crc         uint32
	first, last int64 // least and greatest stamp as written
	clock       ClockState
	end         bool // nothing follows but the repeated closing checkpoint
	after, self uint32
}

func appendText(b []byte, key, value string) []byte {
	b = append(b, key...)
	if value == "" {
		value = "-"
	}
	b = append(b, value...)
	return append(b, ' ')
}

func appendInt(b []byte, key string, v int64) []byte {
	b = append(b, key...)
	b = strconv.AppendInt(b, v, 10)
	return append(b, ' ')
}

const hexDigits = "0123456789abcdef"

func appendCRC(b []byte, key string, v uint32) []byte {
	b = append(b, key...)
	for shift := 28; shift >= 0; shift -= 4 {
		b = append(b, hexDigits[v>>shift&15])
	}
	return append(b, ' ')
}

func appendClock(b []byte, c ClockState) []byte {
	b = appendInt(b, "bootclock=", c.Boot)
	b = appendInt(b, "wall=", c.Wall)
	set := "no"
	switch {
	case c.Given:
		set = "given"
	case c.Synced:
		set = "yes"
	}
	return appendText(b, "set=", set)
}

// seal appends the CRC of the comment that began at start, and the newline.
func seal(b []byte, start int) ([]byte, uint32) {
	self := crc32.Checksum(b[start:], castagnoli)
	b = appendCRC(b, "self=", self)
	b[len(b)-1] = '\n'
	return b, self
}

func (h *header) append(b []byte) []byte {
	start := len(b)
	b = append(b, headerWord...)
	b = appendInt(b, "format=", FormatVersion)
	b = appendText(b, "kind=", h.Kind)
	b = appendInt(b, "number=", int64(h.Number))
	b = appendText(b, "run=", h.Run)
	b = appendText(b, "boot=", h.Boot)
	b = appendText(b, "rig=", h.Rig)
	b = appendText(b, "program=", h.Program)
	b = appendClock(b, h.Clock)
	b = appendInt(b, "torn=", h.Torn)
	suspects := make([]string, len(h.Suspect))
	for i, s := range h.Suspect {
		suspects[i] = fmt.Sprintf("%d:%d", s.Number, s.Offset)
	}
	b = appendText(b, "suspect=", strings.Join(suspects, ","))
	b = appendCRC(b, "after=", h.after)
	b, h.self = seal(b, start)
	return b
}

func (c *checkpoint) append(b []byte) []byte {
	start := len(b)
	b = append(b, checkpointWord...)
	b = appendInt(b, "block=", c.block)
	b = appendInt(b, "lines=", c.lines)
	b = appendInt(b, "length=", c.length)
	b = appendCRC(b, "crc=", c.crc)
	b = appendInt(b, "first=", c.first)
	b = appendInt(b, "last=", c.last)
	b = appendClock(b, c.clock)
	end := "no"
	if c.end {
		end = "yes"
	}
	b = appendText(b, "end=", end)
	b = appendCRC(b, "after=", c.after)
	b, c.self = seal(b, start)
	return b
}

// closing is what stands behind c, the first closing checkpoint, in a closed
// file: a blank line as the last block, and its checkpoint, which says again
// that the file ends. So no single damaged byte, not even a newline, can make a
// closed file look like an unfinished one.
func (c *checkpoint) closing() (again checkpoint, text []byte) {
	again = checkpoint{
		block: c.block + 1, length: 1, crc: crc32.Update(c.self, castagnoli, []byte{'\n'}),
		clock: c.clock, end: true, after: c.self,
	}
	text = again.append([]byte{'\n'})
	return again, text
}

var (
	errNoComment = errors.New("not a comment of this format")
	errVersion   = errors.New("written in a newer format")
)

// fieldReader takes key=value words off a comment, in their one right order.
type fieldReader struct {
	rest []byte
	bad  bool
}

func (r *fieldReader) text(key string) string {
	if r.bad || !bytes.HasPrefix(r.rest, []byte(key)) {
		r.bad = true
		return ""
	}
	value, rest, found := bytes.Cut(r.rest[len(key):], []byte{' '})
	if !found || len(value) == 0 {
		r.bad = true
		return ""
	}
	r.rest = rest
	if len(value) == 1 && value[0] == '-' {
		return ""
	}
	return string(value)
}

func (r *fieldReader) int(key string) int64 {
	v, err := strconv.ParseInt(r.text(key), 10, 64)
	if err != nil {
		r.bad = true
	}
	return v
}

func (r *fieldReader) crc(key string) uint32 {
	s := r.text(key)
	v, err := strconv.ParseUint(s, 16, 32)
	if err != nil || len(s) != 8 {
		r.bad = true
	}
	return uint32(v)
}

func (r *fieldReader) clock() (c ClockState) {
	c.Boot = r.int("bootclock=")
	c.Wall = r.int("wall=")
	switch r.text("set=") {
	case "yes":
		c.Synced = true
	case "no":
	case "given":
		c.Given = true
	default:
		r.bad = true
	}
	return c
}

// ownText splits a comment line (without its newline) into the words under its
// CRC and that CRC, having checked the one against the other.
func ownText(line []byte, word string) (fields []byte, self uint32, ok bool) {
	const tail = len("self=") + 8
	if len(line) < len(word)+tail || len(line) > maxComment || !bytes.HasPrefix(line, []byte(word)) {
		return nil, 0, false
	}
	cut := len(line) - tail
	r := fieldReader{rest: append(line[cut:len(line):len(line)], ' ')}
	self = r.crc("self=")
	if r.bad || self != crc32.Checksum(line[:cut], castagnoli) {
		return nil, 0, false
	}
	return line[len(word):cut], self, true
}

// parseHeader reads a header comment, without its newline.
func parseHeader(line []byte) (h header, err error) {
	fields, self, ok := ownText(line, headerWord)
	if !ok {
		return h, errNoComment
	}
	r := fieldReader{rest: fields}
	h.self = self
	if v := r.int("format="); v != FormatVersion {
		return h, fmt.Errorf("%w (version %d; this program reads version %d)", errVersion, v, FormatVersion)
	}
	h.Kind = r.text("kind=")
	h.Number = int(r.int("number="))
	h.Run = r.text("run=")
	h.Boot = r.text("boot=")
	h.Rig = r.text("rig=")
	h.Program = r.text("program=")
	h.Clock = r.clock()
	h.Torn = r.int("torn=")
	if list := r.text("suspect="); list != "" {
		for _, word := range strings.Split(list, ",") {
			number, offset, found := strings.Cut(word, ":")
			n, err1 := strconv.Atoi(number)
			o, err2 := strconv.ParseInt(offset, 10, 64)
			if !found || err1 != nil || err2 != nil {
				return h, errNoComment
			}
			h.Suspect = append(h.Suspect, Suspect{n, o})
		}
	}
	h.after = r.crc("after=")
	if r.bad || len(r.rest) != 0 || h.Torn < 0 {
		return h, errNoComment
	}
	return h, nil
}

// parseCheckpoint reads a checkpoint comment, without its newline.
func parseCheckpoint(line []byte) (c checkpoint, ok bool) {
	fields, self, ok := ownText(line, checkpointWord)
	if !ok {
		return c, false
	}
	r := fieldReader{rest: fields}
	c.self = self
	c.block = r.int("block=")
	c.lines = r.int("lines=")
	c.length = r.int("length=")
	c.crc = r.crc("crc=")
	c.first = r.int("first=")
	c.last = r.int("last=")
	c.clock = r.clock()
	switch r.text("end=") {
	case "yes":
		c.end = true
	case "no":
	default:
		return c, false
	}
	c.after = r.crc("after=")
	if r.bad || len(r.rest) != 0 || c.length < 0 || c.length > MaxBlock {
		return c, false
	}
	return c, true
}

// checkWord refuses header values that would break the comment's words.
func checkWord(what, s string) error {
	for i := 0; i < len(s); i++ {
		if s[i] <= ' ' || s[i] >= 0x7f {
			return fmt.Errorf("%s %q may hold printable characters without blanks only", what, s)
		}
	}
	if len(s) > 512 || s == "-" {
		return fmt.Errorf("%s %q is too long or a single hyphen", what, s)
	}
	return nil
}

func (h *Header) check() error {
	for _, w := range []struct{ what, value string }{
		{"kind", h.Kind}, {"run id", h.Run}, {"boot id", h.Boot}, {"rig hash", h.Rig}, {"program", h.Program},
	} {
		if err := checkWord(w.what, w.value); err != nil {
			return err
		}
	}
	if len(h.Suspect) > 32 {
		return fmt.Errorf("%d suspect segments in a row, at most 32 can be named", len(h.Suspect))
	}
	return nil
}
