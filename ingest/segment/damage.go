package segment

import "fmt"

// Damage is a part of a file that was left out because it is not what was
// written, or cannot be read. Nothing in it is guessed at.
type Damage struct {
	// File is the name in the run folder.
	File string
	// Block is the number of the block in its file, from 1; 0 where it is not
	// known or the damage is no block.
	Block int64
	// Offset and Length are bytes of the text: of the plain file, or of what a
	// compressed one unpacks to.
	Offset, Length int64
	// First and Last bound the stamps of the readings left out, in ns since
	// 1970 UTC as written; both 0 where nothing bounds them.
	First, Last int64
	// Lines is how many lines were left out; -1 where that is not known.
	Lines int64
	// Why says what was found.
	Why string
}

func (d Damage) Error() string { return d.String() }

// String says it in one line.
func (d Damage) String() string {
	s := d.File
	if d.Block > 0 {
		s += fmt.Sprintf(": block %d", d.Block)
	}
	if d.Length > 0 {
		s += fmt.Sprintf(": bytes %d to %d", d.Offset, d.Offset+d.Length)
	}
	s += ": " + d.Why
	switch {
	case d.Lines > 0:
		s += fmt.Sprintf("; %d lines left out", d.Lines)
	case d.Lines < 0:
		s += "; an unknown number of lines left out"
	}
	switch {
	case d.First != 0 && d.Last != 0:
		s += fmt.Sprintf(" between %s and %s", instant(d.First), instant(d.Last))
	case d.First != 0:
		s += fmt.Sprintf(" from %s to the end of the file", instant(d.First))
	case d.Last != 0:
		s += fmt.Sprintf(" from the beginning of the file to %s", instant(d.Last))
	}
	return s
}

// Tail is what lies behind the last checkpoint of a file that was not closed:
// an unfinished write, left where it is and never parsed. It is no damage.
type Tail struct {
	File           string
	Offset, Length int64
}

// String says it in one line.
func (t Tail) String() string {
	return fmt.Sprintf("%s: %d bytes behind the last checkpoint at %d", t.File, t.Length, t.Offset)
}

// Span is a stretch of readings of which something is to be told.
type Span struct {
	File        string
	Lines       int64
	First, Last int64 // ns since 1970 UTC as written
	// Shift is what was added to the stamps, in ns (re-timed spans only).
	Shift int64
}

// String says it in one line.
func (s Span) String() string {
	return fmt.Sprintf("%s: %d lines between %s and %s", s.File, s.Lines, instant(s.First), instant(s.Last))
}

// Report is what a pass over a run folder found beside its readings.
type Report struct {
	Damage []Damage
	Tails  []Tail
	// Retimed are stretches taken before the clock was set and put right.
	Retimed []Span
	// Unset are stretches of a boot whose clock was never set: their stamps
	// stand as written and may be wrong.
	Unset []Span
	// Quarantined are lines left out because their instant is absurd.
	Quarantined []Span
	// Readings counts the indications given; Lines all lines given.
	Readings, Lines int64
}
