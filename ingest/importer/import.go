package importer

import (
	"cmp"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"slices"
	"time"

	"gaugelog/config"
	"gaugelog/ingest/segment"
)

// mostProblems is after how many bad rows the reading ends.
const mostProblems = 20

// mostSorted bounds the readings that are held in memory to be sorted.
const mostSorted = 20_000_000

// Options is what an import needs.
type Options struct {
	// Rig is the rig file, parsed, and RigBytes its bytes, which become rig.yaml.
	Rig      *config.Rig
	RigBytes []byte
	// Table is the CSV of readings, File its name for messages; Marks that of
	// marks (nil: none) with MarksFile.
	Table     io.ReadSeeker
	File      string
	Marks     io.Reader
	MarksFile string
	Mapping   Mapping
	Sort      bool
	Program   string
	// Gravity, m/s2, makes forces of masses as a convenience to other readers
	// of the marks; 0 is standard gravity.
	Gravity float64
}

// Summary tells what was imported.
type Summary struct {
	Rows, Readings, Marks int64
	First, Last           int64 // ns since 1970 UTC
	// Ignored are the columns that nothing was made of.
	Ignored []string
}

// Import makes the run folder into, which must not exist. Its errors are
// config.Problems with the row's number where the file is wrong; then, as after
// any other error, nothing is left behind.
func Import(into string, o Options) (s Summary, err error) {
	err = segment.MakeFolder(into, func(fsys segment.FS) (err error) {
		s, err = fill(fsys, o)
		return err
	})
	if errors.Is(err, fs.ErrExist) {
		err = config.Problem{What: into + " exists already", Fix: "give a folder that is not there yet"}
	}
	return s, err
}

// fill lays the run out in an empty folder.
func fill(fsys segment.FS, o Options) (Summary, error) {
	if o.Gravity == 0 {
		o.Gravity = 9.80665
	}
	cal, err := calendarOf(&o.Mapping, o.Rig)
	if err != nil {
		return Summary{}, err
	}
	rig := sha256.Sum256(o.RigBytes)
	sum := sha256.New()
	sum.Write(rig[:])
	if _, err := io.Copy(sum, o.Table); err != nil {
		return Summary{}, err
	}
	if _, err := o.Table.Seek(0, io.SeekStart); err != nil {
		return Summary{}, err
	}
	run := sum.Sum(nil)
	w := newFolderWriter(fsys, segment.Header{Run: "import-" + hex.EncodeToString(run[:8]), Boot: "imported",
		Rig: hex.EncodeToString(rig[:]), Program: o.Program})
	if err := writeFile(fsys, segment.RigFile, o.RigBytes); err != nil {
		return Summary{}, err
	}
	s, marks, err := readings(w, o, cal)
	if err != nil {
		return s, err
	}
	if o.Marks != nil {
		more, err := readMarks(o.MarksFile, o.Marks, o.Rig, &o.Mapping, *cal)
		if err != nil {
			return s, err
		}
		marks = append(marks, more...)
	}
	s.Marks = int64(len(marks))
	w.header.Clock = segment.ClockState{Wall: s.First, Given: true}
	if err := writeMarks(fsys, w.header, marks, o.Gravity); err != nil {
		return s, err
	}
	return s, w.seal(len(marks) > 0)
}

// calendarOf is how the mapping says that times are written.
func calendarOf(m *Mapping, rig *config.Rig) (*calendar, error) {
	name := m.Zone
	if name == "" {
		name = rig.Timezone
	}
	zone, err := time.LoadLocation(name) // "" is UTC
	if err != nil {
		return nil, config.Problem{What: fmt.Sprintf("time zone %q is not known", name), Fix: "name one such as Europe/Dublin"}
	}
	if !slices.Contains([]string{"", "day-first", "month-first"}, m.Dates) {
		return nil, config.Problem{What: fmt.Sprintf("dates %q are not known", m.Dates), Fix: "say day-first or month-first"}
	}
	if !slices.Contains([]string{"", "comma", "point"}, m.Decimal) {
		return nil, config.Problem{What: fmt.Sprintf("decimal %q is not known", m.Decimal), Fix: "say comma or point"}
	}
	if m.Unit != "" && lengths[m.Unit] == nil {
		return nil, config.Problem{What: fmt.Sprintf("unit %q is no length", m.Unit), Fix: "use mm, cm, um or in"}
	}
	c := &calendar{zone: zone, dates: m.Dates}
	if m.Start != "" {
		if c.start, err = c.parse(m.Start); err != nil {
			return nil, config.Problem{What: "start: " + err.Error(), Fix: "write it as 2026-03-02T08:05:00Z"}
		}
	}
	return c, nil
}

// readings reads the table into segments.
func readings(w *folderWriter, o Options, cal *calendar) (s Summary, marks []entry, err error) {
	t, err := openRows(o.File, o.Table, &o.Mapping)
	if err != nil {
		return s, nil, err
	}
	sheet, err := resolve(o.File, o.Rig, &o.Mapping, t.header)
	if err != nil {
		return s, nil, err
	}
	s.Ignored = sheet.ignored
	cal.comma = t.comma
	p := &placer{file: o.File, rig: o.Rig, s: sheet, m: &o.Mapping, cal: *cal, comma: t.comma,
		last: map[string]seen{}, loads: map[string]string{}, unsorted: o.Sort || ownTable(t.header)}
	if sheet.span != "" {
		p.cal.span = spans[sheet.span]
	}
	var held []reading
	var problems config.Problems
	for {
		cells, line, err := t.next()
		if err == io.EOF {
			break
		}
		var got []reading
		if err == nil {
			got, err = p.row(cells, line)
		}
		var bad config.Problem
		if errors.As(err, &bad) {
			if problems = append(problems, bad); len(problems) == mostProblems {
				break
			}
			continue
		}
		if err != nil {
			return s, nil, err
		}
		s.Rows++
		s.take(got)
		switch {
		case len(problems) > 0: // only the other bad rows are of interest
		case o.Sort:
			if held = append(held, got...); len(held) > mostSorted {
				return s, nil, config.Problem{File: o.File, What: "there are too many rows to sort in memory", Fix: "sort the file by time first"}
			}
		default:
			if err := w.add(got); err != nil {
				return s, nil, err
			}
		}
	}
	if len(problems) > 0 {
		return s, nil, problems.Err()
	}
	if s.Readings == 0 {
		return s, nil, config.Problem{File: o.File, What: "there is no reading in it", Fix: "see that the right columns are named"}
	}
	slices.SortStableFunc(held, func(a, b reading) int { return cmp.Compare(a.at, b.at) })
	return s, p.marks, w.add(held)
}

// ownTable tells the tables that export writes: they have both columns of
// instants.
func ownTable(header []string) bool {
	return len(header) > 2 && header[0] == "time_utc" && header[1] == "seconds_s"
}

func (s *Summary) take(got []reading) {
	for _, r := range got {
		if s.Readings == 0 {
			s.First, s.Last = r.at, r.at
		}
		s.Readings++
		s.First, s.Last = min(s.First, r.at), max(s.Last, r.at)
	}
}

// writeFile lays one file down.
func writeFile(fsys segment.FS, name string, b []byte) error {
	f, err := fsys.Create(name)
	if err != nil {
		return err
	}
	_, err = f.Write(b)
	return errors.Join(err, f.Sync(), f.Close())
}
