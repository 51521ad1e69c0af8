// Command gaugelog records, analyses and reports sag tests.
//
// This package wires and does nothing else: one file a command, each of which
// reads its flags, calls the package that does the work, and prints. It is
// the only place that may know both the simulators and the product.
//
// It promises the exit codes of [Code], errors in the form
// "gaugelog: FILE:LINE: what is wrong" with a line "mend: what to do" on
// standard error, and that a failed command leaves no output file behind.
package main

import (
	"context"
	"errors"
	"io"
	"os"
	"os/signal"
	"strings"
	"syscall"
	_ "time/tzdata" // the rig's time zone, on machines without a database

	"github.com/spf13/cobra"
)

func main() {
	os.Exit(int(run(os.Args[1:], os.Stdin, os.Stdout, os.Stderr)))
}

// run is the whole program but for the process: it returns the exit code.
func run(args []string, in io.Reader, out, errOut io.Writer) Code {
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	defer stop()
	root := newRoot()
	root.SetArgs(args)
	root.SetIn(in)
	root.SetOut(out)
	root.SetErr(errOut)
	if c, err := root.ExecuteContextC(ctx); err != nil {
		return printError(errOut, unitsOf(c), unknownCommand(err))
	}
	return Done
}

// unitsOf is what the command was told of --units, "" where it has no such flag.
func unitsOf(c *cobra.Command) string {
	if c == nil {
		return ""
	}
	if f := c.Flags().Lookup("units"); f != nil {
		return f.Value.String()
	}
	return ""
}

// newRoot builds the command tree. Tests call it too.
func newRoot() *cobra.Command {
	root := &cobra.Command{
		Use:   "gaugelog",
		Short: "Records sag tests and says how stiff, how creeping and how sure",
		Long: `gaugelog reads digital gauges over serial lines while loads hang on a beam,
keeps every reading in plain line-protocol files, matches them to load steps,
and works out sag, stiffness, creep and drift with their uncertainty, up to a
report to sign.

Suspended loads hurt people: keep clear, catch the load, follow your local code.

Exit codes: 0 done; 1 the work failed; 2 the rig file or the input is wrong;
3 done, but an evaluation, a limit or an integrity check did not hold.`,
		SilenceUsage:  true,
		SilenceErrors: true,
		Version:       version(),
	}
	root.SetFlagErrorFunc(func(c *cobra.Command, err error) error {
		return wrong(err, "see: "+c.CommandPath()+" --help")
	})
	root.AddGroup(
		&cobra.Group{ID: "prepare", Title: "Before the test:"},
		&cobra.Group{ID: "run", Title: "At the rig:"},
		&cobra.Group{ID: "after", Title: "From readings to report:"},
	)
	for _, c := range commands() {
		plainArgs(c)
		root.AddCommand(c)
	}
	return root
}

// plainArgs turns the library's complaint about the number of arguments into
// one that says how the command is used.
func plainArgs(c *cobra.Command) {
	check := c.Args
	if check == nil {
		return
	}
	c.Args = func(cmd *cobra.Command, args []string) error {
		err := check(cmd, args)
		var own *failure
		if err == nil || errors.As(err, &own) {
			return err
		}
		return wrongf("use it so: "+cmd.UseLine()+"; more: "+cmd.CommandPath()+" --help",
			"%s was given %d arguments and cannot do with them", cmd.Name(), len(args))
	}
}

// unknownCommand gives the library's error for a word that is no command its
// mend and exit code.
func unknownCommand(err error) error {
	if strings.HasPrefix(err.Error(), "unknown command") {
		what, _, _ := strings.Cut(err.Error(), "\n")
		return wrongf("gaugelog --help lists the commands", "%s", what)
	}
	return err
}
