package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"path/filepath"
	"time"

	"github.com/spf13/cobra"

	"gaugelog/analysis/glance"
	"gaugelog/config"
	"gaugelog/ingest"
	"gaugelog/ingest/forward"
)

// forwardFlags are the flags of `forward`.
type forwardFlags struct {
	to, tokenFile, state, run, rig string
	follow, plain                  bool
	lines                          int
}

// tokenVariable may hold the token where no file does.
const tokenVariable = "GAUGELOG_TOKEN"

func forwardCommand() *cobra.Command {
	var f forwardFlags
	c := &cobra.Command{
		Use:     "forward RUN",
		GroupID: "run",
		Short:   "Sends a run to a line-protocol server, while it is recorded or afterwards",
		Long: `Sends every reading, mark and event of a run to a time-series server that takes
line protocol over HTTP, with the tags run and rig added. --to is the write address
whole: http://host:8086/write?db=lab (version 1 form) or
https://host/api/v2/write?org=lab&bucket=sag (version 2 form).

Each line is sent at least once; sending again does no harm. How far a server came
stands in RUN/forward. An absent server is tried for ever; a line that it refuses is
set aside there with the server's words; where it refuses access forwarding waits and
says so. Readings whose clock was never set are held back until it is known. The
recording is never touched. With the readings goes what "gaugelog rigs" needs of the
rig file: names, senses, gains, the limit on sag and the plan, nothing else of it.

An https server's certificate must be one that this machine trusts; the certificate of
a laboratory's own authority is named by the variable SSL_CERT_FILE.

--follow goes on until Ctrl-C, so that a run is sent while it is recorded.`,
		Example: `  gaugelog forward runs/first --to 'http://lab:8086/write?db=sag' --follow
  gaugelog forward runs/first --to 'https://lab/api/v2/write?org=lab&bucket=sag' --token-file token`,
		Args: oneRun,
		RunE: func(cmd *cobra.Command, args []string) error { return runForward(cmd, args[0], f) },
	}
	fl := c.Flags()
	fl.StringVar(&f.to, "to", "", "the server's write address")
	fl.StringVar(&f.tokenFile, "token-file", "", "file with the token, or user:password (default: the variable "+tokenVariable+")")
	fl.BoolVar(&f.follow, "follow", false, "go on until Ctrl-C")
	fl.StringVar(&f.run, "run-tag", "", "value of the tag run (default: the run's id)")
	fl.StringVar(&f.rig, "rig-tag", "", "value of the tag rig (default: the specimen's name)")
	fl.StringVar(&f.state, "state", "", "folder that remembers how far the server came (default RUN/forward)")
	fl.IntVar(&f.lines, "lines", 5000, "most lines in one body")
	fl.BoolVar(&f.plain, "plain", false, "allow a token over plain http to a host outside private networks")
	return c
}

func runForward(cmd *cobra.Command, run string, f forwardFlags) error {
	if f.to == "" {
		return wrongf("give --to, such as 'http://host:8086/write?db=lab'", "no address was given")
	}
	token, err := tokenOf(f.tokenFile)
	if err != nil {
		return err
	}
	target, err := forward.ParseTarget(f.to, token, f.plain)
	if err != nil {
		return wrong(fmt.Errorf("--to: %w", err), "write it as 'http://host:8086/write?db=lab' or 'https://host/api/v2/write?org=lab&bucket=sag'")
	}
	rig, err := config.LoadRig(filepath.Join(run, "rig.yaml"))
	if err != nil {
		return err
	}
	amendments, err := config.LoadAmendments(filepath.Join(run, glance.AmendmentsFile))
	if err != nil {
		return err
	}
	if rig, err = rig.ApplyAt(amendments, time.Now()); err != nil {
		return err
	}
	dir, err := ingest.OpenDir(run, ingest.DirOptions{})
	if err != nil {
		return err
	}
	defer dir.Close()
	if f.state == "" {
		f.state = filepath.Join(run, forward.StateDir)
	}
	if f.rig == "" {
		f.rig = rig.Specimen.Name
	}
	began := time.Now()
	fw, err := forward.Open(forward.Options{FS: dir.FS(), State: f.state, Target: target, Rig: f.rig, Run: f.run, Brief: rig.Brief(),
		Program: "gaugelog", Token: func() (string, error) { return tokenOf(f.tokenFile) }, Lines: f.lines, Tell: tellForward(cmd.ErrOrStderr())})
	if err != nil {
		return err
	}
	err = fw.Run(cmd.Context(), f.follow)
	n := fw.Count()
	if errors.Is(err, context.Canceled) {
		if err = nil; !f.follow {
			err = failed(errors.New("ended before everything was sent"), "run it again: it goes on where it was")
		}
	}
	fmt.Fprintf(cmd.OutOrStdout(), "sent %d lines in %.1f s, set aside %d, held back %d\n", n.Sent, time.Since(began).Seconds(), n.Refused, n.Held)
	if err == nil && n.Refused > 0 {
		err = errNotHeld
	}
	return errors.Join(err, fw.Close())
}

// tellForward prints what a person should know: each state once, not each try.
func tellForward(w io.Writer) func(forward.Notice) {
	last := ""
	return func(n forward.Notice) {
		switch {
		case n.Refused != "":
			fmt.Fprintf(w, "set aside, refused by the server (%s): %s\n", n.Words, n.Refused)
		case n.Again != "":
			fmt.Fprintln(w, n.Again)
		case n.Words == "":
			if last != "" {
				fmt.Fprintln(w, "the server takes lines again")
			}
			last = ""
		case n.Words != last:
			what := "the server is not there or busy, trying on"
			if n.Held {
				what = "ALARM: forwarding is held, nothing is lost"
			}
			fmt.Fprintf(w, "%s: %s\n", what, n.Words)
			last = n.Words
		}
	}
}
