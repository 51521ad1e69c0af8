package main

import (
	"errors"
	"fmt"
	"os"
	"time"

	"github.com/spf13/cobra"

	"gaugelog/config"
)

func newCommand() *cobra.Command {
	var output string
	var replace bool
	var o config.TemplateOptions
	c := &cobra.Command{
		Use:     "new",
		GroupID: "prepare",
		Short:   "Writes a commented rig file",
		Long: `Writes a rig file that shows every key with its default and says what it is
for. Change it to your specimen, supports, gauges and loads, then let
"gaugelog check" read it.`,
		Example: "  gaugelog new --output rig.yaml",
		Args:    cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			text := config.Template(o)
			if output == "" {
				_, err := cmd.OutOrStdout().Write(text)
				return err
			}
			if err := writeNew(cmd, output, text, replace); err != nil {
				return err
			}
			fmt.Fprintf(cmd.ErrOrStderr(), "wrote %s; next: gaugelog check %s\n", output, output)
			return nil
		},
	}
	c.Flags().StringVar(&output, "output", "", "file to write (default: standard output)")
	c.Flags().BoolVar(&replace, "replace", false, "put it in the place of the file that is there, which is kept beside it under a dated name")
	c.Flags().StringVar(&o.Port, "port", "", "port of the gauge, as gaugelog ports names it")
	return c
}

// writeNew writes a file that was not there; with replace, what was there goes
// to a name with the date first, and is never overwritten.
func writeNew(cmd *cobra.Command, name string, text []byte, replace bool) error {
	old, err := os.Lstat(name)
	switch {
	case err == nil && !replace:
		return wrongf("give another name, or --replace, which keeps the old one under a dated name", "%s exists already", name)
	case err == nil && !old.Mode().IsRegular():
		return wrongf("give another name", "%s is no ordinary file", name)
	case err == nil:
		kept := name + ".bak-" + time.Now().UTC().Format("20060102T150405Z")
		// A link fails where the name is taken, a renaming would not.
		if err := os.Link(name, kept); err != nil {
			return fmt.Errorf("keeping the old %s: %w", name, err)
		}
		if err := os.Remove(name); err != nil {
			return err
		}
		fmt.Fprintf(cmd.ErrOrStderr(), "kept the old one as %s\n", kept)
	}
	f, err := os.OpenFile(name, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o644)
	if err != nil {
		return err
	}
	if _, err = f.Write(text); err == nil {
		err = f.Sync()
	}
	if err = errors.Join(err, f.Close()); err != nil {
		os.Remove(name)
	}
	return err
}
