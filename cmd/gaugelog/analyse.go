package main

import (
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
	"gaugelog/config"
)

func analyseCommand() *cobra.Command {
	var asJSON, beyond bool
	var units string
	c := &cobra.Command{
		Use:     "analyse RUN",
		GroupID: "after",
		Short:   "Works out sag, stiffness and creep of a run",
		Long: `Reads a run folder back and works out the load steps, the sag of each gauge,
stiffness, creep, recovery, drift and what disturbed the test, each with its
uncertainty. The folder is only read. A run that is still being recorded is
analysed up to its last completed sync.`,
		Example: "  gaugelog analyse runs/first --json > result.json",
		Args:    oneRun,
		RunE: func(cmd *cobra.Command, args []string) error {
			if units != "si" && units != "us" {
				return wrongf("give --units si or --units us", "units %q are not known", units)
			}
			r, opt, err := readRun(args[0], beyond)
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
		},
	}
	c.Flags().BoolVar(&asJSON, "json", false, "print the whole result as JSON (layout: analysis/schema.json)")
	c.Flags().BoolVar(&beyond, "beyond", false, "forecast more than two decades of time beyond the data")
	c.Flags().StringVar(&units, "units", "si", "units of the text: si or us")
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

// analyseRun reads and evaluates a run folder, and returns the rig as amended.
func analyseRun(dir string, beyond bool) (*analysis.Result, *config.Rig, error) {
	h, r, err := evaluateRun(dir, beyond)
	if err != nil {
		return nil, nil, err
	}
	return r, h.Rig, nil
}

// evaluateRun reads and evaluates a run folder.
func evaluateRun(dir string, beyond bool) (*history.History, *analysis.Result, error) {
	h, err := history.Load(dir)
	if err != nil {
		return nil, nil, wrongInput(err)
	}
	r, err := analysis.Evaluate(h, analysis.Options{Program: version(), Beyond: beyond, Rules: filepath.Join(dir, analysis.RulesFolder)})
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
	enc := json.NewEncoder(w)
	enc.SetIndent("", " ")
	enc.SetEscapeHTML(false)
	if err := enc.Encode(v); err != nil {
		return fmt.Errorf("writing JSON: %w", err)
	}
	return nil
}
