package main

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"gaugelog/config"
	"gaugelog/ingest/fetch"
)

// fromFlags are the flags of commands that work on a run folder or, with
// --from, on a run that a server holds.
type fromFlags struct {
	from, rig, run, rigTag, tokenFile, amendments, keep string
	plain                                               bool
}

func (f *fromFlags) add(fl *pflag.FlagSet) {
	fl.StringVar(&f.from, "from", "", "read the run from this server instead of a folder: 'http://host:8086/query?db=lab' or 'http://host:8428/api/v1/export'")
	fl.StringVar(&f.rig, "rig", "", "with --from: the rig file, which no server holds")
	fl.StringVar(&f.amendments, "amendments", "", "with --from: the run's amendments.yaml, if it has one")
	fl.StringVar(&f.run, "run-tag", "", "with --from: the run's tag (default: the only run of the rig)")
	fl.StringVar(&f.rigTag, "rig-tag", "", "with --from: the rig's tag (default: the specimen's name)")
	fl.StringVar(&f.tokenFile, "token-file", "", "with --from: file with the token, or user:password (default: the variable "+tokenVariable+")")
	fl.StringVar(&f.keep, "keep", "", "with --from: make a run folder of what was read, and leave it there")
	fl.BoolVar(&f.plain, "plain", false, "with --from: allow a token over plain http to a host outside private networks")
}

// fromWords are what a command's help says of --from.
const fromWords = `With --from and --rig the run is read from a time-series server that "gaugelog forward"
wrote to, by its query interface (InfluxQL over HTTP: every figure comes back) or its JSON
export (whole milliseconds and no words; what is lost is said).`

// args asks for one run folder, or none with --from.
func (f *fromFlags) args(cmd *cobra.Command, args []string) error {
	if f.from == "" {
		return oneRun(cmd, args)
	}
	if len(args) > 0 {
		return wrongf("leave the folder or --from out", "a run is read from a folder or from a server, both were given")
	}
	return nil
}

// on calls do with the run folder that is meant, which with --from is made
// first and, unless it is kept, removed afterwards.
func (f *fromFlags) on(cmd *cobra.Command, args []string, do func(run string) error) (err error) {
	if f.from == "" {
		return do(args[0])
	}
	run := f.keep
	if run == "" {
		work, made := os.MkdirTemp("", "gaugelog-*")
		if made != nil {
			return made
		}
		defer func() { err = errors.Join(err, os.RemoveAll(work)) }()
		run = filepath.Join(work, "run")
	}
	if err := f.fetch(cmd, run); err != nil {
		return err
	}
	return do(run)
}

// fetch makes the run folder of what the server holds.
func (f *fromFlags) fetch(cmd *cobra.Command, run string) error {
	if f.rig == "" {
		return wrongf("give --rig FILE, the rig file of the run", "a server holds readings and marks, but no rig file")
	}
	token, err := tokenOf(f.tokenFile)
	if err != nil {
		return err
	}
	o := fetch.Options{Run: f.run, Rig: f.rigTag, Program: strings.ReplaceAll(version(), " ", "-")}
	if o.Source, err = fetch.ParseSource(f.from, token, f.plain); err != nil {
		return wrong(fmt.Errorf("--from: %w", err), "write it as 'http://host:8086/query?db=lab' or 'http://host:8428/api/v1/export'")
	}
	if o.RigBytes, err = os.ReadFile(f.rig); err != nil {
		return wrong(err, "name the rig file of the run")
	}
	rig, err := config.Parse(f.rig, o.RigBytes)
	if err != nil {
		return err
	}
	if f.amendments != "" {
		if o.Amendments, err = os.ReadFile(f.amendments); err != nil {
			return wrong(err, "name the run's amendments.yaml")
		}
	}
	if o.Rig == "" && o.Run == "" {
		o.Rig = rig.Specimen.Name
	}
	bar := newProgress(cmd.ErrOrStderr(), "reading from the server", -1)
	o.Progress = bar.at
	s, err := fetch.Fetch(cmd.Context(), run, o)
	bar.done()
	if err != nil {
		return wrongInput(err)
	}
	fmt.Fprintf(cmd.ErrOrStderr(), "read %d readings, %d marks and %d events of run %s\n", s.Readings, s.Marks, s.Events, s.Run)
	if s.Lost != "" {
		fmt.Fprintf(cmd.ErrOrStderr(), "not held by this server: %s\n", s.Lost)
	}
	return nil
}

// tokenOf reads a token from a file or, where none is named, the environment.
func tokenOf(file string) (string, error) {
	if file == "" {
		return os.Getenv(tokenVariable), nil
	}
	b, err := os.ReadFile(file)
	if err != nil {
		return "", wrong(err, "name the file that holds the token")
	}
	return string(b), nil
}
