package history

import (
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io/fs"
	"os"

	"gaugelog/config"
	"gaugelog/ingest/segment"
)

// amendmentsFile is the name of what was learned later, in a run folder.
const amendmentsFile = "amendments.yaml"

// Load reads the run folder at dir. The rig file's and the amendments' errors
// are config.Problems; damage to readings is no error but a note, with the
// block left out. The History reads the folder again when asked for windows
// or fine bins; Close it when done.
func Load(dir string) (*History, error) {
	root, err := os.OpenRoot(dir)
	if err != nil {
		return nil, fmt.Errorf("open the run folder: %w", err)
	}
	h, err := Open(segment.OSFS(root, segment.OSOptions{}))
	if err != nil {
		root.Close()
		return nil, err
	}
	h.close = root.Close
	return h, nil
}

// Close lets go of the folder. A History of samples needs none.
func (h *History) Close() error {
	if h.close == nil {
		return nil
	}
	err := h.close()
	h.close = nil
	return err
}

// Open reads a run folder through the seam to its file system. It takes one
// pass over the readings; its memory grows with the run's duration and its
// number of gauges, not with its number of readings.
func Open(fsys segment.FS) (*History, error) {
	h := &History{}
	if err := h.readRig(fsys); err != nil {
		return nil, err
	}
	folder, err := segment.OpenFolder(fsys)
	if err != nil {
		return nil, fmt.Errorf("open the run folder: %w", err)
	}
	if err := h.readLogs(folder); err != nil {
		return nil, err
	}
	h.noteWholeness(folder)
	first, last, _ := folder.Span()
	src := newFolderSource(folder, h.Rig, BinWidth(first, last))
	if err := src.pass(h); err != nil {
		return nil, err
	}
	h.source = src
	if o := folder.Origin(); o.Own && (!o.Given || h.fetched) {
		h.Gaps = recordedGaps(h, folder.Starts())
	} else {
		h.Gaps = neighbourGaps(h)
	}
	h.closeMarks()
	return h, nil
}

// noteWholeness tells of segments that are gone and of a rig file that is not
// the one recorded with.
func (h *History) noteWholeness(folder *segment.Folder) {
	for _, name := range folder.Missing() {
		text := name + " is missing: its readings are gone; `gaugelog verify` tells more"
		h.Damaged = append(h.Damaged, text)
		h.Notes = append(h.Notes, Note{Code: "segment-missing", Text: text})
	}
	if name, edited := folder.RigEdited(h.RigSHA256); edited {
		text := "rig.yaml was edited since " + name + " was recorded: what is learned later belongs into amendments.yaml"
		h.Damaged = append(h.Damaged, text)
		h.Notes = append(h.Notes, Note{Code: "rig-edited", Text: text})
	}
}

// readRig reads rig.yaml and puts the constant amendments in.
func (h *History) readRig(fsys segment.FS) error {
	text, err := segment.ReadFile(fsys, segment.RigFile)
	if errors.Is(err, fs.ErrNotExist) {
		return fmt.Errorf("%s is missing: a run folder holds the rig file its readings were taken by; put it there", segment.RigFile)
	}
	if err != nil {
		return err
	}
	sum := sha256.Sum256(text)
	h.RigSHA256 = hex.EncodeToString(sum[:])
	rig, err := config.Parse(segment.RigFile, text)
	if err != nil {
		return err
	}
	more, err := segment.ReadFile(fsys, amendmentsFile)
	if err != nil && !errors.Is(err, fs.ErrNotExist) {
		return err
	}
	if h.Amendments, err = config.ParseAmendments(amendmentsFile, more); err != nil {
		return err
	}
	h.Rig, err = rig.Apply(h.Amendments)
	return err
}

// readLogs reads marks and events.
func (h *History) readLogs(folder *segment.Folder) error {
	records, report, err := folder.Log(segment.MarksFile)
	if err != nil {
		return fmt.Errorf("read %s: %w", segment.MarksFile, err)
	}
	h.noteReport(report)
	h.addMarks(records)
	records, report, err = folder.Log(segment.EventsFile)
	if err != nil {
		return fmt.Errorf("read %s: %w", segment.EventsFile, err)
	}
	h.noteReport(report)
	for i := range records {
		h.addEvent(&records[i])
	}
	return nil
}

// noteReport turns what the reader found beside the records into notes.
func (h *History) noteReport(r *segment.Report) {
	for _, d := range r.Damage {
		h.Damaged = append(h.Damaged, d.String())
		h.Notes = append(h.Notes, Note{Code: "damaged-block", Time: d.First, Text: d.String()})
	}
	for _, s := range r.Retimed {
		h.Notes = append(h.Notes, Note{Code: "re-timed", Time: s.First + s.Shift, Text: fmt.Sprintf(
			"%s: %d lines were taken before the clock was set and were moved by %.0f s", s.File, s.Lines, float64(s.Shift)/1e9)})
	}
	for _, s := range r.Unset {
		h.Notes = append(h.Notes, Note{Code: "clock-never-set", Time: s.First, Text: fmt.Sprintf(
			"%s: the clock was never set while %d lines were taken; their times may be wrong", s.File, s.Lines)})
	}
	for _, s := range r.Quarantined {
		h.Notes = append(h.Notes, Note{Code: "quarantined", Text: fmt.Sprintf(
			"%s: %d lines with absurd times were left out", s.File, s.Lines)})
	}
}
