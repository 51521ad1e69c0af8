package onlook

import (
	"errors"
	"io/fs"
	"strings"
	"time"

	"gaugelog/ingest"
	"gaugelog/ingest/alarm"
	"gaugelog/ingest/segment"
)

// events is what the run's events say of its present.
type events struct {
	fs      segment.FS
	size    int64
	written time.Time // when the file was written last

	started, stopped bool
	silent           map[string]bool
	fault            string
	alarms           alarm.Ledger
}

// poll reads the events again where the file has grown.
func (e *events) poll() (fresh bool, err error) {
	size, written, err := stat(e.fs, segment.EventsFile)
	if notThere(err) {
		return false, nil
	}
	if err != nil || size == e.size {
		return false, err
	}
	folder, err := segment.OpenFolder(logsOnly{e.fs})
	if err != nil {
		return false, err
	}
	records, _, err := folder.Log(segment.EventsFile)
	if err != nil {
		return false, err
	}
	*e = events{fs: e.fs, size: size, written: written, silent: map[string]bool{}}
	for i := range records {
		e.take(&records[i])
	}
	return true, nil
}

// logsOnly hides the segments from a reader that wants a log alone.
type logsOnly struct{ segment.FS }

// ReadDir finds nothing.
func (logsOnly) ReadDir(string) ([]fs.DirEntry, error) { return nil, nil }

// take follows one event.
func (e *events) take(r *segment.Record) {
	if r.Kind != segment.Event || r.Point == nil {
		return
	}
	detail, _ := r.Point.Value("detail")
	text, _ := detail.(string)
	gauge := r.Point.Tag("gauge")
	switch r.Name {
	case ingest.Started:
		*e = events{fs: e.fs, size: e.size, written: e.written, started: true, silent: map[string]bool{}, alarms: e.alarms}
	case ingest.Stopped:
		e.stopped = true
	case ingest.NoReading:
		if strings.HasPrefix(text, "silent:") {
			e.silent[gauge] = true
		}
	case ingest.Gap:
		delete(e.silent, gauge)
	case ingest.DiskFull, ingest.DiskSlow:
		e.fault = text
	case ingest.DiskBack:
		e.fault = ""
	}
	e.alarms.Take(r.Name, gauge, text, time.Unix(0, r.Time))
}

func notThere(err error) bool { return errors.Is(err, fs.ErrNotExist) }

// stat is a file's size and when it was written last.
func stat(fsys segment.FS, name string) (int64, time.Time, error) {
	f, err := fsys.Open(name)
	if err != nil {
		return 0, time.Time{}, err
	}
	defer f.Close()
	info, err := f.Stat()
	if err != nil {
		return 0, time.Time{}, err
	}
	return info.Size(), info.ModTime(), nil
}
