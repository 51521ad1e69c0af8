package main

import (
	"fmt"
	"io"
	"os"
	"path/filepath"
	"sync/atomic"

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
			disk := &counted{FS: dir.FS()}
			stop := working(cmd.ErrOrStderr(), "checking "+args[0], verifyReads*sizeOf(args[0]), disk.read.Load)
			v, err := segment.Verify(disk)
			stop()
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

// verifyReads is how often each byte is read: once for its hash, once for its blocks.
const verifyReads = 2

// counted counts what is read through a file system.
type counted struct {
	segment.FS
	read atomic.Int64
}

// Open opens a file whose reads count.
func (c *counted) Open(name string) (segment.File, error) {
	f, err := c.FS.Open(name)
	if err != nil {
		return nil, err
	}
	return countedFile{f, &c.read}, nil
}

type countedFile struct {
	segment.File
	read *atomic.Int64
}

func (f countedFile) ReadAt(p []byte, off int64) (int, error) {
	n, err := f.File.ReadAt(p, off)
	f.read.Add(int64(n))
	return n, err
}

// sizeOf is the bytes of a run folder that are checked, 1 at least: for a bar, so
// what cannot be seen counts as nothing.
func sizeOf(run string) int64 {
	n := int64(1)
	for _, part := range []string{"readings", "photos"} {
		entries, _ := os.ReadDir(filepath.Join(run, part))
		for _, e := range entries {
			if info, err := e.Info(); err == nil {
				n += info.Size()
			}
		}
	}
	return n
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
