package main

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"

	"github.com/spf13/cobra"

	"gaugelog/analysis"
	"gaugelog/analysis/history"
	"gaugelog/analysis/report"
	"gaugelog/analysis/stiffness"
	"gaugelog/analysis/unitsystem"
	"gaugelog/config"
)

func analyseCommand() *cobra.Command {
	var asJSON bool
	var how howToAnalyse
	var units string
	var from fromFlags
	c := &cobra.Command{
		Use:     "analyse RUN",
		GroupID: "after",
		Short:   "Works out sag, stiffness and creep of a run",
		Long: `Reads a run folder back and works out the load steps, the sag of each gauge,
stiffness, creep, recovery, drift and what disturbed the test, each with its
uncertainty. The folder is only read. A run that is still being recorded is
analysed up to its last completed sync.

` + fromWords,
		Example: "  gaugelog analyse runs/first --json > result.json\n  gaugelog analyse --from 'http://lab:8086/query?db=sag' --rig rig.yaml",
		Args:    from.args,
		RunE: func(cmd *cobra.Command, args []string) error {
			if units != "si" && units != "us" {
				return wrongf("give --units si or --units us", "units %q are not known", units)
			}
			how.progress = cmd.ErrOrStderr()
			defer collectSeldom()()
			return from.on(cmd, args, func(run string) error {
				r, opt, err := readRun(cmd.Context(), run, how)
				if err != nil {
					return err
				}
				opt.Units = units
				if asJSON {
					err = printJSON(cmd.OutOrStdout(), r)
				} else {
					err = report.Text(cmd.OutOrStdout(), report.Build(r, opt))
				}
				return errors.Join(err, held(r))
			})
		},
	}
	c.Flags().BoolVar(&asJSON, "json", false, "print the whole result as JSON (layout: analysis/schema.json)")
	how.flags(c)
	c.Flags().StringVar(&units, "units", "si", "units of the text: si or us")
	from.add(c.Flags())
	return c
}

// oneRun asks for one run folder as the only argument.
func oneRun(cmd *cobra.Command, args []string) error {
	if len(args) != 1 {
		return wrongf("give the run's folder: "+cmd.UseLine(), "%s takes one run folder, %d were given", cmd.Name(), len(args))
	}
	return needRun(args[0])
}

// needRun refuses a path that is no run folder.
func needRun(dir string) error {
	if _, err := os.Stat(filepath.Join(dir, "rig.yaml")); errors.Is(err, fs.ErrNotExist) {
		return wrongf("give a folder that `record`, `import` or `demo` made", "%s is no run folder: it has no rig.yaml", dir)
	}
	return nil
}

// howToAnalyse is what analyse and report let the user choose.
type howToAnalyse struct {
	beyond, thorough bool
	progress         io.Writer // for a bar, where it is a terminal; may be nil
}

func (how *howToAnalyse) flags(c *cobra.Command) {
	c.Flags().BoolVar(&how.beyond, "beyond", false, "forecast more than two decades of time beyond the data")
	c.Flags().BoolVar(&how.thorough, "thorough", false, "check the modulus's uncertainty by 200 000 draws of all inputs (JCGM 101)")
}

// draws is the check by draws, nil where it was not asked for; begin is called
// before its bar is drawn.
func (how howToAnalyse) draws(ctx context.Context, begin func()) func(stiffness.Input) (*stiffness.MonteCarlo, error) {
	if !how.thorough {
		return nil
	}
	return func(in stiffness.Input) (*stiffness.MonteCarlo, error) {
		var bar *progress
		mc, err := stiffness.Thorough(ctx, in, func(done, total int) {
			if bar == nil {
				begin()
				bar = newProgress(how.progress, "drawing all inputs", int64(total))
			}
			bar.at(int64(done))
		})
		if bar != nil {
			bar.done()
		}
		return mc, err
	}
}

// analyseRun reads and evaluates a run folder, and returns the rig as amended.
func analyseRun(ctx context.Context, dir string, progress io.Writer) (*analysis.Result, *config.Rig, error) {
	h, r, err := evaluateRun(ctx, dir, howToAnalyse{progress: progress})
	if err != nil {
		return nil, nil, err
	}
	return r, h.Rig, nil
}

// evaluateRun reads and evaluates a run folder.
func evaluateRun(ctx context.Context, dir string, how howToAnalyse) (*history.History, *analysis.Result, error) {
	stop := working(how.progress, "evaluating "+dir, -1, nil)
	defer stop()
	h, err := history.Load(dir)
	if err != nil {
		return nil, nil, wrongInput(err)
	}
	r, err := analysis.Evaluate(h, analysis.Options{
		Program: version(), Beyond: how.beyond, Thorough: how.draws(ctx, stop), Rules: filepath.Join(dir, analysis.RulesFolder),
	})
	if ctx.Err() != nil {
		return nil, nil, ctx.Err()
	}
	if err != nil {
		return nil, nil, wrongInput(err)
	}
	return h, r, nil
}

// wrongInput marks an error of what was handed in, unless it says itself what
// kind it is.
func wrongInput(err error) error {
	var p config.Problem
	var f *failure
	if errors.As(err, &p) || errors.As(err, &f) {
		return err
	}
	return wrong(err, "")
}

// held ends the command with exit code 3 where an evaluation did not hold or
// a block was damaged.
func held(r *analysis.Result) error {
	for _, e := range r.Evaluations {
		if e.Pass != nil && !*e.Pass {
			return errNotHeld
		}
	}
	if r.Run.DamagedBlocks > 0 {
		return errNotHeld
	}
	return nil
}

// printJSON writes indented JSON with characters as they are.
func printJSON(w io.Writer, v any) error {
	var text bytes.Buffer
	enc := json.NewEncoder(&text)
	enc.SetIndent("", " ")
	enc.SetEscapeHTML(false)
	if err := enc.Encode(v); err != nil {
		return fmt.Errorf("writing JSON: %w", err)
	}
	// Its texts are in the units of its figures.
	_, err := w.Write(bytes.ReplaceAll(text.Bytes(), []byte(unitsystem.Space), []byte(" ")))
	return err
}
