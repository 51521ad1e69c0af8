package main

import (
	"bufio"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"time"

	"github.com/spf13/cobra"

	"gaugelog/analysis"
	"gaugelog/analysis/export"
	"gaugelog/analysis/history"
	"gaugelog/config"
	"gaugelog/ingest"
	"gaugelog/ingest/segment"
)

// exportFlags are the flags of `export`.
type exportFlags struct {
	output, within                  string
	wide, corrected, marks, replace bool
}

func exportCommand() *cobra.Command {
	var f exportFlags
	c := &cobra.Command{
		Use:     "export RUN",
		GroupID: "after",
		Short:   "Writes a run's readings as CSV",
		Long: `Writes every reading of a run as comma-separated values (RFC 4180, UTF-8): one
row a reading, or with --wide one row for each round of readings with a column
for each gauge. Instants are ISO 8601 in UTC, with the seconds since the first
reading beside them; indications are mm as recorded, and what the gauge displayed
stands beside them where that was not mm.

--corrected writes the sags instead: corrected for calibration, sense, baseline,
offsets and support movement, at points that are densest after each change of load.
--marks writes the loads, acts and notes, as "gaugelog import --marks" reads them.

The run is only read, and may still be recording. A damaged block is left out,
named, and ends with exit code 3.`,
		Example: `  gaugelog export runs/first --output readings.csv
  gaugelog export runs/first --corrected --wide --output sag.csv
  gaugelog export runs/first --marks --output marks.csv`,
		Args: oneRun,
		RunE: func(cmd *cobra.Command, args []string) error { return runExport(cmd, args[0], f) },
	}
	c.Flags().StringVar(&f.output, "output", "", "file to write (default: standard output)")
	c.Flags().BoolVar(&f.wide, "wide", false, "a column for each gauge")
	c.Flags().BoolVar(&f.corrected, "corrected", false, "the corrected sags instead of the indications")
	c.Flags().BoolVar(&f.marks, "marks", false, "the marks instead of the readings")
	c.Flags().StringVar(&f.within, "within", "1s", "with --wide: longest time between the first and the last reading of a row")
	c.Flags().BoolVar(&f.replace, "replace", false, "replace the output file if it exists")
	c.MarkFlagsMutuallyExclusive("marks", "wide")
	c.MarkFlagsMutuallyExclusive("marks", "corrected")
	return c
}

func runExport(cmd *cobra.Command, run string, f exportFlags) error {
	within, err := config.ParseDuration(f.within)
	if err != nil || within.Value <= 0 {
		return wrongf("write a time such as 500ms", "--within %q is no time", f.within)
	}
	var sum export.Summary
	err = writeOut(cmd, f.output, f.replace, func(w io.Writer) (err error) {
		if f.corrected || f.marks {
			sum, err = exportAnalysed(w, run, f)
		} else {
			sum, err = exportRaw(cmd, w, run, f.wide, time.Duration(within.Value*float64(time.Second)))
		}
		return err
	})
	if err != nil {
		return err
	}
	for _, d := range sum.Left {
		fmt.Fprintf(cmd.ErrOrStderr(), "left out, damaged: %s\n", d)
	}
	if f.output != "" {
		fmt.Fprintf(cmd.ErrOrStderr(), "wrote %s: %d rows\n", f.output, sum.Rows)
	}
	if len(sum.Left) > 0 {
		return errNotHeld
	}
	return nil
}

func exportRaw(cmd *cobra.Command, w io.Writer, run string, wide bool, within time.Duration) (export.Summary, error) {
	rig, err := config.LoadRig(filepath.Join(run, segment.RigFile))
	if err != nil {
		return export.Summary{}, err
	}
	dir, err := ingest.OpenDir(run, ingest.DirOptions{})
	if err != nil {
		return export.Summary{}, err
	}
	defer dir.Close()
	folder, err := segment.OpenFolder(dir.FS())
	if err != nil {
		return export.Summary{}, err
	}
	o := export.Options{Within: within, Progress: slowProgress(cmd.ErrOrStderr(), "exporting")}
	for _, g := range rig.Gauges {
		o.Gauges = append(o.Gauges, g.Name)
	}
	for _, p := range rig.Probes {
		o.Probes = append(o.Probes, p.Name)
	}
	if wide {
		return export.Wide(w, folder, o)
	}
	return export.Long(w, folder, o)
}

func exportAnalysed(w io.Writer, run string, f exportFlags) (export.Summary, error) {
	h, err := history.Load(run)
	if err != nil {
		return export.Summary{}, wrongInput(err)
	}
	defer h.Close()
	if f.marks {
		return export.Marks(w, h)
	}
	found, err := analysis.Find(h)
	if err != nil {
		return export.Summary{}, wrongInput(err)
	}
	sum, err := export.Corrected(w, h, found, f.wide)
	sum.Left = append(sum.Left, h.Damaged...)
	return sum, err
}

// slowProgress returns a callback that shows a bar once a job has taken a
// second, so that a short one prints nothing.
func slowProgress(w io.Writer, what string) func(done, all int64) {
	began := time.Now()
	var bar *progress
	return func(done, all int64) {
		if bar == nil {
			if time.Since(began) < time.Second {
				return
			}
			bar = newProgress(w, what, all)
		}
		bar.at(done)
		if done >= all {
			bar.done()
		}
	}
}

// writeOut gives f the named file, or standard output where there is none. The
// file appears whole, or not at all.
func writeOut(cmd *cobra.Command, path string, replace bool, f func(io.Writer) error) (err error) {
	if path == "" {
		b := bufio.NewWriterSize(cmd.OutOrStdout(), 1<<16)
		return errors.Join(f(b), b.Flush())
	}
	if _, err := os.Stat(path); err == nil && !replace {
		return wrongf("give another name, or --replace", "%s exists already", path)
	}
	file, err := os.CreateTemp(filepath.Dir(path), ".writing-*")
	if err != nil {
		return wrong(err, "name a file in a folder that exists and may be written")
	}
	defer func() {
		if err != nil {
			err = errors.Join(err, os.Remove(file.Name()))
		}
	}()
	b := bufio.NewWriterSize(file, 1<<16)
	if err := errors.Join(f(b), b.Flush(), file.Chmod(0o644), file.Sync(), file.Close()); err != nil {
		return err
	}
	return os.Rename(file.Name(), path)
}
