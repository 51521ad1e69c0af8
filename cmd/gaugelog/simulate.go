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
	var f simulateFlags
	c := &cobra.Command{
		Use:     "simulate RIG...",
		GroupID: "prepare",
		Short:   "Puts the gauges of rigs on pseudo-terminals, in real time",
		Long: `Opens a pseudo-terminal for every port of a rig file and lets simulated gauges
speak on them, in real time, until it is ended. It prints "name path" for each
port once all are open; "gaugelog record RIG --ports FILE" takes such a list.
The plan is followed by a simulated operator, who says on standard error what
was just done, so that you can mark it. Several rigs may share ports and probes;
--truth and --faults are then given once for each rig, in the rigs' order.

What the specimen really is comes from --truth, never from what the rig file
expects. Without it a plain specimen of the rig's material stands in, without creep.`,
		Example: "  gaugelog simulate rig.yaml --truth truth.yaml > ports.txt",
		Args:    cobra.MinimumNArgs(1),
		RunE:    func(cmd *cobra.Command, args []string) error { return runSimulation(cmd, args, f) },
	}
	c.Flags().StringArrayVar(&f.truths, "truth", nil, "file that says what the specimen and the gauges really are")
	c.Flags().StringArrayVar(&f.faults, "faults", nil, "file that says what goes wrong, and when")
	c.Flags().Uint64Var(&f.seed, "seed", 1, "seed of noise and faults")
	return c
}

// simulateFlags are the flags of `simulate`.
type simulateFlags struct {
	truths, faults []string // one a rig, or none
	seed           uint64
}

// source builds the simulation of the rigs, and names their specimens.
func (f *simulateFlags) source(rigFiles []string) (*simulators.Joint, []string, error) {
	for flag, files := range map[string][]string{"truth": f.truths, "faults": f.faults} {
		if n := len(files); n > 0 && n != len(rigFiles) {
			return nil, nil, wrongf("give --"+flag+" once for each rig, in the rigs' order, or not at all", "--%s was given %d times for %d rigs", flag, n, len(rigFiles))
		}
	}
	start := simulators.Instant{Wall: time.Now().UnixNano(), Boot: 1}
	var sims []*simulators.Sim
	var names []string
	for i, file := range rigFiles {
		rig, err := config.LoadRig(file)
		if err != nil {
			return nil, nil, err
		}
		o := simulators.Options{Rig: rig, Seed: f.seed + uint64(i), Asked: true, Beyond: 10 * 365 * 24 * time.Hour, Start: start}
		truth := ""
		if len(f.truths) > 0 {
			truth = f.truths[i]
		}
		if o.Truth, err = truthOf(rig, truth); err != nil {
			return nil, nil, wrong(err, "")
		}
		if len(f.faults) > 0 {
			if o.Faults, err = simulators.LoadFaults(f.faults[i]); err != nil {
				return nil, nil, wrong(err, "")
			}
		}
		sim, err := simulators.New(o)
		if err != nil {
			return nil, nil, wrong(err, "")
		}
		sims, names = append(sims, sim), append(names, rig.Specimen.Name)
	}
	joint, err := simulators.Join(sims...)
	if err != nil {
		return nil, nil, wrong(err, "")
	}
	return joint, names, nil
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

func runSimulation(cmd *cobra.Command, rigFiles []string, f simulateFlags) (err error) {
	sim, names, err := f.source(rigFiles)
	if err != nil {
		return err
	}
	live, err := terminals.NewLive(sim)
	if err != nil {
		return err
	}
	defer func() { err = errors.Join(err, live.Close()) }()
	for _, t := range live.Terminals() {
		fmt.Fprintf(cmd.OutOrStdout(), "%s %s\n", t.Name, t.Path)
	}
	live.Event = func(e simulators.Event, path string) {
		run := "RUN"
		if len(names) > 1 {
			run = "RUN/" + names[e.Rig]
		}
		tellEvent(cmd.ErrOrStderr(), e, run, path)
		if e.Kind == simulators.Plugged {
			fmt.Fprintf(cmd.OutOrStdout(), "%s %s\n", e.Port, path)
		}
	}
	return live.Run(cmd.Context())
}

// tellEvent says what the simulated operator did, or what went wrong.
func tellEvent(w io.Writer, e simulators.Event, run, path string) {
	now := time.Now().Format("15:04:05")
	switch e.Kind {
	case simulators.MarkDue:
		fmt.Fprintf(w, "%s step %s:", now, e.Mark.Step)
		for _, l := range e.Mark.Loads {
			fmt.Fprintf(w, " %s is now %s", l.Name, l.Shown)
		}
		fmt.Fprintf(w, "; mark it: gaugelog mark %s --step %s\n", run, e.Mark.Step)
	case simulators.Plugged:
		fmt.Fprintf(w, "%s plugged: %s is now %s\n", now, e.Port, path)
	default:
		fmt.Fprintf(w, "%s %s %s\n", now, e.Kind, e.Port)
	}
}
