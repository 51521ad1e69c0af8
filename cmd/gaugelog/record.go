package main

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"os"
	"path/filepath"
	"time"

	"github.com/spf13/cobra"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/ingest"
	"gaugelog/ingest/metrics"
)

// recordFlags are the flags of `record`.
type recordFlags struct {
	into, lasts, ports string
	quiet              bool
	page               pageFlags
}

func recordCommand() *cobra.Command {
	var f recordFlags
	c := &cobra.Command{
		Use:     "record RIG...",
		GroupID: "run",
		Short:   "Records one rig or several until it is ended",
		Long: `Reads the gauges and probes of one rig or several and keeps their readings in a
run folder each, until Ctrl-C or SIGTERM ends it cleanly. It prints "recording
RUN" when every port was tried. Lost ports are reopened for ever. An existing run
goes on in a new segment if the rig file is the same, and is refused if not. The
end of the plan does not stop the recording.

What is older than the last completed sync survives a power cut.
Suspended loads hurt people: a recording is no safety device.`,
		Example: "  gaugelog record rig.yaml --into runs/first",
		Args:    cobra.MinimumNArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			if f.into == "" {
				return wrongf("give --into RUN, the folder to keep the readings in", "no folder was given")
			}
			return runRecord(cmd, args, f)
		},
	}
	c.Flags().StringVar(&f.into, "into", "", "run folder; with several rigs a folder each under it")
	c.Flags().StringVar(&f.lasts, "for", "", "end after this time, such as 24h (default: run until ended)")
	c.Flags().StringVar(&f.ports, "ports", "", "file of \"name path\" lines that say where the rig's ports are, as gaugelog simulate prints them")
	c.Flags().BoolVar(&f.quiet, "quiet", false, "log warnings and errors only")
	f.page.add(c.Flags())
	return c
}

// recording is everything one `record` process holds open.
type recording struct {
	rigs []*config.Rig
	dirs []*ingest.Dir
	recs []*ingest.Recorder
	runs []string
	// start is the instant before the first recorder was opened.
	start device.Instant
	// syncs measures how long the disk takes.
	syncs *metrics.Syncs
	// clock is nil for the machine's own.
	clock ingest.Clock
}

func runRecord(cmd *cobra.Command, rigFiles []string, f recordFlags) (err error) {
	ctx := cmd.Context()
	if f.lasts != "" {
		d, err := config.ParseDuration(f.lasts)
		if err != nil {
			return wrong(fmt.Errorf("--for: %w", err), mendOf(err))
		}
		var stop context.CancelFunc
		ctx, stop = context.WithTimeout(ctx, time.Duration(d.Value*float64(time.Second)))
		defer stop()
	}
	opener, err := openerOf(f.ports)
	if err != nil {
		return err
	}
	r := &recording{start: ingest.SystemClock{}.Now(), syncs: metrics.NewSyncs()}
	defer func() { err = errors.Join(err, r.close()) }()
	if err := r.open(rigFiles, f.into); err != nil {
		return err
	}
	level := slog.LevelInfo
	if f.quiet {
		level = slog.LevelWarn
	}
	logger := slog.New(slog.NewTextHandler(cmd.ErrOrStderr(), &slog.HandlerOptions{Level: level}))
	beside, err := r.openBeside(f.page, logger, cmd.ErrOrStderr())
	if err != nil {
		return err
	}
	defer func() { err = errors.Join(err, beside.close()) }()
	return r.run(ctx, cmd, opener, logger, beside)
}

// open loads the rigs and opens a recorder for each.
func (r *recording) open(rigFiles []string, into string) error {
	for _, file := range rigFiles {
		text, err := os.ReadFile(file)
		if err != nil {
			return wrong(err, "name a rig file; `gaugelog new` writes one")
		}
		rig, err := config.Parse(file, text)
		if err != nil {
			return err
		}
		run := into
		if len(rigFiles) > 1 {
			run = filepath.Join(into, rig.Specimen.Name)
		}
		if err := r.openOne(rig, text, run); err != nil {
			return err
		}
	}
	return nil
}

func (r *recording) openOne(rig *config.Rig, text []byte, run string) error {
	amendments, err := config.LoadAmendments(filepath.Join(run, "amendments.yaml"))
	if err != nil {
		return err
	}
	if rig, err = rig.Apply(amendments); err != nil {
		return err
	}
	if err := config.Problems(rig.CheckPorts()).Err(); err != nil {
		return err
	}
	dir, err := ingest.OpenDir(run, ingest.DirOptions{Create: true})
	if err != nil {
		return err
	}
	r.dirs = append(r.dirs, dir)
	rec, err := ingest.Open(ingest.Options{
		FS: r.syncs.Over(dir.FS(), rig.Specimen.Name), Lock: dir.Lock(fmt.Sprintf("gaugelog record, process %d", os.Getpid())),
		Rig: rig, RigBytes: text, Amendments: len(amendments), Program: version(),
		Clock: r.clocks(), Start: ingest.SystemClock{}.Now(), Live: true, Compress: true,
		DiskFree: dir.DiskFree, LeastFree: leastFree,
	})
	if err != nil {
		return refused(run, err)
	}
	r.rigs, r.recs, r.runs = append(r.rigs, rig), append(r.recs, rec), append(r.runs, run)
	return nil
}

func (r *recording) clocks() ingest.Clock {
	if r.clock == nil {
		return ingest.SystemClock{}
	}
	return r.clock
}

// leastFree is the room a recording needs before it begins, bytes: a few
// segments with their compressed twins.
const leastFree = 64_000_000

// refused tells of a run that cannot be recorded into.
func refused(run string, err error) error {
	var differs *ingest.RigDiffersError
	var holder *ingest.HeldError
	switch {
	case errors.As(err, &differs), errors.As(err, &holder):
		return wrong(fmt.Errorf("%s: %w", run, err), mendOf(err))
	}
	return fmt.Errorf("%s: %w", run, err)
}

// run records until the context ends, then closes ports before recorders, so
// that nothing that was read is lost.
func (r *recording) run(ctx context.Context, cmd *cobra.Command, opener device.Opener, logger *slog.Logger, beside *beside) error {
	sink := &lateSink{beside: beside}
	bank, err := device.Open(device.Options{Rigs: r.rigs, Opener: opener, Sink: sink, Logger: logger})
	if err != nil {
		return wrong(err, mendOf(err))
	}
	runner, err := ingest.NewRunner(ingest.RunnerOptions{
		Recorders: r.recs, Clock: r.clocks(), PortsTried: bank.Tried(),
		Ready: func() {
			for _, run := range r.runs {
				fmt.Fprintf(cmd.OutOrStdout(), "recording %s\n", run)
			}
		},
	})
	if err != nil {
		return err
	}
	sink.Runner = runner
	defer tellSystem(r.recs)()
	r.recs = nil // the runner's from now on
	recording, stop := context.WithCancel(context.WithoutCancel(ctx))
	defer stop()
	recorded := make(chan error, 1)
	go func() { recorded <- runner.Run(recording) }()
	beside.start(ctx, runner, bank)
	bankErr := bank.Run(ctx)
	stop()
	recordErr := <-recorded
	return errors.Join(bankErr, recordErr, beside.wait())
}

// close lets go of what run did not take over.
func (r *recording) close() error {
	var errs []error
	for _, rec := range r.recs {
		errs = append(errs, rec.Close(ingest.SystemClock{}.Now()))
	}
	for _, d := range r.dirs {
		errs = append(errs, d.Close())
	}
	return errors.Join(errs...)
}

// lateSink is a runner that is set after the bank was planned and before it runs.
type lateSink struct {
	*ingest.Runner
	beside *beside
}

// Take hands a reading to the recorder first, then to what stands beside it.
func (s *lateSink) Take(d device.Reading) {
	s.Runner.Take(d)
	s.beside.take(d)
}
