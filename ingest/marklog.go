package ingest

import (
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io/fs"

	"gaugelog/device"
	"gaugelog/ingest/segment"
)

// counts says whether the mark speaks of a change, so that readings around it
// are worth keeping; a withdrawal does not.
func (m *Mark) counts() bool { return m.Withdraw == "" }

// AppendMark writes a mark into the run folder's marks file and returns its
// id when it is on disk. The caller holds the marks lock; see [Dir.AppendMark].
// at is the present, state what is known of the clock.
//
// Errors: a mark that contradicts itself or whose time cannot be meant, a
// withdrawal of a mark that is not there, an error of the file system. Nothing
// was entered after an error.
func AppendMark(fsys segment.FS, m Mark, at device.Instant, state ClockState) (id string, err error) {
	if err := m.check(); err != nil {
		return "", err
	}
	typed := m.Time != 0
	if !typed {
		m.Time = at.Wall
	} else if err := checkMarkTime(m.Time, at.Wall); err != nil {
		return "", err
	}
	earlier, err := ListMarks(fsys)
	if err != nil {
		return "", err
	}
	if err := m.place(earlier); err != nil {
		return "", err
	}
	header, err := marksHeader(fsys)
	if err != nil {
		return "", err
	}
	header.Boot = state.BootID
	log, err := segment.OpenLog(fsys, marksName, header)
	if err != nil {
		return "", err
	}
	var entries []segment.Entry
	for _, p := range m.points() {
		entries = append(entries, segment.Entry{Point: p, Time: m.Time})
	}
	clock := segment.ClockState{Boot: at.Boot, Wall: at.Wall, Synced: state.Synchronised, Given: typed}
	if err := log.Append(clock, entries...); err != nil {
		return "", err
	}
	return m.ID, nil
}

// place gives the mark its id, and a time of its own among the marks that are
// there: two lines of one series and stamp are one line to a server. A
// withdrawal must find its mark.
func (m *Mark) place(earlier []Mark) error {
	highest, found := 0, false
	for i := range earlier {
		highest = max(highest, numberOf(earlier[i].ID))
		found = found || m.Withdraw != "" && earlier[i].ID == m.Withdraw
	}
	if m.Withdraw != "" {
		if !found {
			return fmt.Errorf("there is no mark %s to withdraw: mark RUN --list shows what there is", m.Withdraw)
		}
		m.ID = ""
	} else {
		m.ID = fmt.Sprintf("m%d", highest+1)
	}
	for taken := true; taken; {
		taken = false
		for i := range earlier {
			if earlier[i].Time == m.Time {
				m.Time++
				taken = true
			}
		}
	}
	return nil
}

// marksHeader takes the run's id from its events and the rig's sum from its rig file.
func marksHeader(fsys segment.FS) (segment.Header, error) {
	var h segment.Header
	rig, err := segment.ReadFile(fsys, rigName)
	if errors.Is(err, fs.ErrNotExist) {
		return h, errors.New("this is no run folder: it has no rig.yaml")
	}
	if err != nil {
		return h, err
	}
	sum := sha256.Sum256(rig)
	h.Rig = hex.EncodeToString(sum[:])
	if head, _, err := ends(fsys, eventsName); err == nil {
		if run := word(head, "run="); run != "-" {
			h.Run = run
		}
	}
	return h, nil
}

// logsOnly hides the segments from a reader that wants a log alone.
type logsOnly struct{ segment.FS }

func (logsOnly) ReadDir(string) ([]fs.DirEntry, error) { return nil, nil }

// ListMarks reads a run's marks in the order in which they were entered, with
// withdrawals among them. Lines written by others count too; those without an
// id are marks of their own. Times are as written.
func ListMarks(fsys segment.FS) ([]Mark, error) {
	folder, err := segment.OpenFolder(logsOnly{fsys})
	if err != nil {
		return nil, err
	}
	records, _, err := folder.Log(marksName)
	if err != nil {
		return nil, err
	}
	var marks []Mark
	at := map[string]int{}
	for i := range records {
		m := markOf(&records[i])
		if m == nil {
			continue
		}
		if j, ok := at[m.ID]; ok && m.ID != "" && marks[j].Time == m.Time {
			marks[j].join(m)
			continue
		}
		if m.ID != "" {
			at[m.ID] = len(marks)
		}
		marks = append(marks, *m)
	}
	return marks, nil
}

// Withdrawn tells for each mark of a list why it was withdrawn; a mark that
// counts has no entry. The keys are ids.
func Withdrawn(marks []Mark) map[string]string {
	why := map[string]string{}
	for i := range marks {
		if marks[i].Withdraw != "" {
			why[marks[i].Withdraw] = marks[i].Why
		}
	}
	return why
}

// join adds another line of the same mark.
func (m *Mark) join(o *Mark) {
	m.Loads = append(m.Loads, o.Loads...)
	if o.Step != "" {
		m.Step = o.Step
	}
	if o.Note != "" {
		m.Note, m.Photo = o.Note, o.Photo
	}
	if o.Act != "" {
		m.Gauge, m.Act = o.Gauge, o.Act
	}
}

// markOf reads one line back; nil where it is none of a mark's.
func markOf(r *segment.Record) *Mark {
	if r.Point == nil {
		return nil
	}
	f := fieldsOf(r.Point)
	m := &Mark{ID: f.text("id"), Time: r.Raw, By: f.text("by")}
	switch r.Kind {
	case segment.Load:
		l := LoadValue{Name: r.Name, Shown: f.text("shown")}
		l.Newton, _ = f.number("newton")
		if kg, ok := f.number("kilogram"); ok {
			l.Kilogram = &kg
		}
		m.Loads, m.Step = []LoadValue{l}, f.text("step")
	case segment.Note:
		m.Note, m.Photo = f.text("text"), f.text("photo")
	case segment.Touch:
		m.Gauge, m.Act = r.Name, f.text("act")
	case segment.StepMark:
		m.Step = f.text("name")
	case segment.Withdraw:
		m.Withdraw, m.ID, m.Why = m.ID, "", f.text("why")
	default:
		return nil
	}
	return m
}

type fields []segment.Field

func fieldsOf(p *segment.Point) fields { return p.Fields }

func (f fields) get(key string) any {
	for i := range f {
		if f[i].Key == key {
			return f[i].Value
		}
	}
	return nil
}

func (f fields) text(key string) string {
	s, _ := f.get(key).(string)
	return s
}

func (f fields) number(key string) (float64, bool) {
	switch v := f.get(key).(type) {
	case float64:
		return v, true
	case int64:
		return float64(v), true
	case uint64:
		return float64(v), true
	}
	return 0, false
}

// MarkTail finds marks as they are appended to a marks file.
type MarkTail struct {
	fs   segment.FS
	size int64
	seen int
}

// NewMarkTail watches the marks file of a run folder; marks that stand there
// already are not found by it.
func NewMarkTail(fsys segment.FS) (*MarkTail, error) {
	t := &MarkTail{fs: fsys}
	_, err := t.Poll()
	return t, err
}

// Poll returns the marks that were completed since the last call. It costs one
// look at the file's size where nothing was appended.
func (t *MarkTail) Poll() ([]Mark, error) {
	f, size, err := openSized(t.fs, marksName)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, nil
	}
	if err != nil {
		return nil, err
	}
	f.Close()
	if size == t.size {
		return nil, nil
	}
	marks, err := ListMarks(t.fs)
	if err != nil {
		return nil, err
	}
	t.size = size
	fresh := marks[min(t.seen, len(marks)):]
	t.seen = len(marks)
	return fresh, nil
}
