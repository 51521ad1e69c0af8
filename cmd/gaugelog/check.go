package main

import (
	"errors"
	"fmt"
	"io"
	"slices"
	"time"

	"github.com/spf13/cobra"

	"gaugelog/analysis/report"
	"gaugelog/analysis/stiffness"
	"gaugelog/analysis/unitsystem"
	"gaugelog/config"
)

// checked is what `check --json` prints.
type checked struct {
	Rig         string                `json:"rig"`
	Problems    []problemJSON         `json:"problems"`
	Prediction  *stiffness.Prediction `json:"prediction,omitempty"`
	NotForetold string                `json:"not_foretold,omitempty"`
	// Calibrations are those that are no longer valid today.
	Calibrations []lapsed `json:"calibrations_lapsed"`
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
	var units string
	c := &cobra.Command{
		Use:     "check RIG",
		GroupID: "prepare",
		Short:   "Checks a rig file and foretells sag, stress share and travel",
		Long: `Reads a rig file strictly, says what is wrong and where, and foretells for each
step of the plan the sag and slope at every gauge, the travel it will use, the
stress as a share of the strength, uplift, how well the modulus and the creep can
be known and what would better that most, and whose calibration has lapsed.`,
		Example: "  gaugelog check rig.yaml",
		Args:    cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			if !slices.Contains(report.Units, units) {
				return wrongf("give --units si or --units us", "units %q are not known", units)
			}
			rig, err := config.LoadRig(args[0])
			if err != nil {
				return err
			}
			problems := append(rig.Check(), rig.CheckPorts()...)
			out := checked{Rig: args[0], Problems: []problemJSON{}, Calibrations: calibrationsAt(rig, time.Now())}
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
				err = foreteller{cmd.OutOrStdout(), units}.print(rig, out)
			}
			return errors.Join(err, wrongRig(cmd.ErrOrStderr(), units, problems, asJSON), outside(rig, out.Prediction))
		},
	}
	c.Flags().BoolVar(&asJSON, "json", false, "print what was found as JSON")
	c.Flags().StringVar(&units, "units", "si", "units of the text: si or us")
	return c
}

// wrongRig turns errors among the problems into the command's failure;
// warnings are printed and let pass.
func wrongRig(w io.Writer, units string, problems []config.Problem, asJSON bool) error {
	var errs []error
	for _, p := range problems {
		if p.Severity == config.Error {
			errs = append(errs, p)
			continue
		}
		if !asJSON {
			fmt.Fprintf(w, "warning: %s\n", unitsystem.Text(units, p.Error()))
			if p.Fix != "" {
				fmt.Fprintf(w, "mend: %s\n", unitsystem.Text(units, p.Fix))
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
