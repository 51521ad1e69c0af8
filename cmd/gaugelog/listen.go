package main

import (
	"errors"
	"fmt"
	"io"
	"io/fs"
	"strconv"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/device/guess"
	"gaugelog/device/listen"
)

// listenFlags are the flags of `listen`.
type listenFlags struct {
	line                        config.Line
	lasts, each, save, replay   string
	request, modbus, watch      string
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
commonly answer (none of them sets anything); --no-asking forbids that. Where
frames are found it watches a while longer: move the plunger, below zero too, and
press its unit and hold keys. What was not seen cannot be known.

Give what the manual says, and it is quicker and surer: with any of --baud,
--data-bits, --parity, --stop-bits only that setting is tried, with --request or
--modbus only that question is asked. With a send button, give --baud and --each
30s, and press it some six times with the display at different values.

Complete the proposal from the manual: what its "not sure" lines leave open, all
codes of status and unit, and the decimals. FRAMES.md explains every key.

--save keeps what was heard as a capture, a text file one event a line, which
--replay listens to in place of a port.`,
		Example: `  gaugelog listen usb:0403:6001:A10K3 --guess --save mid.capture
  gaugelog listen PORT --guess --baud 4800 --data-bits 7 --parity even --request '?\r'
  gaugelog listen PORT --guess --baud 19200 --parity even --modbus '17 holding 100 2'`,
		Args: cobra.MaximumNArgs(1),
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
	fl.StringVar(&f.modbus, "modbus", "", "ask Modbus RTU registers: bus address, holding or input, first register (from 0), how many")
	fl.StringVar(&f.watch, "watch", "10 s", "with --guess: watch so long where frames were found (0 s: not at all)")
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
	ctx, stop, err := lasting(cmd.Context(), f.lasts)
	if err != nil {
		return err
	}
	defer stop()
	if len(o.Request) > 0 {
		fmt.Fprintf(cmd.ErrOrStderr(), "asking %s by %q\n", port, o.Request)
	}
	// A port that stays silent looks like a program that hangs: say which it is.
	still := time.AfterFunc(5*time.Second, func() {
		fmt.Fprintf(cmd.ErrOrStderr(), "nothing yet at %s; still listening, Ctrl-C ends it\n", listen.Words(f.line))
	})
	defer still.Stop()
	o.Heard = func(k guess.Chunk) {
		still.Stop()
		printChunk(cmd.OutOrStdout(), "<", k, f.asJSON)
	}
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
	if o.Watch, err = spanFlag("watch", f.watch); err != nil {
		return err
	}
	o.Fixed = f.baudSet || f.bitsSet || f.paritySet || f.stopSet
	o.Say = tellTries(cmd.ErrOrStderr())
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
	if f.modbus != "" {
		if f.request != "" {
			return o, wrongf("leave one out", "--request and --modbus both say what to ask")
		}
		if o.Request, err = modbusFlag(f.modbus); err != nil {
			return o, err
		}
	}
	return o, nil
}

// modbusFlag makes the question of --modbus, such as "17 holding 100 2".
func modbusFlag(text string) ([]byte, error) {
	const mend = "write bus address (1 to 247), holding or input, first register (from 0: a manual's 40001 or 30001 is 0) and how many (1 to 125), such as '17 holding 100 2'"
	part := strings.Fields(text)
	if len(part) != 4 {
		return nil, wrongf(mend, "--modbus %q has %d words, not 4", text, len(part))
	}
	function := map[string]byte{"holding": 3, "input": 4}[part[1]]
	if function == 0 {
		return nil, wrongf(mend, "--modbus: %q is neither holding nor input", part[1])
	}
	var n [3]uint64
	for i, k := range []struct {
		text        string
		least, most uint64
	}{{part[0], 1, 247}, {part[2], 0, 65535}, {part[3], 1, 125}} {
		v, err := strconv.ParseUint(k.text, 10, 16)
		if err != nil || v < k.least || v > k.most {
			return nil, wrongf(mend, "--modbus: %q is no whole number from %d to %d", k.text, k.least, k.most)
		}
		n[i] = v
	}
	return guess.ModbusRead(byte(n[0]), function, uint16(n[1]), uint16(n[2])), nil
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
