package main

import (
	"fmt"
	"io"

	"github.com/spf13/cobra"

	"gaugelog/ingest"
	"gaugelog/ingest/segment"
)

func verifyCommand() *cobra.Command {
	var asJSON bool
	c := &cobra.Command{
		Use:     "verify RUN",
		GroupID: "after",
		Short:   "Checks every byte of a run folder, changing nothing",
		Long: `Checks every block of every segment and log, every hash in SHA256SUMS and the
rig file against the hash in each header. Nothing is changed. Damage is named
with its file, block and the time of the readings in it, and ends with exit
code 3; an unfinished tail, which a power cut leaves, is counted and is no damage.`,
		Example: "  gaugelog verify runs/first",
		Args:    oneRun,
		RunE: func(cmd *cobra.Command, args []string) error {
			dir, err := ingest.OpenDir(args[0], ingest.DirOptions{})
			if err != nil {
				return err
			}
			defer dir.Close()
			v, err := segment.Verify(dir.FS())
			if err != nil {
				return err
			}
			if asJSON {
				err = printJSON(cmd.OutOrStdout(), v)
			} else {
				printVerified(cmd.OutOrStdout(), v)
			}
			if err == nil && !v.Whole() {
				err = errNotHeld
			}
			return err
		},
	}
	c.Flags().BoolVar(&asJSON, "json", false, "print what was found as JSON")
	return c
}

func printVerified(w io.Writer, v *segment.Verified) {
	fmt.Fprintf(w, "%d files, %d bytes, %d readings, %d hashes agree\n", v.Files, v.Bytes, v.Readings, v.Summed)
	for _, d := range v.Damage {
		fmt.Fprintf(w, "DAMAGED %v\n", d)
	}
	for _, t := range v.Tails {
		fmt.Fprintf(w, "unfinished tail, left as it is: %v\n", t)
	}
	for _, t := range v.Quarantined {
		fmt.Fprintf(w, "set aside for its impossible time: %v\n", t)
	}
	if v.Whole() {
		fmt.Fprintln(w, "whole: nothing is damaged")
	}
}
