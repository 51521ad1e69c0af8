package main

import (
	"errors"
	"fmt"
	"io"
	"strings"
	"text/tabwriter"

	"github.com/spf13/cobra"

	"gaugelog/analysis/report"
	"gaugelog/analysis/stiffness"
	"gaugelog/config"
)

// checked is what `check --json` prints.
type checked struct {
	Rig         string                `json:"rig"`
	Problems    []problemJSON         `json:"problems"`
	Prediction  *stiffness.Prediction `json:"prediction,omitempty"`
	NotForetold string                `json:"not_foretold,omitempty"`
}

type problemJSON struct {
	Line     int    `json:"line,omitempty"`
	Column   int    `json:"column,omitempty"`
	Severity string `json:"severity"`
	What     string `json:"what"`
	Mend     string `json:"mend,omitempty"`
}

func checkCommand() *cobra.Command {
	var asJSON bool
	c := &cobra.Command{
		Use:     "check RIG",
		GroupID: "prepare",
		Short:   "Checks a rig file and foretells sag, stress share and travel",
		Long: `Reads a rig file strictly, says what is wrong and where, and foretells for each
step of the plan the sag and slope at every gauge, the travel it will use, the
stress as a share of the strength, uplift, and how well the modulus can be known.`,
		Example: "  gaugelog check rig.yaml",
		Args:    cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			rig, err := config.LoadRig(args[0])
			if err != nil {
				return err
			}
			problems := append(rig.Check(), rig.CheckPorts()...)
			out := checked{Rig: args[0], Problems: []problemJSON{}}
			for _, p := range problems {
				out.Problems = append(out.Problems, problemJSON{p.Line, p.Col, p.Severity.String(), p.What, p.Fix})
			}
			out.Prediction, err = stiffness.Predict(rig)
			if err != nil {
				out.NotForetold = err.Error()
			}
			if asJSON {
				err = printJSON(cmd.OutOrStdout(), out)
			} else {
				err = printChecked(cmd.OutOrStdout(), rig, problems, out)
			}
			return errors.Join(err, wrongRig(cmd.ErrOrStderr(), problems, asJSON), outside(rig, out.Prediction))
		},
	}
	c.Flags().BoolVar(&asJSON, "json", false, "print what was found as JSON")
	return c
}

// wrongRig turns errors among the problems into the command's failure;
// warnings are printed and let pass.
func wrongRig(w io.Writer, problems []config.Problem, asJSON bool) error {
	var errs []error
	for _, p := range problems {
		if p.Severity == config.Error {
			errs = append(errs, p)
			continue
		}
		if !asJSON {
			fmt.Fprintf(w, "warning: %s\n", p.Error())
			if p.Fix != "" {
				fmt.Fprintf(w, "mend: %s\n", p.Fix)
			}
		}
	}
	return errors.Join(errs...)
}

// outside says whether the plan goes beyond a limit of the rig.
func outside(rig *config.Rig, p *stiffness.Prediction) error {
	if p == nil {
		return nil
	}
	for _, s := range p.Steps {
		over := rig.Limits.Sag != nil && s.WithCreep > rig.Limits.Sag.Value ||
			rig.Limits.CatcherGap != nil && s.WithCreep > rig.Limits.CatcherGap.Value
		for _, g := range s.Gauges {
			over = over || g.TravelUsed > 1
		}
		if over {
			return errNotHeld
		}
	}
	return nil
}

func printChecked(w io.Writer, rig *config.Rig, problems []config.Problem, c checked) error {
	fmt.Fprintf(w, "%s: %s, %s, %s, %s\n", c.Rig, count(len(rig.Gauges), "gauge"), count(len(rig.Supports), "support"),
		count(len(rig.Loads), "load"), count(len(rig.Plan), "planned step"))
	if c.Prediction == nil {
		fmt.Fprintf(w, "\nNothing is foretold: %s\n", c.NotForetold)
	} else {
		printSteps(w, rig, c.Prediction)
		printGauges(w, c.Prediction)
		printReach(w, c.Prediction)
		for _, warning := range c.Prediction.Warnings {
			fmt.Fprintf(w, "warning: %s\n", warning.Text)
		}
	}
	fmt.Fprintf(w, "\nCautions\n")
	for _, text := range report.Cautions {
		fmt.Fprintf(w, "  - %s\n", text)
	}
	return nil
}

// count prints a number with its noun.
func count(n int, noun string) string {
	if n != 1 {
		noun += "s"
	}
	return fmt.Sprintf("%d %s", n, noun)
}

func printSteps(w io.Writer, rig *config.Rig, p *stiffness.Prediction) {
	fmt.Fprintf(w, "\nThe plan, foretold with the expected modulus (sag from the baseline)\n")
	t := tabwriter.NewWriter(w, 0, 8, 2, ' ', tabwriter.AlignRight)
	fmt.Fprintf(t, "step\tgreatest sag, mm\tat, mm\twith creep, mm\tstress, MPa\tof strength\tlifts off\t\n")
	for _, s := range p.Steps {
		share, lifts := "–", "–"
		if s.StressShare > 0 {
			share = fmt.Sprintf("%.1f %%", 100*s.StressShare)
		}
		if len(s.Uplift) > 0 {
			lifts = strings.Join(s.Uplift, ", ")
		}
		fmt.Fprintf(t, "%s\t%.3f\t%.0f\t%.3f\t%.2f\t%s\t%s\t\n", s.Step, s.Greatest.Value, s.Greatest.At, s.WithCreep, s.Stress, share, lifts)
	}
	t.Flush()
	if rig.Limits.CatcherGap != nil {
		fmt.Fprintf(w, "The catcher is %s below the load.\n", rig.Limits.CatcherGap.Shown)
	}
}

func printGauges(w io.Writer, p *stiffness.Prediction) {
	fmt.Fprintf(w, "\nEach gauge at its farthest\n")
	t := tabwriter.NewWriter(w, 0, 8, 2, ' ', tabwriter.AlignRight)
	fmt.Fprintf(t, "gauge\tat, mm\tstep\tsag, mm\twith creep, mm\tslope, mm/m\ttravel used\t\n")
	if len(p.Steps) == 0 {
		return
	}
	for i := range p.Steps[0].Gauges {
		far := 0
		for k, s := range p.Steps {
			if abs(s.Gauges[i].WithCreep) > abs(p.Steps[far].Gauges[i].WithCreep) {
				far = k
			}
		}
		g := p.Steps[far].Gauges[i]
		used := "–"
		if g.TravelUsed > 0 {
			used = fmt.Sprintf("%.0f %%", 100*g.TravelUsed)
		}
		fmt.Fprintf(t, "%s\t%.0f\t%s\t%.3f\t%.3f\t%.2f\t%s\t\n", g.Gauge, g.AtMM, p.Steps[far].Step, g.Sag, g.WithCreep, 1000*g.Slope, used)
	}
	t.Flush()
}

func abs(v float64) float64 {
	if v < 0 {
		return -v
	}
	return v
}

func printReach(w io.Writer, p *stiffness.Prediction) {
	if p.Unreachable != "" {
		fmt.Fprintf(w, "\nHow well the modulus can be known: %s\n", p.Unreachable)
		return
	}
	fmt.Fprintf(w, "\nThe modulus can be known to %.2f %% (standard), %.2f %% for 95 %%; scatter and drift come on top\n", 100*p.RelativeU, 100*p.RelativeU95)
	for _, h := range p.Dominating {
		fmt.Fprintf(w, "  %.0f %% of it from %s; halve that and it is %.2f %%\n", 100*h.Share, h.Input, 100*h.RelativeU)
	}
	if p.CreepU > 0 {
		fmt.Fprintf(w, "The creep coefficient can be known to %.2g by the gauge alone\n", p.CreepU)
	}
}
