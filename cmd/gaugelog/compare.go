package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"slices"

	"github.com/spf13/cobra"

	"gaugelog/analysis"
	"gaugelog/analysis/compare"
	"gaugelog/analysis/report"
	"gaugelog/config"
)

func compareCommand() *cobra.Command {
	var asJSON, spans bool
	var units, plot string
	c := &cobra.Command{
		Use:     "compare RUN RUN...",
		GroupID: "after",
		Short:   "Sets runs side by side: specimens, or one specimen at several spans",
		Long: `Analyses several runs and sets them side by side: moduli and creep coefficients
with the differences between runs and the statistics of the sample. What two runs
share (the same gauge with the same calibration, gravity of one place, the same
masses) drops out of a difference, and it says what does.

Runs of one specimen at several spans, loaded in the middle, give its modulus and
its shear modulus together: the inverse of the apparent modulus lies on a line over
(h/L)^2. --spans makes it an error where that cannot be worked out; --plot draws
the line and its points.`,
		Example: "  gaugelog compare runs/board-1 runs/board-2 runs/board-3",
		Args: func(cmd *cobra.Command, args []string) error {
			if len(args) < 2 {
				return wrongf("give two run folders or more", "%d run is nothing to compare", len(args))
			}
			return nil
		},
		RunE: func(cmd *cobra.Command, args []string) error {
			if !slices.Contains(report.Units, units) {
				return wrongf("give --units si or --units us", "units %q are not known", units)
			}
			subjects, err := subjectsOf(cmd.Context(), args, cmd.ErrOrStderr())
			if err != nil {
				return err
			}
			if spans {
				if _, err := compare.VariableSpan(subjects); err != nil {
					return wrong(err, mendOf(err))
				}
			}
			c, err := compare.Compare(subjects)
			if err != nil {
				return wrong(err, mendOf(err))
			}
			if plot != "" {
				if err := drawSpans(plot, c.Spans, units); err != nil {
					return err
				}
			}
			if asJSON {
				return printJSON(cmd.OutOrStdout(), c)
			}
			return teller{cmd.OutOrStdout(), units}.comparison(c)
		},
		ValidArgsFunction: func(*cobra.Command, []string, string) ([]string, cobra.ShellCompDirective) {
			return nil, cobra.ShellCompDirectiveFilterDirs
		},
	}
	c.Flags().BoolVar(&asJSON, "json", false, "print the comparison as JSON")
	c.Flags().StringVar(&units, "units", "si", "units of the text and the plot: si or us")
	c.Flags().StringVar(&plot, "plot", "", "draw 1/E_apparent over (h/L)^2 of several spans into this SVG file")
	c.Flags().BoolVar(&spans, "spans", false, "the runs are one specimen at several spans; fail where they are not fit for it")
	return c
}

// subjectsOf analyses the runs; every one that cannot be is told of.
func subjectsOf(ctx context.Context, runs []string, progress io.Writer) ([]compare.Subject, error) {
	var out []compare.Subject
	var errs []error
	for _, run := range runs {
		if err := needRun(run); err != nil {
			errs = append(errs, err)
			continue
		}
		var r *analysis.Result
		var rig *config.Rig
		r, rig, err := analyseRun(ctx, run, progress)
		if err != nil {
			errs = append(errs, fmt.Errorf("%s: %w", run, err))
			continue
		}
		out = append(out, compare.Subject{Run: run, Rig: rig, Result: r})
	}
	return out, errors.Join(errs...)
}
