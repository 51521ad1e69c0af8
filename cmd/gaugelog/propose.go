package main

import (
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"os"
	"strings"

	"github.com/spf13/cobra"
	"golang.org/x/term"

	"gaugelog/device/guess"
)

// tellTries returns what tells, line by line, what is tried next. On a terminal
// the many requests take one line between them.
func tellTries(w io.Writer) func(string) {
	f, ok := w.(*os.File)
	if !ok || !term.IsTerminal(int(f.Fd())) {
		return func(s string) { fmt.Fprintln(w, s) }
	}
	open := false
	return func(s string) {
		if open {
			fmt.Fprint(w, "\r\x1b[K")
		}
		if open = strings.HasPrefix(s, "asking at "); open {
			fmt.Fprint(w, s)
			return
		}
		fmt.Fprintln(w, s)
	}
}

// proposalJSON is a proposal as `listen --guess --json` prints it.
type proposalJSON struct {
	YAML   string   `json:"yaml"`
	Sure   []string `json:"sure"`
	Unsure []string `json:"unsure"`
	Frames int      `json:"frames"`
	Share  float64  `json:"share"` // of the bytes that the frames hold
	Values []string `json:"values"`
}

func printProposals(cmd *cobra.Command, list []guess.Proposal, heard []guess.Capture, asJSON bool) error {
	if asJSON {
		out := []proposalJSON{}
		for _, p := range list {
			out = append(out, proposalJSON{p.YAML(), append([]string{}, p.Sure...), append([]string{}, p.Unsure...), p.Frames, p.Share, append([]string{}, p.Values...)})
		}
		return printJSON(cmd.OutOrStdout(), out)
	}
	if len(list) == 0 {
		return failed(errors.New(nothingProposed(heard)), "check cable and power, press the instrument's send button meanwhile, and see its manual for line settings and request")
	}
	for i, p := range list[:min(3, len(list))] {
		w := cmd.OutOrStdout()
		if i == 0 {
			fmt.Fprintln(w, "# Paste under frames: in the rig file, and read the manual on what is not sure.")
		} else {
			fmt.Fprintln(w, "# Or, less likely:")
		}
		for _, v := range p.Values {
			fmt.Fprintf(w, "  # reads %s\n", v)
		}
		fmt.Fprint(w, p.YAML())
	}
	return nil
}

func nothingProposed(heard []guess.Capture) string {
	var some []byte
	for _, c := range heard {
		some = append(some, c.Bytes()...)
	}
	if len(some) == 0 {
		return "nothing came, asked or unasked"
	}
	return fmt.Sprintf("%d bytes came and make no sense as frames, such as %s", len(some), hex.EncodeToString(some[:min(16, len(some))]))
}
