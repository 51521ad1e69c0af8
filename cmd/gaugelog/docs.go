package main

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"runtime/debug"
	"time"

	"github.com/spf13/cobra"
	"github.com/spf13/cobra/doc"
)

// docsCommand is for those who package gaugelog, so it is not listed.
func docsCommand() *cobra.Command {
	var into string
	c := &cobra.Command{
		Use:    "docs",
		Hidden: true,
		Short:  "Writes man pages and shell completions",
		Long: `Writes the man pages of all commands and completions for bash, zsh, fish and
PowerShell into a new folder: man1/*.1 and completions/. The same build writes the
same bytes.`,
		Args: cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			if into == "" {
				return wrongf("give --into FOLDER", "no folder was given")
			}
			if err := os.Mkdir(into, 0o755); err != nil {
				return wrong(err, "give a folder that is not there yet, in one that is")
			}
			if err := writeDocs(cmd.Root(), into); err != nil {
				return errors.Join(err, os.RemoveAll(into))
			}
			fmt.Fprintf(cmd.OutOrStdout(), "wrote %s\n", into)
			return nil
		},
	}
	c.Flags().StringVar(&into, "into", "", "the folder to make")
	return c
}

func writeDocs(root *cobra.Command, into string) error {
	man, completions := filepath.Join(into, "man1"), filepath.Join(into, "completions")
	for _, dir := range []string{man, completions} {
		if err := os.Mkdir(dir, 0o755); err != nil {
			return err
		}
	}
	root.DisableAutoGenTag = true
	built := builtAt()
	header := &doc.GenManHeader{Section: "1", Date: &built, Source: "gaugelog", Manual: "Sag tests"}
	if err := doc.GenManTree(root, header, man); err != nil {
		return err
	}
	return errors.Join(
		root.GenBashCompletionFileV2(filepath.Join(completions, "gaugelog.bash"), true),
		root.GenZshCompletionFile(filepath.Join(completions, "_gaugelog")),
		root.GenFishCompletionFile(filepath.Join(completions, "gaugelog.fish"), true),
		root.GenPowerShellCompletionFileWithDesc(filepath.Join(completions, "gaugelog.ps1")),
	)
}

// builtAt is the time of the source the program was built from, so that the
// same build writes the same pages; 1970 where it is not known.
func builtAt() time.Time {
	if info, ok := debug.ReadBuildInfo(); ok {
		for _, s := range info.Settings {
			if t, err := time.Parse(time.RFC3339, s.Value); s.Key == "vcs.time" && err == nil {
				return t.UTC()
			}
		}
	}
	return time.Unix(0, 0).UTC()
}
