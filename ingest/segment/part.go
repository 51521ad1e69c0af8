package segment

import "time"

// Part is one segment as it lies in a run folder.
type Part struct {
	// Name is the name of its plain text, as Names and Tape have it; File is
	// that of the file it lies in.
	Name, File string
	// Size is the file's, in bytes; Modified when it was written last.
	Size     int64
	Modified time.Time
	// Counts is how many bytes of its text count, -1 for all: less where a
	// later segment wrote its end again.
	Counts int64
	// Own says that it is one of this format's, by name and comments.
	Own bool
	// ClockSet says that the clock of its boot is known to have been set;
	// Offset is the wall clock less the boot-time clock at the earliest such
	// instant, ns. With Counts they say how its lines are read: while they stay,
	// the same file gives the same records.
	ClockSet bool
	Offset   int64
}

// Parts lists the segments in the order in which they are read. One whose file
// cannot be opened has size 0 and no time.
func (d *Folder) Parts() []Part {
	out := make([]Part, len(d.files))
	for i := range d.files {
		f := &d.files[i]
		fix, set := d.fixes[f.header.Boot]
		out[i] = Part{Name: plainName(f.name), File: f.name, Size: f.size, Modified: f.modified, Counts: f.limit,
			Own: f.own && f.number > 0, ClockSet: set, Offset: fix.offset}
	}
	return out
}
