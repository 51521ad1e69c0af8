package main

import (
	"fmt"
	"os"

	"github.com/spf13/cobra"

	"gaugelog/config"
)

func newCommand() *cobra.Command {
	var output string
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
			f, err := os.OpenFile(output, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o644)
			if os.IsExist(err) {
				return wrongf("give another name, or remove it first", "%s exists already", output)
			}
			if err != nil {
				return err
			}
			if _, err := f.Write(text); err != nil {
				f.Close()
				os.Remove(output)
				return err
			}
			if err := f.Close(); err != nil {
				return err
			}
			fmt.Fprintf(cmd.ErrOrStderr(), "wrote %s; next: gaugelog check %s\n", output, output)
			return nil
		},
	}
	c.Flags().StringVar(&output, "output", "", "file to write (default: standard output)")
	c.Flags().StringVar(&o.Port, "port", "", "port of the gauge, as gaugelog ports names it")
	return c
}
