package main

import (
	"fmt"
	"slices"

	"github.com/spf13/cobra"

	"gaugelog/config"
)

// nudgeFlags are the flags of `nudge`.
type nudgeFlags struct {
	all, write, yes    bool
	ports, lasts, size string
	gauges             []string
}

func nudgeCommand() *cobra.Command {
	var f nudgeFlags
	c := &cobra.Command{
		Use:     "nudge RIG",
		GroupID: "prepare",
		Short:   "Which gauge is on which port? Touch them in turn",
		Long: `Watches the ports of a rig (--all: every port of this machine) and asks you to
touch each gauge in turn: move its plunger the way the beam takes it when it sags,
by half a millimetre or so, and let go. It says which port moved, by how much and
which way. "s" and Enter skips a gauge, "u" takes the last one back, "q" ends with
what was found. A movement of two at once is told and not counted. While nothing
moves it shows every quarter of a minute what each port reads.

--write puts port and sense into the rig file, after showing the lines and asking;
comments and order stay, and a gauge that was not found keeps what it has.`,
		Example: "  gaugelog nudge rig.yaml --all --write",
		Args:    cobra.ExactArgs(1),
		RunE:    func(cmd *cobra.Command, args []string) error { return runNudge(cmd, args[0], f) },
	}
	fl := c.Flags()
	fl.BoolVar(&f.all, "all", false, "watch every port of this machine, by the frames the rig's gauges have")
	fl.StringSliceVar(&f.gauges, "gauge", nil, "ask for this gauge only (may be repeated)")
	fl.StringVar(&f.size, "size", "0.05 mm", "the smallest movement that counts")
	fl.StringVar(&f.lasts, "for", "", "give up after this time (default: wait until all were touched)")
	fl.StringVar(&f.ports, "ports", "", "file of \"name path\" lines that say where the ports are, as `simulate` prints them")
	fl.BoolVar(&f.write, "write", false, "put port and sense into the rig file")
	fl.BoolVar(&f.yes, "yes", false, "with --write: do not ask")
	return c
}

func runNudge(cmd *cobra.Command, rigFile string, f nudgeFlags) (err error) {
	rig, file, err := openRig(rigFile)
	if err != nil {
		return err
	}
	wanted, err := gaugesWanted(rig, f.gauges)
	if err != nil {
		return err
	}
	size, err := config.ParseLength(f.size)
	if err != nil {
		return wrong(fmt.Errorf("--size: %w", err), mendOf(err))
	}
	opener, err := openerOf(f.ports)
	if err != nil {
		return err
	}
	ctx, stop, err := lasting(cmd.Context(), f.lasts)
	if err != nil {
		return err
	}
	defer stop()
	sources := sourcesOf(rig)
	if f.all {
		if sources, err = everySource(ctx, cmd.ErrOrStderr(), rig, opener); err != nil {
			return err
		}
	}
	if len(sources.Gauges) == 0 {
		return wrongf("add port: and frame: to the gauges, or give --all", "no gauge of the rig has a port and a frame to be read by")
	}
	lines := typed(cmd.Context(), cmd.InOrStdin())
	found, err := touchAll(ctx, cmd, sources, wanted, opener, lines, size.Value)
	if err != nil {
		return err
	}
	for _, w := range shared(rig, found) {
		fmt.Fprintln(cmd.ErrOrStderr(), w)
	}
	if f.write {
		for _, t := range found {
			if err := putTouched(file, t); err != nil {
				return err
			}
		}
		if err := file.write(cmd, lines, f.yes); err != nil {
			return err
		}
	}
	if len(found) < len(wanted) {
		return failed(fmt.Errorf("%d of %d gauges were not told apart", len(wanted)-len(found), len(wanted)), "run it again with --gauge for those")
	}
	return nil
}

// gaugesWanted are the gauges to be touched, in the rig's order.
func gaugesWanted(rig *config.Rig, names []string) ([]config.Gauge, error) {
	for _, n := range names {
		if _, _, err := gaugeOf(rig, n); err != nil {
			return nil, err
		}
	}
	var out []config.Gauge
	for _, g := range rig.Gauges {
		if len(names) == 0 || slices.Contains(names, g.Name) {
			out = append(out, g)
		}
	}
	return out, nil
}
