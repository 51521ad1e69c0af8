package main

import (
	"context"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"strconv"
	"time"

	"github.com/spf13/cobra"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/device/devicetest"
	"gaugelog/device/guess"
	"gaugelog/device/listen"
)

// listenFlags are the flags of `listen`.
type listenFlags struct {
	line                        config.Line
	lasts, each, save, replay   string
	request                     string
	guess, listenOnly, asJSON   bool
	baudSet, bitsSet, paritySet bool
	stopSet                     bool
}

func listenCommand() *cobra.Command {
	var f listenFlags
	c := &cobra.Command{
		Use:     "listen PORT",
		GroupID: "prepare",
		Short:   "Shows a port's bytes, and proposes a frame for the rig file",
		Long: `Shows what comes on a port as text and hex, with arrival times in seconds, until
Ctrl-C or --for ends it. PORT is a name from "gaugelog ports" or a device path.

--guess tries the usual line settings and proposes complete frame descriptions to
paste under "frames:" in the rig file, each with what it is sure of and what not.
If nothing comes unasked it says so, and then asks by the requests instruments
commonly answer (none of them sets anything); --no-asking forbids that. Move the
plunger meanwhile, below zero too: what was not seen cannot be known.

--save keeps what was heard as a capture, a text file one event a line, which
--replay listens to in place of a port.`,
		Example: "  gaugelog listen usb:0403:6001:A10K3 --guess --save mid.capture",
		Args:    cobra.MaximumNArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			fl := cmd.Flags()
			f.baudSet, f.bitsSet = fl.Changed("baud"), fl.Changed("data-bits")
			f.paritySet, f.stopSet = fl.Changed("parity"), fl.Changed("stop-bits")
			if f.replay != "" {
				if len(args) > 0 || f.save != "" {
					return wrongf("leave PORT and --save out", "--replay listens to a file alone")
				}
				return replayCapture(cmd, f)
			}
			if len(args) == 0 {
				return wrongf("give a port's name; `gaugelog ports` lists them", "no port was given")
			}
			return runListen(cmd, args[0], f)
		},
	}
	fl := c.Flags()
	fl.IntVar(&f.line.Baud, "baud", config.DefaultBaud, "speed of the line")
	fl.IntVar(&f.line.DataBits, "data-bits", config.DefaultDataBits, "data bits, 7 or 8")
	fl.StringVar(&f.line.Parity, "parity", "none", "none, even, odd, mark or space")
	fl.StringVar(&f.line.StopBits, "stop-bits", "1", "1, 1.5 or 2")
	fl.StringVar(&f.line.DTR, "dtr", "", "set the DTR line on or off (some cables take their power from it)")
	fl.StringVar(&f.line.RTS, "rts", "", "set the RTS line on or off")
	fl.StringVar(&f.lasts, "for", "", "end after this time, such as 30s (default: until Ctrl-C)")
	fl.BoolVar(&f.guess, "guess", false, "try the usual line settings and propose a frame")
	fl.StringVar(&f.each, "each", "3 s", "with --guess: listen so long at each setting")
	fl.BoolVar(&f.listenOnly, "no-asking", false, "with --guess: send nothing")
	fl.StringVar(&f.request, "request", "", `ask by these bytes, again and again, such as '?\r' (escapes \r \n \t \xHH)`)
	fl.StringVar(&f.save, "save", "", "keep what was heard in this file")
	fl.StringVar(&f.replay, "replay", "", "listen to a capture in place of a port")
	fl.BoolVar(&f.asJSON, "json", false, "print chunks (a line each) or proposals as JSON")
	return c
}

func runListen(cmd *cobra.Command, port string, f listenFlags) (err error) {
	o, err := listenOptions(cmd, port, f)
	if err != nil {
		return err
	}
	if f.save != "" {
		done, err := saveCapture(&o, f.save)
		if err != nil {
			return err
		}
		defer func() { err = errors.Join(err, done()) }()
	}
	if f.guess {
		return guessPort(cmd, o, f)
	}
	ctx := cmd.Context()
	if f.lasts != "" {
		d, err := spanFlag("for", f.lasts)
		if err != nil {
			return err
		}
		var stop context.CancelFunc
		ctx, stop = context.WithTimeout(ctx, d)
		defer stop()
	}
	if len(o.Request) > 0 {
		fmt.Fprintf(cmd.ErrOrStderr(), "asking %s by %q\n", port, o.Request)
	}
	o.Heard = func(k guess.Chunk) { printChunk(cmd.OutOrStdout(), "<", k, f.asJSON) }
	c, err := o.For(ctx, 0)
	if err == nil && len(c.Chunks) == 0 {
		fmt.Fprintf(cmd.ErrOrStderr(), "nothing came at %s; it may send when its button is pressed or only when asked: try --guess\n", listen.Words(f.line))
	}
	return portTrouble(port, err)
}

// guessPort tries settings and requests, and prints the proposals.
func guessPort(cmd *cobra.Command, o listen.Options, f listenFlags) (err error) {
	if o.Each, err = spanFlag("each", f.each); err != nil {
		return err
	}
	o.Fixed = f.baudSet || f.bitsSet || f.paritySet || f.stopSet
	o.Say = func(s string) { fmt.Fprintln(cmd.ErrOrStderr(), s) }
	o.Mute = f.listenOnly
	proposals, captures, err := o.Guess(cmd.Context())
	if err := portTrouble(o.Port, err); err != nil {
		return err
	}
	return printProposals(cmd, proposals, captures, f.asJSON)
}

// listenOptions reads the flags.
func listenOptions(cmd *cobra.Command, port string, f listenFlags) (listen.Options, error) {
	o := listen.Options{Opener: device.SystemOpener{}, Port: port, Line: f.line}
	request, err := requestFlag(f.request)
	if err != nil {
		return o, err
	}
	o.Request = request
	return o, nil
}

// requestFlag reads --request with its escapes.
func requestFlag(text string) ([]byte, error) {
	if text == "" {
		return nil, nil
	}
	s, err := strconv.Unquote(`"` + quoteBare(text) + `"`)
	if err != nil {
		return nil, wrongf(`write such as '?\r'; \r, \n, \t, \xHH and \\ are known`, "--request %s has an escape nobody knows", text)
	}
	return []byte(s), nil
}

// quoteBare escapes the double quotes of a text that has none escaped yet.
func quoteBare(s string) string {
	var out []byte
	for i := 0; i < len(s); i++ {
		switch {
		case s[i] == '\\' && i+1 < len(s):
			out = append(out, s[i], s[i+1])
			i++
		case s[i] == '"':
			out = append(out, '\\', '"')
		default:
			out = append(out, s[i])
		}
	}
	return string(out)
}

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

// portTrouble says what an error of a port means for whoever plugged it in.
func portTrouble(port string, err error) error {
	switch {
	case errors.Is(err, device.ErrUnplugged):
		return failed(fmt.Errorf("%s: %w", port, err), "plug the cable in and try again")
	case errors.Is(err, device.ErrHeld):
		return failed(err, "end the program that holds it first")
	case errors.Is(err, fs.ErrNotExist):
		return wrong(err, "`gaugelog ports` lists the ports of this machine")
	case errors.Is(err, fs.ErrPermission):
		return failed(err, "add this user to the group that owns the port (often dialout), then log in anew")
	}
	return err
}

// printChunk prints bytes; way is "<" from the instrument, ">" to it.
func printChunk(w io.Writer, way string, k guess.Chunk, asJSON bool) {
	if asJSON {
		// One object a line, so that it can be read while it grows.
		fmt.Fprintf(w, `{"at_s":%.6f,"way":%q,"text":%s,"hex":"%x"}`+"\n", k.At.Seconds(), way, strconv.QuoteToASCII(printableText(k.Bytes)), k.Bytes)
		return
	}
	for len(k.Bytes) > 0 {
		n := min(16, len(k.Bytes))
		fmt.Fprintf(w, "%12.6f %s %-47s  %s\n", k.At.Seconds(), way, spaced(k.Bytes[:n]), printableText(k.Bytes[:n]))
		k.Bytes = k.Bytes[n:]
	}
}

func spaced(p []byte) string { return fmt.Sprintf("% x", p) }

// printableText shows what is no ASCII text as a point.
func printableText(p []byte) string {
	out := make([]byte, len(p))
	for i, b := range p {
		out[i] = b
		if b < 0x20 || b > 0x7e {
			out[i] = '.'
		}
	}
	return string(out)
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
	return out
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
