package main

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"time"

	"github.com/spf13/cobra"

	"gaugelog/ingest"
	"gaugelog/simulators"
)

func demoCommand() *cobra.Command {
	var into string
	var seed uint64
	var replace bool
	c := &cobra.Command{
		Use:     "demo",
		GroupID: "prepare",
		Short:   "Runs a whole test on a simulated rig, from bytes to report",
		Long: `Runs a whole sag test on a simulated rig: a larch plank, eight gauges, four
load steps, a week under load and a day of recovery, with a late mark, a spike,
a knocked gauge and a power cut. The bytes go through real pseudo-terminals and
the code that reads real gauges; only the time is virtual, so it takes seconds.
The same seed gives the same run folder, byte for byte.`,
		Example: "  gaugelog demo --into demo --seed 1",
		Args:    cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			return runDemo(cmd, into, seed, replace)
		},
	}
	c.Flags().StringVar(&into, "into", "demo", "folder to leave the run in")
	c.Flags().BoolVar(&replace, "replace", false, "let the folder of an earlier demo go; no other folder is ever replaced")
	c.Flags().Uint64Var(&seed, "seed", 1, "seed of noise, jitter and faults")
	return c
}

// demoSign marks a folder as a demo's, so that a second demo may replace it
// and nothing else is ever overwritten.
const demoSign = "demo: this run was simulated; `gaugelog demo` may replace this folder\n"

func runDemo(cmd *cobra.Command, into string, seed uint64, replace bool) error {
	if err := clearDemo(into, replace); err != nil {
		return err
	}
	demo := simulators.DemoRig()
	sim, err := simulators.New(simulators.Options{Rig: demo.Rig, Truth: demo.Truth, Faults: demo.Faults, Seed: seed})
	if err != nil {
		return err
	}
	dir, err := ingest.OpenDir(into, ingest.DirOptions{Create: true, Virtual: true})
	if err != nil {
		return err
	}
	defer dir.Close()
	bar := newProgress(cmd.ErrOrStderr(), "recording eight days of readings", sim.End())
	c := &conductor{
		source: sim, computer: sim, progress: bar.at,
		runs: []*conductedRun{{rig: demo.Rig, rigText: demo.RigText, fs: dir.FS(), runID: fmt.Sprintf("demo-%d", seed)}},
	}
	began := time.Now()
	if err := c.conduct(cmd.Context()); err != nil {
		return err
	}
	bar.done()
	if err := leaveTruth(into, sim); err != nil {
		return err
	}
	page, err := writeReport(cmd.Context(), into, reportOptions{format: "html"})
	if err != nil {
		return err
	}
	fmt.Fprintf(cmd.ErrOrStderr(), "done in %.1f s\n", time.Since(began).Seconds())
	fmt.Fprintf(cmd.OutOrStdout(), "run:    %s\nreport: %s\n", into, page)
	return nil
}

// clearDemo makes room for the demo: an earlier demo goes where replace is set,
// anything else is left alone and refused.
func clearDemo(into string, replace bool) error {
	entries, err := os.ReadDir(into)
	if errors.Is(err, fs.ErrNotExist) || err == nil && len(entries) == 0 {
		return nil
	}
	if err != nil {
		return err
	}
	if sign, err := os.ReadFile(filepath.Join(into, "demo.txt")); err != nil || string(sign) != demoSign {
		return wrongf("give another folder with --into", "%s is not empty and was not left by a demo", into)
	}
	if !replace {
		return wrongf("give another folder with --into, or --replace to let that one go", "%s holds an earlier demo", into)
	}
	return os.RemoveAll(into)
}

// leaveTruth writes what the simulated rig really did beside the run, and the
// sign that the folder is a demo's.
func leaveTruth(into string, sim *simulators.Sim) error {
	f, err := os.Create(filepath.Join(into, "truth.jsonl"))
	if err != nil {
		return err
	}
	if err := errors.Join(sim.WriteTruth(f, []float64{60, 3600, 86400, 72 * 3600, 168*3600 - 60}), f.Close()); err != nil {
		return err
	}
	return os.WriteFile(filepath.Join(into, "demo.txt"), []byte(demoSign), 0o644)
}
