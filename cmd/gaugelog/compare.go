package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"strings"
	"text/tabwriter"
	"time"

	"github.com/spf13/cobra"

	"gaugelog/analysis"
	"gaugelog/analysis/compare"
	"gaugelog/config"
)

func compareCommand() *cobra.Command {
	var asJSON, spans bool
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
(h/L)^2. --spans makes it an error where that cannot be worked out. The points of
that plot stand in --json.`,
		Example: "  gaugelog compare runs/board-1 runs/board-2 runs/board-3",
		Args: func(cmd *cobra.Command, args []string) error {
			if len(args) < 2 {
				return wrongf("give two run folders or more", "%d run is nothing to compare", len(args))
			}
			return nil
		},
		RunE: func(cmd *cobra.Command, args []string) error {
			subjects, err := subjectsOf(cmd.Context(), args)
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
			if asJSON {
				return printJSON(cmd.OutOrStdout(), c)
			}
			return tellComparison(cmd.OutOrStdout(), c)
		},
		ValidArgsFunction: func(*cobra.Command, []string, string) ([]string, cobra.ShellCompDirective) {
			return nil, cobra.ShellCompDirectiveFilterDirs
		},
	}
	c.Flags().BoolVar(&asJSON, "json", false, "print the comparison as JSON")
	c.Flags().BoolVar(&spans, "spans", false, "the runs are one specimen at several spans; fail where they are not fit for it")
	return c
}

// subjectsOf analyses the runs; every one that cannot be is told of.
func subjectsOf(ctx context.Context, runs []string) ([]compare.Subject, error) {
	var out []compare.Subject
	var errs []error
	for _, run := range runs {
		if err := needRun(run); err != nil {
			errs = append(errs, err)
			continue
		}
		var r *analysis.Result
		var rig *config.Rig
		r, rig, err := analyseRun(ctx, run)
		if err != nil {
			errs = append(errs, fmt.Errorf("%s: %w", run, err))
			continue
		}
		out = append(out, compare.Subject{Run: run, Rig: rig, Result: r})
	}
	return out, errors.Join(errs...)
}

func tellComparison(w io.Writer, c *compare.Comparison) error {
	t := tabwriter.NewWriter(w, 0, 8, 2, ' ', 0)
	fmt.Fprintln(t, "\trun\tspecimen\tspan, mm")
	for i, s := range c.Specimens {
		fmt.Fprintf(t, "%d\t%s\t%s\t%g\n", i+1, s.Run, s.Specimen, s.SpanMM)
	}
	if err := t.Flush(); err != nil {
		return err
	}
	for _, f := range c.Figures {
		if err := tellFigure(w, f); err != nil {
			return err
		}
	}
	if c.Spans != nil {
		if err := tellSpans(w, c.Spans); err != nil {
			return err
		}
	}
	for _, warning := range c.Warnings {
		fmt.Fprintf(w, "warning: %s\n", warning.Text)
	}
	return nil
}

func tellFigure(w io.Writer, f compare.Figure) error {
	title := strings.ReplaceAll(f.Name, "_", " ")
	if f.Unit != "1" {
		title += ", " + f.Unit
	}
	if f.AfterS > 0 {
		title += " (" + (time.Duration(f.AfterS * float64(time.Second))).String() + " after full load)"
	}
	fmt.Fprintf(w, "\n%s\n", title)
	t := tabwriter.NewWriter(w, 0, 8, 2, ' ', tabwriter.AlignRight)
	for i, q := range f.Values {
		fmt.Fprintf(t, "  %d\t%s\t\n", i+1, valueWords(q))
	}
	for _, d := range f.Differences {
		fmt.Fprintf(t, "  %d less %d\t%s\t  %s\t\n", d.B+1, d.A+1, valueWords(&d.Value), differenceWords(d))
	}
	if err := t.Flush(); err != nil {
		return err
	}
	if s := f.Sample; s != nil {
		fmt.Fprintf(w, "  sample of %d: mean %.5g, standard deviation %.3g (%.1f %%), median %.5g, from %.5g to %.5g; the mean lies within ±%.3g (95 %%)\n",
			s.N, s.Mean, s.SD, 100*s.CV, s.Median, s.Least, s.Most, s.Half)
	}
	return nil
}

func differenceWords(d compare.Difference) string {
	if d.Value.U == nil {
		return "its uncertainty is not known"
	}
	words := "within 2 u"
	if d.Beyond {
		words = "beyond 2 u"
	}
	if len(d.Shared) > 0 {
		words += fmt.Sprintf("; u would be %.2g without what both share: %s", *d.UIndependent, strings.Join(d.Shared, ", "))
	}
	return words
}

// valueWords shows a value with its u, digits by two of u.
func valueWords(q *analysis.Q) string {
	switch {
	case q == nil:
		return "–"
	case q.U == nil:
		return fmt.Sprintf("%.4g", q.Value)
	}
	digits := 0
	for u := *q.U; u < 10 && digits < 9; u *= 10 {
		digits++
	}
	return fmt.Sprintf("%.*f, u %.*f", digits, q.Value, digits, *q.U)
}

func tellSpans(w io.Writer, s *compare.Spans) error {
	fmt.Fprintf(w, "\none specimen at several spans: 1/E_apparent over (h/L)^2\n")
	t := tabwriter.NewWriter(w, 0, 8, 2, ' ', tabwriter.AlignRight)
	fmt.Fprintln(t, "  span, mm\t(h/L)^2\t1/E_apparent, 1/GPa\tu\tline\t")
	for _, p := range s.Points {
		fmt.Fprintf(t, "  %g\t%.6f\t%.6f\t%.6f\t%.6f\t\n", p.SpanMM, p.X, 1000*p.Y, 1000*p.U, 1000*p.Fitted)
	}
	if err := t.Flush(); err != nil {
		return err
	}
	fmt.Fprintf(w, "  modulus %s MPa; shear modulus %s MPa (shear factor %.3f); correlation %.2f\n", valueWords(&s.Modulus), valueWords(&s.ShearModulus), s.ShearFactor, s.Correlation)
	if s.DOF > 0 {
		fmt.Fprintf(w, "  chi-square %.2f at %d degrees of freedom (p = %.2g)\n", s.Chi2, s.DOF, s.P)
	} else {
		fmt.Fprintln(w, "  two spans make a line whatever they are: a third would show whether it is one")
	}
	return nil
}
