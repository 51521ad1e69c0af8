package main

import (
	"context"
	"fmt"
	"log/slog"
	"path/filepath"
	"sync/atomic"
	"time"

	"gaugelog/config"
	"gaugelog/ingest/forward"
	"gaugelog/ingest/segment"
)

// sending forwards one run while it is recorded. It has no way to the
// recorder: it reads the run's files and keeps its own.
type sending struct {
	o    forward.Options
	now  atomic.Pointer[forward.Forwarder]
	log  *slog.Logger
	wait func(context.Context, time.Duration) error
}

// tryAgain is how long to wait where the folder cannot be read or the state
// not be kept, such as on a full disk.
const tryAgain = 30 * time.Second

// openSending reads what the rig says of forwarding; nil where it says nothing.
func openSending(rig *config.Rig, run string, fsys segment.FS, logger *slog.Logger) (*sending, error) {
	f := rig.Forward
	if f.To == "" {
		return nil, nil
	}
	token, err := tokenOf(filepath.FromSlash(f.TokenFile))
	if err != nil {
		return nil, err
	}
	target, err := forward.ParseTarget(f.To, token, f.Plain)
	if err != nil {
		return nil, wrong(fmt.Errorf("forward.to: %w", err), "write it as 'http://host:8086/write?db=lab' or 'https://host/api/v2/write?org=lab&bucket=sag'")
	}
	s := &sending{log: logger.With("server", target.String()), wait: sleep}
	s.o = forward.Options{FS: fsys, State: filepath.Join(run, forward.StateDir), Target: target, Rig: rig.Specimen.Name,
		Program: "gaugelog", Tell: s.tell()}
	return s, nil
}

// run sends until the context ends, whatever happens.
func (s *sending) run(ctx context.Context) {
	for ctx.Err() == nil {
		err := s.once(ctx)
		if ctx.Err() != nil {
			return
		}
		s.log.Warn("forwarding failed and is tried again; the recording goes on", "err", err, "in", tryAgain)
		if s.wait(ctx, tryAgain) != nil {
			return
		}
	}
}

func (s *sending) once(ctx context.Context) error {
	f, err := forward.Open(s.o)
	if err != nil {
		return err
	}
	defer f.Close()
	s.now.Store(f)
	return f.Run(ctx, true)
}

// state is how far it is; false before the first try.
func (s *sending) state() (forward.State, bool) {
	if f := s.now.Load(); f != nil {
		return f.State(), true
	}
	return forward.State{}, false
}

// tell logs each state once, not each try.
func (s *sending) tell() func(forward.Notice) {
	last := ""
	return func(n forward.Notice) {
		switch {
		case n.Refused != "":
			s.log.Warn("the server refused a line, which was set aside", "words", n.Words, "line", n.Refused)
		case n.Again != "":
			s.log.Info("forwarding begins anew", "why", n.Again)
		case n.Words == "" && last != "":
			s.log.Info("the server takes lines again")
			last = ""
		case n.Words != last && n.Words != "":
			if n.Held {
				s.log.Error("forwarding is held, nothing is lost: the server refuses access", "words", n.Words)
			} else {
				s.log.Warn("the server is not there or busy; forwarding tries on", "words", n.Words)
			}
			last = n.Words
		}
	}
}
