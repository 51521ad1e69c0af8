package main

import (
	"errors"
	"fmt"
	"io"
	"time"

	"github.com/spf13/cobra"

	"gaugelog/config"
	"gaugelog/simulators"
	"gaugelog/simulators/terminals"
)

func simulateCommand() *cobra.Command {
	var truthFile, faultFile string
	var seed uint64
	c := &cobra.Command{
		Use:     "simulate RIG",
		GroupID: "prepare",
		Short:   "Puts a rig's gauges on pseudo-terminals, in real time",
		Long: `Opens a pseudo-terminal for every port of a rig file and lets simulated gauges
speak on them, in real time, until it is ended. It prints "name path" for each
port once all are open; "gaugelog record RIG --ports FILE" takes such a list.
The plan is followed by a simulated operator, who says on standard error what
was just done, so that you can mark it.

What the specimen really is comes from --truth, never from what the rig file
expects. Without it a plain specimen of the rig's material stands in, without creep.`,
		Example: "  gaugelog simulate rig.yaml --truth truth.yaml > ports.txt",
		Args:    cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			rig, err := config.LoadRig(args[0])
			if err != nil {
				return err
			}
			o := simulators.Options{Rig: rig, Seed: seed, Asked: true, Beyond: 10 * 365 * 24 * time.Hour,
				Start: simulators.Instant{Wall: time.Now().UnixNano(), Boot: 1}}
			if o.Truth, err = truthOf(rig, truthFile); err != nil {
				return wrong(err, "")
			}
			if faultFile != "" {
				if o.Faults, err = simulators.LoadFaults(faultFile); err != nil {
					return wrong(err, "")
				}
			}
			return runSimulation(cmd, o)
		},
	}
	c.Flags().StringVar(&truthFile, "truth", "", "file that says what the specimen and the gauges really are")
	c.Flags().StringVar(&faultFile, "faults", "", "file that says what goes wrong, and when")
	c.Flags().Uint64Var(&seed, "seed", 1, "seed of noise and faults")
	return c
}

// plainTruth is a specimen for who gives none: mid-range moduli of common
// materials (common practice), rigid supports, no creep.
func plainTruth(material string) string {
	modulus := map[string]string{"timber": "11000 MPa", "plastic": "1200 MPa", "metal": "70000 MPa"}[material]
	if modulus == "" {
		modulus = "5000 MPa"
	}
	return "specimen: {modulus: " + modulus + "}\nevery_gauge: {noise: 0.0005 mm, preset: 2 mm}\n"
}

func truthOf(rig *config.Rig, file string) (*simulators.Truth, error) {
	if file != "" {
		return simulators.LoadTruth(file)
	}
	return simulators.ParseTruth("the plain truth", []byte(plainTruth(rig.Specimen.Material)))
}

func runSimulation(cmd *cobra.Command, o simulators.Options) (err error) {
	sim, err := simulators.New(o)
	if err != nil {
		return wrong(err, "")
	}
	live, err := terminals.NewLive(sim)
	if err != nil {
		return err
	}
	defer func() { err = errors.Join(err, live.Close()) }()
	for _, t := range live.Terminals() {
		fmt.Fprintf(cmd.OutOrStdout(), "%s %s\n", t.Name, t.Path)
	}
	live.Event = func(e simulators.Event, path string) { tellEvent(cmd.ErrOrStderr(), e, path) }
	return live.Run(cmd.Context())
}

// tellEvent says what the simulated operator did, or what went wrong.
func tellEvent(w io.Writer, e simulators.Event, path string) {
	now := time.Now().Format("15:04:05")
	switch e.Kind {
	case simulators.MarkDue:
		fmt.Fprintf(w, "%s step %s:", now, e.Mark.Step)
		for _, l := range e.Mark.Loads {
			fmt.Fprintf(w, " %s is now %s", l.Name, l.Shown)
		}
		fmt.Fprintf(w, "; mark it: gaugelog mark RUN --step %s\n", e.Mark.Step)
	case simulators.Plugged:
		fmt.Fprintf(w, "%s plugged: %s is now %s\n", now, e.Port, path)
	default:
		fmt.Fprintf(w, "%s %s %s\n", now, e.Kind, e.Port)
	}
}
