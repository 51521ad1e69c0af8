package main

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"slices"
	"time"

	"github.com/spf13/cobra"

	"gaugelog/config"
	"gaugelog/device/devicetest"
	"gaugelog/device/guess"
	"gaugelog/device/listen"
)

// saveCapture writes what passes into a new file. The function returned ends
// it and tells whether all was written.
func saveCapture(o *listen.Options, name string) (func() error, error) {
	w, err := os.OpenFile(name, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o644)
	if errors.Is(err, fs.ErrExist) {
		return nil, wrongf("give another name, or remove it first", "%s exists already", name)
	}
	if err != nil {
		return nil, err
	}
	record := &devicetest.Record{Opener: o.Opener, W: w}
	o.Opener = record
	port := o.Port
	began := false
	o.Opened = func(l config.Line) {
		began = true
		// Its error shows in the next event's, which Record keeps.
		fmt.Fprintln(w, devicetest.LineComment(port, l))
	}
	return func() error {
		if !began {
			return errors.Join(w.Close(), os.Remove(name))
		}
		return errors.Join(record.Err(), w.Sync(), w.Close())
	}, nil
}

// replayCapture listens to a file.
func replayCapture(cmd *cobra.Command, f listenFlags) error {
	r, err := os.Open(f.replay)
	if err != nil {
		return wrong(err, "name a capture that `listen --save` wrote")
	}
	defer r.Close()
	events, err := devicetest.ReadCapture(r)
	if err != nil {
		return wrong(fmt.Errorf("%s: %w", f.replay, err), "name a capture that `listen --save` wrote")
	}
	if f.guess {
		captures := capturesOf(events)
		return printProposals(cmd, guess.Propose(captures...), captures, f.asJSON)
	}
	for _, e := range events {
		switch e.What {
		case "<", ">":
			printChunk(cmd.OutOrStdout(), e.What, guess.Chunk{At: e.At, Bytes: e.Bytes}, f.asJSON)
		case "line":
			fmt.Fprintf(cmd.ErrOrStderr(), "%s at %s\n", e.Port, listen.Words(e.Line))
		case "lost":
			fmt.Fprintf(cmd.ErrOrStderr(), "%s was lost after %s\n", e.Port, e.At.Round(time.Millisecond))
		}
	}
	return nil
}

// capturesOf sorts a capture's events into listenings: one an opening, and one
// a request that differs from the last.
func capturesOf(events []devicetest.Event) []guess.Capture {
	var out []guess.Capture
	open := map[string]int{} // the port's listening that goes on
	begin := func(e devicetest.Event, c guess.Capture) {
		out = append(out, c)
		open[e.Port] = len(out) - 1
	}
	for _, e := range events {
		i, known := open[e.Port]
		switch {
		case e.What == "open" || !known:
			begin(e, guess.Capture{})
			i = open[e.Port]
		case e.What == "line":
			out[i].Line = e.Line
		}
		switch c := &out[i]; {
		case e.What == ">" && len(c.Chunks) == 0:
			c.Request = e.Bytes
		case e.What == ">" && string(c.Request) != string(e.Bytes):
			begin(e, guess.Capture{Line: c.Line, Request: e.Bytes})
		case e.What == "<":
			c.Chunks = append(c.Chunks, guess.Chunk{At: e.At, Bytes: e.Bytes})
		}
	}
	return together(out)
}

// together makes one of the listenings that asked the same at one setting.
func together(list []guess.Capture) (out []guess.Capture) {
	for _, c := range list {
		same := func(o guess.Capture) bool { return o.Line == c.Line && string(o.Request) == string(c.Request) }
		if i := slices.IndexFunc(out, same); i >= 0 {
			out[i].Chunks = append(out[i].Chunks, c.Chunks...)
			continue
		}
		out = append(out, c)
	}
	return out
}
