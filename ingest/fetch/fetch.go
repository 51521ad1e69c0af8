package fetch

import (
	"context"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io/fs"
	"slices"
	"strings"

	"gaugelog/config"
	"gaugelog/ingest/segment"
)

// Options is what reading a run back needs.
type Options struct {
	Source *Source
	// Run is the value of the tag run; "": the only run there is of the rig.
	Run string
	// Rig is the value of the tag rig, which narrows the choice; "": any.
	Rig string
	// RigBytes is the rig file, which becomes rig.yaml; Amendments is
	// amendments.yaml, nil for none.
	RigBytes, Amendments []byte
	Program              string
	// Progress hears how many points were taken; may be nil.
	Progress func(points int64)
}

// Summary tells what came back.
type Summary struct {
	Run                     string
	Readings, Marks, Events int64
	// Lost says what the server does not hold of a run, "" for nothing.
	Lost string
}

// Fetch makes the run folder into, which must not exist, of a run that a server
// holds. After an error nothing is left behind.
func Fetch(ctx context.Context, into string, o Options) (s Summary, err error) {
	if o.Source != nil {
		defer o.Source.client.CloseIdleConnections()
	}
	err = segment.MakeFolder(into, func(fsys segment.FS) (err error) {
		s, err = lay(ctx, fsys, o)
		return err
	})
	if errors.Is(err, fs.ErrExist) {
		err = config.Problem{What: into + " exists already", Fix: "give a folder that is not there yet"}
	}
	return s, err
}

// choose finds the run that is meant.
func choose(ctx context.Context, r reader, o Options) (string, error) {
	if o.Run != "" {
		return o.Run, nil
	}
	runs, err := r.runs(ctx, o.Rig)
	if err != nil {
		return "", err
	}
	of := ""
	if o.Rig != "" {
		of = fmt.Sprintf(" of rig %q", o.Rig)
	}
	slices.Sort(runs)
	switch len(runs) {
	case 0:
		return "", config.Problem{What: "the server holds no run" + of, Fix: "see that the address names the right database, and the rig the tag that was forwarded"}
	case 1:
		return runs[0], nil
	}
	return "", config.Problem{What: fmt.Sprintf("the server holds %d runs%s: %s", len(runs), of, strings.Join(runs, ", ")), Fix: "name one with --run-tag"}
}

// lay fills an empty folder.
func lay(ctx context.Context, fsys segment.FS, o Options) (s Summary, err error) {
	r := o.Source.reader()
	s.Lost = r.loses()
	if s.Run, err = choose(ctx, r, o); err != nil {
		return s, err
	}
	rig := sha256.Sum256(o.RigBytes)
	l := &layer{fs: fsys, progress: o.Progress, s: &s, header: segment.Header{
		Run: safe(s.Run), Boot: "fetched", Rig: hex.EncodeToString(rig[:]), Program: o.Program}}
	l.fill = segment.NewFiller(fsys, l.header)
	if err := l.file(segment.RigFile, o.RigBytes); err != nil {
		return s, err
	}
	if o.Amendments != nil {
		if err := l.file("amendments.yaml", o.Amendments); err != nil {
			return s, err
		}
	}
	for _, m := range measurements {
		if err := r.points(ctx, s.Run, m, l.take); err != nil {
			return s, err
		}
		if m == "ambient" && s.Readings == 0 {
			return s, config.Problem{What: fmt.Sprintf("the server holds no reading of run %q", s.Run), Fix: "leave --run-tag out to see which runs it holds"}
		}
	}
	return s, l.close()
}

// safe makes an id that may stand in a header: what is no letter, digit, point,
// dash or underscore becomes an underscore.
func safe(id string) string {
	return strings.Map(func(r rune) rune {
		if r >= 'a' && r <= 'z' || r >= 'A' && r <= 'Z' || r >= '0' && r <= '9' || strings.ContainsRune("-_.", r) {
			return r
		}
		return '_'
	}, id)
}
