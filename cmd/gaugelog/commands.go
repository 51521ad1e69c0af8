package main

import (
	"errors"

	"github.com/spf13/cobra"

	"gaugelog/config"
)

// commands lists every command, in the order of the work.
func commands() []*cobra.Command {
	return []*cobra.Command{
		demoCommand(), newCommand(), checkCommand(), portsCommand(), simulateCommand(),
		listenCommand(), nudgeCommand(), sectionCommand(), roundCommand(), calibrateCommand(), serviceCommand(),
		recordCommand(), markCommand(), watchCommand(), forwardCommand(), rigsCommand(),
		analyseCommand(), reportCommand(), compareCommand(), verifyCommand(), exportCommand(), importCommand(), docsCommand(),
	}
}

// codeOf is the exit code an error asks for: what a command marked, 2 for
// anything wrong in a rig file, 1 for the rest.
func codeOf(err error) Code {
	var f *failure
	if errors.As(err, &f) {
		return f.code
	}
	var p config.Problem
	if errors.As(err, &p) {
		return Wrong
	}
	return Failed
}
