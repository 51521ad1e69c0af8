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
	o      forward.Options
	now    atomic.Pointer[forward.Forwarder]
	failed atomic.Pointer[string] // why it does not go on, "" where it does
	log    *slog.Logger
	wait   func(context.Context, time.Duration) error
}

// tryAgain is how long to wait where the folder or the token cannot be read or
// the state not be kept, such as on a full disk.
const tryAgain = 30 * time.Second

// grace is how long the end of a recording may take to be sent.
const grace = 5 * time.Second

// openSending reads what the rig says of forwarding; nil where it says nothing.
// A token that cannot be read is no reason not to record, nor is one that
// cannot be read for now: it is tried again.
func openSending(rig *config.Rig, run string, fsys segment.FS, logger *slog.Logger) (*sending, error) {
	f := rig.Forward
	if f.To == "" {
		return nil, nil
	}
	s := &sending{log: logger, wait: sleep}
	token := func() (string, error) { return tokenOf(filepath.FromSlash(f.TokenFile)) }
	now, err := token()
	if err != nil {
		now = "" // each try reads it anew, and says so
	}
	target, err := forward.ParseTarget(f.To, now, f.Plain)
	if err != nil {
		return nil, wrong(fmt.Errorf("forward.to: %w", err), "write it as 'http://host:8086/write?db=lab' or 'https://host/api/v2/write?org=lab&bucket=sag'")
	}
	s.log = logger.With("server", target.String())
	s.o = forward.Options{FS: fsys, State: filepath.Join(run, forward.StateDir), Target: target, Token: token,
		Rig: rig.Specimen.Name, Brief: rig.Brief(), Program: "gaugelog", Tell: s.tell()}
	return s, nil
}

// run sends until the context ends, whatever happens, and then what was
// recorded last, if the server is there.
func (s *sending) run(ctx context.Context) {
	for ctx.Err() == nil {
		err := s.once(ctx, true)
		if ctx.Err() != nil {
			break
		}
		words := err.Error()
		s.failed.Store(&words)
		s.log.Warn("forwarding failed and is tried again; the recording goes on", "err", err, "in", tryAgain)
		if s.wait(ctx, tryAgain) != nil {
			break
		}
	}
	if st := s.state(); st == nil || st.Words != "" {
		return
	}
	last, stop := context.WithTimeout(context.WithoutCancel(ctx), grace)
	defer stop()
	if err := s.once(last, false); err != nil {
		s.log.Info("the end of the recording was not sent; \"gaugelog forward\" sends it", "err", err)
	}
}

func (s *sending) once(ctx context.Context, follow bool) error {
	token, err := s.o.Token()
	if err != nil {
		return err
	}
	if err := s.o.Target.Renew(token); err != nil {
		return err
	}
	f, err := forward.Open(s.o)
	if err != nil {
		return err
	}
	defer f.Close()
	s.failed.Store(nil)
	s.now.Store(f)
	return f.Run(ctx, follow)
}

// state is how far it is, for who looks on; nil where it does not forward, or
// before the first try. Where it cannot go on without a person it is held.
func (s *sending) state() *forward.State {
	if s == nil {
		return nil
	}
	out := &forward.State{}
	f, words := s.now.Load(), s.failed.Load()
	switch {
	case f == nil && words == nil:
		return nil
	case f != nil:
		*out = f.State()
	}
	if words != nil {
		out.Held, out.Words = true, *words
	}
	return out
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
