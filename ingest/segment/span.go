package segment

import (
	"io"
	"math"
	"path"
)

// Origin says where the segments of a Folder come from.
type Origin struct {
	// Own is true where at least one segment carries this format's comments.
	Own bool
	// Given is true where the stamps of every own segment were typed or
	// imported, not taken from a clock.
	Given bool
}

// Origin tells, from the segments' heads alone, who wrote the folder.
func (d *Folder) Origin() Origin {
	o := Origin{Given: true}
	for i := range d.files {
		if f := &d.files[i]; f.own {
			o.Own = true
			o.Given = o.Given && f.headed && f.header.Clock.Given
		}
	}
	o.Given = o.Given && o.Own
	return o
}

// Start is where a segment of the folder begins.
type Start struct {
	// Name is the file's, in the run folder; Boot the boot id it was begun under.
	Name, Boot string
	// Time is the wall clock when it was begun, in ns since 1970 UTC, re-timed
	// where the boot's clock was set later.
	Time int64
}

// Starts lists the own segments whose header is whole, in order of number.
func (d *Folder) Starts() []Start {
	var out []Start
	for i := range d.files {
		if f := &d.files[i]; f.headed {
			out = append(out, Start{f.name, f.header.Boot, d.put(f, f.header.Clock, f.header.Clock.Wall)})
		}
	}
	return out
}

// StartOf is where a segment begins that the folder need not have been opened
// with; base is its name in readings/ without .zst. False where it is foreign or
// its header is not whole.
func (d *Folder) StartOf(base string) (Start, bool) {
	f := segFile{name: path.Join(ReadingsDir, base), limit: -1}
	if file, err := d.fs.Open(f.name); err == nil {
		file.Close()
	} else {
		f.name, f.compressed = f.name+".zst", true
	}
	if err := d.look(&f); err != nil || !f.headed {
		return Start{}, false
	}
	return Start{f.name, f.header.Boot, d.put(&f, f.header.Clock, f.header.Clock.Wall)}, true
}

// Span tells about when the records begin and end, in ns since 1970 UTC, from
// comments and indexes, without decoding what they speak of: for the choice of a
// scale, not for arithmetic, since a damaged block counts and a late record may
// lie outside. Foreign segments have no comments: of a plain one the beginning
// and the end are decoded, of a compressed one all. ok is false where there is
// no record.
func (d *Folder) Span() (first, last int64, ok bool) {
	first, last = math.MaxInt64, math.MinInt64
	note := func(a, b int64) {
		first, last, ok = min(first, a), max(last, b), true
	}
	ends := 0 // own segments whose end is known, from the last
	for i := len(d.files) - 1; i >= 0; i-- {
		f := &d.files[i]
		switch {
		case !f.own:
			d.foreignSpan(f, note)
		case f.index != nil:
			for _, fr := range f.index.frames {
				switch {
				case fr.last == 0:
				case fr.set:
					note(fr.first, fr.last)
				default: // the clock was not set, at least when it began
					note(d.put(f, f.header.Clock, fr.first), d.put(f, f.index.last.clock, fr.last))
				}
			}
		case ends < 2:
			if d.endSpan(f, note) {
				ends++ // the last may hold nothing yet
			}
		}
	}
	for i := range d.files {
		if f := &d.files[i]; f.own {
			found := f.index != nil && f.index.begins() // and was noted above
			if found {
				break
			}
			_ = d.comments(f, func(it item) bool {
				if it.kind == itemBlock && it.c.lines > 0 {
					note(d.put(f, it.c.clock, it.c.first), d.put(f, it.c.clock, it.c.last))
					found = true
				}
				return !found
			})
			if found {
				break
			}
		}
	}
	return first, last, ok
}

// begins tells whether the first lines of a segment are dated by its index.
func (ix *frameIndex) begins() bool {
	for i := range ix.frames {
		if fr := &ix.frames[i]; fr.last != 0 || !fr.set {
			return fr.set
		}
	}
	return false
}

// endSpan tells of the end of an own segment; false where it holds no block.
func (d *Folder) endSpan(f *segFile, note func(first, last int64)) bool {
	c, found := d.lastCheckpoint(f)
	if !found {
		return false
	}
	if c.lines == 0 && !c.clock.Given {
		// As behind a closed segment: nothing is younger than its clock.
		wall := d.put(f, c.clock, c.clock.Wall)
		note(wall, wall)
		return true
	}
	found = c.lines > 0
	if found {
		note(d.put(f, c.clock, c.first), d.put(f, c.clock, c.last))
		return true
	}
	_ = d.comments(f, func(it item) bool {
		if it.kind == itemBlock && it.c.lines > 0 {
			note(it.c.first, it.c.last)
			found = true
		}
		return true
	})
	return found
}

// put re-times a stamp by its clock state alone, which does for a scale.
func (d *Folder) put(f *segFile, c ClockState, t int64) int64 {
	if fix, ok := d.fixes[f.header.Boot]; ok && !c.Synced && !c.Given {
		return t - c.offset() + fix.offset
	}
	return t
}

// foreignSpan decodes the beginning and the end of a foreign segment.
func (d *Folder) foreignSpan(f *segFile, note func(first, last int64)) {
	const some = 64 << 10
	if f.compressed || f.size <= 2*some {
		one := &Folder{fs: d.fs, files: []segFile{*f}, fixes: d.fixes}
		r := one.Read(ReadOptions{Workers: 1})
		defer r.Close()
		for {
			b, err := r.Next()
			if err != nil {
				return
			}
			if info := b.bounds(); info.first <= info.last {
				note(info.first, info.last)
			}
		}
	}
	file, err := d.fs.Open(f.name)
	if err != nil {
		return // reading it will say so
	}
	defer file.Close()
	for _, at := range []int64{0, f.size - some} {
		text := make([]byte, some)
		if n, err := io.NewSectionReader(file, at, some).Read(text); err != nil || n < some {
			return
		}
		if at > 0 {
			text = text[lineEnd(text):]
		}
		var b Batch
		b.decodeLines(text[:lastLineCut(text)], newInterner(nil), false, func(int, int, string) {})
		if info := b.bounds(); info.first <= info.last {
			note(info.first, info.last)
		}
	}
}
