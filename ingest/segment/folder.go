package segment

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"path"
	"slices"
	"sync"
	"time"
)

// The logs of a run folder beside its segments.
const (
	MarksFile  = "marks.lp"
	EventsFile = "events.lp"
)

// segFile is one segment as found in the run folder.
type segFile struct {
	name       string
	number     int // 0: a foreign name
	compressed bool
	size       int64 // as stored
	modified   time.Time
	own        bool
	header     header
	headed     bool // header is valid
	// limit is how many bytes of text count, -1 for all: less where a later
	// segment wrote the end again.
	limit int64
	// torn are the stretches of a log that its headers say do not count.
	torn [][2]int64
	// index is the frame index of a compressed segment, nil where it has none.
	index *frameIndex
	// damage found on opening.
	damage []Damage
}

// Folder is a run folder opened for reading: its segments in order and what is
// known of their clocks. It holds no file open. It may be read several times,
// by one Reader at a time or by several.
type Folder struct {
	fs    FS
	files []segFile
	fixes clockFixes

	mu     sync.Mutex
	chunks map[string][]frameInfo // of plain segments, known after a whole pass
}

// OpenFolder looks at the segments of a run folder and at the heads of its
// logs. A folder without readings opens and reads as empty. Segments come in
// order of number; foreign names (any other *.lp or *.lp.zst) in order of name
// behind them.
func OpenFolder(fs FS) (*Folder, error) {
	d := &Folder{fs: fs, fixes: clockFixes{}}
	entries, err := readDirIfAny(fs, ReadingsDir)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", ReadingsDir, err)
	}
	plain := map[string]bool{}
	for _, e := range entries {
		plain[e.Name()] = true
	}
	for _, e := range entries {
		base := e.Name()
		packed := path.Ext(base) == ".zst" && path.Ext(base[:len(base)-4]) == ".lp"
		if e.IsDir() || !packed && path.Ext(base) != ".lp" {
			continue
		}
		if !packed && plain[base+".zst"] && compressedWhole(fs, path.Join(ReadingsDir, base+".zst")) {
			continue // the compressed one counts
		}
		if packed && plain[base[:len(base)-4]] && !compressedWhole(fs, path.Join(ReadingsDir, base)) {
			continue // the plain one counts
		}
		f := segFile{name: path.Join(ReadingsDir, base), compressed: packed, limit: -1}
		f.number, _ = segmentNumber(base)
		d.files = append(d.files, f)
	}
	slices.SortStableFunc(d.files, func(a, b segFile) int {
		if (a.number == 0) != (b.number == 0) {
			return b.number - a.number
		}
		return a.number - b.number
	})
	for i := range d.files {
		if err := d.look(&d.files[i]); err != nil {
			return nil, err
		}
	}
	d.applySuspects()
	return d, d.findFixes()
}

// look reads a segment's head.
func (d *Folder) look(f *segFile) error {
	file, err := d.fs.Open(f.name)
	if err != nil {
		f.damage = append(f.damage, Damage{File: f.name, Lines: -1, Why: "cannot be opened: " + err.Error()})
		return nil
	}
	defer file.Close()
	info, err := file.Stat()
	if err != nil {
		return fmt.Errorf("%s: %w", f.name, err)
	}
	f.size, f.modified = info.Size(), info.ModTime()
	if f.compressed {
		if f.index = readFrameIndex(file, f.size); f.index != nil {
			f.own, f.header, f.headed = f.index.own, f.index.header, f.index.headed
			return nil
		}
	}
	text, closeText, err := openText(file, f)
	if err != nil {
		return nil // reading it will say so
	}
	defer closeText()
	start := make([]byte, maxComment)
	n, _ := io.ReadFull(text, start)
	start = start[:n]
	if line, _, found := bytes.Cut(start, []byte{'\n'}); found {
		h, err := parseHeader(line)
		if errors.Is(err, errVersion) {
			return fmt.Errorf("%s: %w", f.name, err)
		}
		f.header, f.headed = h, err == nil
	}
	if f.compressed && f.headed {
		f.damage = append(f.damage, Damage{File: f.name, Offset: f.size,
			Why: "the index at its end is damaged or missing; read without it"})
	}
	f.own = f.headed || bytes.HasPrefix(start, []byte(headerWord))
	if !f.own {
		// A damaged first line: any valid comment behind it tells.
		size := int64(2 * MaxBlock)
		if !f.compressed {
			size = min(size, f.size)
		}
		rest := make([]byte, size)
		n, _ := io.ReadFull(text, rest)
		f.own = own(append(start, rest[:n]...))
	}
	return nil
}

// applySuspects cuts the ends that a later segment wrote again, once that one
// holds a whole block.
func (d *Folder) applySuspects() {
	for i := range d.files {
		f := &d.files[i]
		if !f.headed || len(f.header.Suspect) == 0 || !d.holdsBlock(f) {
			continue
		}
		for _, s := range f.header.Suspect {
			for j := range d.files[:i] {
				if d.files[j].number == s.Number && s.Number > 0 {
					d.files[j].limit = s.Offset
				}
			}
		}
	}
}

// holdsBlock tells whether the first block of an own segment is whole.
func (d *Folder) holdsBlock(f *segFile) bool {
	holds := false
	_ = d.comments(f, func(it item) bool {
		if it.kind == itemBlock && it.whole {
			holds = true
		}
		return it.kind == itemHeader
	})
	return holds
}

// comments hands the items of an own file to see, in order, until it returns
// false.
func (d *Folder) comments(f *segFile, see func(item) bool) error {
	return d.commentsAt(f, func(it item, _ int64) bool { return see(it) })
}

// commentsAt does as well, with where in the file the item begins.
func (d *Folder) commentsAt(f *segFile, see func(it item, at int64) bool) error {
	file, err := d.fs.Open(f.name)
	if err != nil {
		return err
	}
	defer file.Close()
	text, closeText, err := openText(file, f)
	if err != nil {
		return err
	}
	defer closeText()
	s := splitter{r: text, about: chunkSize}
	if info, err := file.Stat(); err == nil && !f.compressed {
		s.size = info.Size()
	}
	for {
		base := s.off
		chunk, final, err := s.next(nil)
		if err != nil {
			return err
		}
		for _, it := range splitBlocks(chunk, nil) {
			if !see(it, base+int64(it.from)) {
				return nil
			}
		}
		if final {
			return nil
		}
	}
}

// findFixes finds where each boot that began with an unset clock was first
// seen synchronised: in the logs, in headers, or inside the segment in which
// it happened.
func (d *Folder) findFixes() error {
	need := map[string]bool{}
	note := func(boot string, c ClockState) {
		if !c.Synced && !c.Given {
			need[boot] = true
		}
		d.fixes.see(boot, c)
	}
	for _, name := range []string{MarksFile, EventsFile} {
		boot := ""
		err := d.comments(&segFile{name: name, limit: -1}, func(it item) bool {
			switch it.kind {
			case itemHeader:
				boot = it.h.Boot
				note(boot, it.h.Clock)
			case itemBlock:
				note(boot, it.c.clock)
			}
			return true
		})
		if err != nil && !isNotExist(err) {
			return fmt.Errorf("%s: %w", name, err)
		}
	}
	for i := range d.files {
		if f := &d.files[i]; f.headed {
			note(f.header.Boot, f.header.Clock)
		}
	}
	for i := range d.files {
		f := &d.files[i]
		if !f.headed || f.header.Clock.Synced || !need[f.header.Boot] {
			continue
		}
		if last, ok := d.lastCheckpoint(f); ok && !last.clock.Synced {
			continue // and so were all before it
		}
		if fix, ok := d.fixes[f.header.Boot]; ok && fix.boot <= f.header.Clock.Boot {
			continue
		}
		err := d.comments(f, func(it item) bool {
			if it.kind == itemBlock {
				d.fixes.see(f.header.Boot, it.c.clock)
				return !it.c.clock.Synced
			}
			return true
		})
		if err != nil && !f.compressed {
			return fmt.Errorf("%s: %w", f.name, err)
		}
	}
	return nil
}

// lastCheckpoint finds the last checkpoint of a segment without reading it
// whole; false where that does not do.
func (d *Folder) lastCheckpoint(f *segFile) (c checkpoint, ok bool) {
	if f.compressed {
		if f.index == nil || f.limit >= 0 {
			return c, false
		}
		return f.index.last, f.index.hasLast
	}
	file, err := d.fs.Open(f.name)
	if err != nil {
		return c, false
	}
	defer file.Close()
	size := f.size
	if f.limit >= 0 {
		size = min(size, f.limit)
	}
	end := make([]byte, min(size, chunkSize))
	if readFull(file, end, size-int64(len(end))) != nil {
		return c, false
	}
	cut := lastCut(end)
	if cut == 0 {
		return c, false
	}
	start := bytes.LastIndexByte(end[:cut-1], '\n') + 1
	return parseCheckpoint(end[start : cut-1])
}
