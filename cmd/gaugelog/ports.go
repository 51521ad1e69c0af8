package main

import (
	"cmp"
	"fmt"
	"text/tabwriter"

	"github.com/spf13/cobra"

	"gaugelog/device"
)

func portsCommand() *cobra.Command {
	var asJSON bool
	c := &cobra.Command{
		Use:     "ports",
		GroupID: "prepare",
		Short:   "Lists serial ports with the names that survive replugging",
		Long: `Lists the machine's serial ports without opening any: the stable identity to
write into a rig file, the device path of today, what it is, and which gaugelog
process holds it.`,
		Example: "  gaugelog ports",
		Args:    cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			list, err := device.ListPorts("", device.DefaultLockDir())
			if err != nil {
				return err
			}
			if asJSON {
				if list == nil {
					list = []device.PortInfo{}
				}
				return printJSON(cmd.OutOrStdout(), list)
			}
			if len(list) == 0 {
				fmt.Fprintln(cmd.ErrOrStderr(), "no serial port was found; plug the gauge's cable in and try again")
				return nil
			}
			t := tabwriter.NewWriter(cmd.OutOrStdout(), 0, 8, 2, ' ', 0)
			fmt.Fprintln(t, "identity\tpath\twhat it is\theld by")
			for _, p := range list {
				fmt.Fprintf(t, "%s\t%s\t%s\t%s\n", p.Identity, p.Path, p.What, cmp.Or(p.HeldBy, "–"))
			}
			return t.Flush()
		},
	}
	c.Flags().BoolVar(&asJSON, "json", false, "print the list as JSON")
	return c
}
