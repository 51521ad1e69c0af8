package ingest

import (
	"bytes"
	"crypto/rand"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io/fs"
	"strconv"
	"strings"

	"gaugelog/ingest/segment"
)

// Names in a run folder.
const (
	rigName        = "rig.yaml"
	amendmentsName = "amendments.yaml"
	marksName      = segment.MarksFile
	eventsName     = segment.EventsFile
)

// RigDiffersError says that a run was recorded with another rig file.
type RigDiffersError struct {
	// Difference shows the lines that differ: those of the run behind "-",
	// those given now behind "+".
	Difference string
}

func (e *RigDiffersError) Error() string {
	return "the rig file is not the one this run was recorded with:\n" + e.Difference +
		"\nmend: record into another folder, or put what changed into amendments.yaml and give the run's own rig.yaml"
}

// NoRoomError says that the disk has less room than a recording should begin with.
type NoRoomError struct{ Free, Least int64 }

func (e *NoRoomError) Error() string {
	return fmt.Sprintf("the disk has %d MB free, a recording begins with at least %d MB: free some, or record to another disk",
		e.Free/1_000_000, e.Least/1_000_000)
}

// folder is what was found, or laid out, in a run folder.
type folder struct {
	run, rigSum string
	resumed     bool
	// last is until when the run was recorded before, by the wall clock; 0
	// where nothing tells.
	last  int64
	marks []Mark
	// unsealed are the segments an earlier recorder did not seal.
	unsealed []string
}

// layFolder makes a new run folder, or looks at one that is there.
func layFolder(o *Options) (*folder, error) {
	sum := sha256.Sum256(o.RigBytes)
	found := &folder{run: o.Run, rigSum: hex.EncodeToString(sum[:])}
	there, err := segment.ReadFile(o.FS, rigName)
	switch {
	case errors.Is(err, fs.ErrNotExist):
		if err := segment.ReplaceFile(o.FS, rigName, o.RigBytes); err != nil {
			return nil, err
		}
	case err != nil:
		return nil, err
	case !bytes.Equal(there, o.RigBytes):
		// A crash while the folder was laid out leaves a beginning of the same
		// file, and no events: then there is no run yet that could differ.
		if !bytes.HasPrefix(o.RigBytes, there) || exists(o.FS, eventsName) {
			return nil, &RigDiffersError{Difference: lineDifference(there, o.RigBytes)}
		}
		if err := o.FS.Remove(rigName); err != nil {
			return nil, err
		}
		if err := segment.ReplaceFile(o.FS, rigName, o.RigBytes); err != nil {
			return nil, err
		}
	}
	if err := found.lookBack(o.FS); err != nil {
		return nil, err
	}
	if found.run == "" {
		found.run = newRunID()
	}
	return found, nil
}

// lookBack finds out what an earlier recorder left.
func (d *folder) lookBack(fsys segment.FS) (err error) {
	if d.unsealed, err = unsealed(fsys); err != nil {
		return err
	}
	if d.marks, err = ListMarks(fsys); err != nil {
		return err
	}
	head, tail, err := ends(fsys, eventsName)
	if errors.Is(err, fs.ErrNotExist) {
		return nil
	}
	if err != nil {
		return err
	}
	d.resumed = true
	if run := word(head, "run="); run != "" && run != "-" {
		d.run = run
	}
	d.last = lastCheckpoint(tail)
	number, err := segment.NextNumber(fsys, segment.ReadingsDir)
	if err != nil {
		return err
	}
	if _, tail, err := ends(fsys, segment.SegmentName(segment.ReadingsDir, number-1)); err == nil {
		d.last = max(d.last, lastCheckpoint(tail))
	}
	return nil
}

// ends reads the first and the last few kilobytes of a file.
func ends(fsys segment.FS, name string) (head, tail []byte, err error) {
	f, size, err := openSized(fsys, name)
	if err != nil {
		return nil, nil, err
	}
	defer f.Close()
	const some = 64 << 10
	head = make([]byte, min(size, some))
	tail = make([]byte, min(size, some))
	if n, err := f.ReadAt(head, 0); n < len(head) {
		return nil, nil, fmt.Errorf("reading %s: %w", name, err)
	}
	if n, err := f.ReadAt(tail, size-int64(len(tail))); n < len(tail) {
		return nil, nil, fmt.Errorf("reading %s: %w", name, err)
	}
	return head, tail, nil
}

// lastCheckpoint is the wall clock in the last whole checkpoint comment.
func lastCheckpoint(tail []byte) int64 {
	at := bytes.LastIndex(tail, []byte("#checkpoint "))
	for at >= 0 {
		if line, _, whole := bytes.Cut(tail[at:], []byte{'\n'}); whole {
			if wall, err := strconv.ParseInt(word(line, "wall="), 10, 64); err == nil {
				return wall
			}
		}
		at = bytes.LastIndex(tail[:at], []byte("#checkpoint "))
	}
	return 0
}

// word is the value of a key=value word in the first line of text.
func word(text []byte, key string) string {
	line, _, _ := bytes.Cut(text, []byte{'\n'})
	for w := range bytes.SplitSeq(line, []byte{' '}) {
		if v, ok := bytes.CutPrefix(w, []byte(key)); ok {
			return string(v)
		}
	}
	return ""
}

func newRunID() string {
	var b [8]byte
	_, _ = rand.Read(b[:]) // never fails
	return hex.EncodeToString(b[:])
}

func exists(fsys segment.FS, name string) bool {
	f, err := fsys.Open(name)
	if err != nil {
		return false
	}
	f.Close()
	return true
}

// mostLinesShown bounds the difference of two rig files as it is shown.
const mostLinesShown = 12

// lineDifference shows where two texts differ: the stretch between their
// common beginning and their common end, line by line.
func lineDifference(was, is []byte) string {
	a, b := strings.Split(string(was), "\n"), strings.Split(string(is), "\n")
	from := 0
	for from < len(a) && from < len(b) && a[from] == b[from] {
		from++
	}
	end := 0
	for end < len(a)-from && end < len(b)-from && a[len(a)-1-end] == b[len(b)-1-end] {
		end++
	}
	var s strings.Builder
	show := func(sign string, lines []string) {
		for i, line := range lines {
			if i == mostLinesShown {
				fmt.Fprintf(&s, "  (and %d lines more)\n", len(lines)-i)
				return
			}
			fmt.Fprintf(&s, "%s %s:%d: %s\n", sign, rigName, from+i+1, line)
		}
	}
	show("-", a[from:len(a)-end])
	show("+", b[from:len(b)-end])
	return strings.TrimSuffix(s.String(), "\n")
}
