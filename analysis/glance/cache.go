package glance

import (
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"time"

	"gaugelog/config"
	"gaugelog/ingest/segment"
)

// CacheFile is where a summary is kept for the next look; like all of report/
// it can be made again.
const CacheFile = "report/glance.json"

// AmendmentsFile holds what was learned of the rig after the start.
const AmendmentsFile = "amendments.yaml"

// Rig reads what a Look needs of a rig file, and applies what was learned since,
// whatever its date: how a run stands is how it stands now. name stands for the
// file in messages.
func Rig(name string, rig, amendments []byte) (*config.Rig, error) {
	list, err := config.ParseAmendments(AmendmentsFile, amendments)
	if err != nil {
		return nil, err
	}
	if len(list) == 0 {
		return config.ParseBrief(name, rig)
	}
	whole, err := config.Parse(name, rig)
	if err != nil {
		return nil, err
	}
	return whole.ApplyAt(list, time.Unix(1<<40, 0))
}

// kept is a summary with what it was made from.
type kept struct {
	Key     string
	Summary *Summary
}

// LookAgain is Look, but for a run that has not grown since the last look it
// gives what was kept then, without reading the rig file's meaning or any
// reading. load makes a rig of the rig file's bytes and those of the amendments,
// nil for none, as Rig does. Where the folder may not be written nothing is kept.
func LookAgain(fsys segment.FS, load func(rig, amendments []byte) (*config.Rig, error)) (*Summary, error) {
	rig, err := read(fsys, segment.RigFile)
	if err != nil {
		return nil, err
	}
	key, err := keyOf(fsys, rig)
	if err != nil {
		return nil, err
	}
	if b, err := read(fsys, CacheFile); err == nil {
		var k kept
		if json.Unmarshal(b, &k) == nil && k.Key == key && k.Summary != nil {
			return k.Summary, nil
		}
	}
	amendments, err := read(fsys, AmendmentsFile)
	if err != nil && !errors.Is(err, fs.ErrNotExist) {
		return nil, err
	}
	parsed, err := load(rig, amendments)
	if err != nil {
		return nil, err
	}
	s, err := Look(fsys, parsed)
	if err == nil {
		keep(fsys, kept{key, s})
	}
	return s, err
}

// keyOf changes when anything that Look reads does: the recorder only appends
// to the last segment and the logs, or adds a segment.
func keyOf(fsys segment.FS, rig []byte) (string, error) {
	h := sha256.New()
	h.Write(rig)
	names, err := segmentsOf(fsys)
	if err != nil {
		return "", err
	}
	entries, err := some{fsys, names.ends()}.ReadDir(segment.ReadingsDir)
	if err != nil && !errors.Is(err, fs.ErrNotExist) {
		return "", err
	}
	for _, e := range entries {
		info, err := e.Info()
		if err != nil {
			return "", err
		}
		fmt.Fprintln(h, e.Name(), info.Size(), info.ModTime().UnixNano())
	}
	for _, name := range []string{segment.MarksFile, segment.EventsFile, AmendmentsFile} {
		size := int64(-1)
		if f, err := fsys.Open(name); err == nil {
			if info, err := f.Stat(); err == nil {
				size = info.Size()
			}
			f.Close()
		}
		fmt.Fprintln(h, name, size)
	}
	return "6 " + hex.EncodeToString(h.Sum(nil)), nil
}

func read(fsys segment.FS, name string) ([]byte, error) {
	f, err := fsys.Open(name)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	info, err := f.Stat()
	if err != nil {
		return nil, err
	}
	b := make([]byte, info.Size())
	_, err = io.ReadFull(io.NewSectionReader(f, 0, info.Size()), b)
	return b, err
}

// keep writes the summary in one step; a folder that cannot be written is left.
func keep(fsys segment.FS, k kept) {
	b, err := json.Marshal(k)
	if err != nil || fsys.MkdirAll("report") != nil {
		return
	}
	tmp := CacheFile + ".partial"
	_ = fsys.Remove(tmp)
	f, err := fsys.Create(tmp)
	if err != nil {
		return
	}
	_, err = f.Write(b)
	if errors.Join(err, f.Close()) == nil {
		_ = fsys.Rename(tmp, CacheFile)
	}
}
