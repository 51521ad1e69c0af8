package guess

import (
	"bytes"
	"cmp"
	"fmt"
	"slices"
	"time"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/device/frame"
)

// Chunk is what one read of a port gave.
type Chunk struct {
	At    time.Duration // since the capture began
	Bytes []byte
}

// Capture is what came over a line at one setting.
type Capture struct {
	Line config.Line
	// Request is what had been asked, nil where the bytes came unasked. Each
	// chunk sequence between two requests is one answer.
	Request []byte
	Chunks  []Chunk
}

// Bytes returns all bytes of the capture in their order.
func (c Capture) Bytes() []byte {
	var all []byte
	for _, k := range c.Chunks {
		all = append(all, k.Bytes...)
	}
	return all
}

// Proposal is one way to read a capture.
type Proposal struct {
	Frame config.Frame
	// Sure and Unsure say in words what the bytes show and what is assumed.
	Sure, Unsure []string
	// Frames is the number of whole frames found by it, Share the part of the
	// bytes that they hold, 0..1.
	Frames int
	Share  float64
	// Values are the first few values read, as text; nil where none was read
	// (a Modbus answer is judged by its registers).
	Values []string
	// rank puts the likelier first.
	rank float64
	// groups are the pattern's groups given out beside value, unit and sum.
	groups []string
}

func (p *Proposal) sure(format string, args ...any) {
	p.Sure = append(p.Sure, fmt.Sprintf(format, args...))
}

func (p *Proposal) unsure(format string, args ...any) {
	p.Unsure = append(p.Unsure, fmt.Sprintf(format, args...))
}

// LeastShare is the part of the bytes a proposal must explain to be made.
const LeastShare = 0.7

// Propose returns what the captures may be, the likeliest first; none where
// nothing fits. Captures at different line settings compete: at the wrong one
// bytes come out as rubbish and explain little.
func Propose(captures ...Capture) []Proposal {
	var out []Proposal
	for _, c := range captures {
		if len(c.Bytes()) == 0 || string(c.Request) == Identify {
			continue
		}
		if len(c.Request) > 0 {
			if p, ok := modbus(c); ok {
				out = append(out, p)
				continue
			}
		}
		c, lineWords := unmask(c)
		for _, kind := range []func(Capture) (Proposal, bool){scpi, text, hexNibbles, packedNibbles, fixed} {
			p, ok := kind(c)
			if !ok || p.Share < LeastShare {
				continue
			}
			p.Frame.Line = c.Line
			lineOf(&p, c, lineWords)
			if p.Values == nil {
				p.Values = read(p.Frame, c)
			}
			out = append(out, p)
		}
	}
	slices.SortStableFunc(out, func(a, b Proposal) int { return cmp.Compare(b.rank, a.rank) })
	// What is far less likely than the best is no help: rubbish at another
	// speed nearly always looks like something.
	out = slices.DeleteFunc(out, func(p Proposal) bool { return p.rank*2 < out[0].rank })
	for i := range out {
		if out[i].Frame.Name == "" {
			out[i].Frame.Name = "proposed"
		}
	}
	return out
}

// shownValues is the number of values read that a proposal shows.
const shownValues = 5

// read lets the frame package read a capture by a proposal, pauses and all,
// and returns the first values as text: what the display can be compared with.
func read(f config.Frame, c Capture) (values []string) {
	o, err := device.FrameOptions(f, "")
	if err != nil {
		return nil // a proposal that lacks something only the manual says
	}
	d, err := frame.New(o)
	if err != nil {
		return nil
	}
	take := func(f *frame.Frame) {
		if f.Rejected == frame.None && f.HasValue && len(values) < shownValues {
			values = append(values, f.Value.String()+" "+f.Unit.String())
		}
	}
	for i, k := range c.Chunks {
		if i > 0 && k.At-c.Chunks[i-1].At > 50*time.Millisecond {
			d.Quiet(take)
		}
		d.Feed(k.Bytes, take)
	}
	d.Quiet(take)
	return values
}

// Identify is the SCPI question who it is (IEEE 488.2, 10.14). Its answer
// tells that the instrument speaks SCPI, and is no indication.
const Identify = "*IDN?\n"

// UsualLines returns the line settings worth trying, in the order of their use
// (common practice). Seven data bits need no try of their own: read as eight
// they show in the bytes.
func UsualLines() []config.Line {
	var out []config.Line
	for _, baud := range []int{9600, 4800, 2400, 1200, 19200, 38400, 57600, 115200} {
		out = append(out, config.Line{Baud: baud, DataBits: 8, Parity: "none", StopBits: "1"})
	}
	return out
}

// Request is a question that instruments commonly answer.
type Request struct {
	Bytes []byte
	Words string
	// Modbus is that of a read by that protocol.
	Modbus bool
}

// UsualRequests returns questions worth asking an instrument that sends
// nothing (common practice; the SCPI and Modbus ones are those standards'
// own). None of them sets anything.
func UsualRequests() []Request {
	return []Request{
		{Bytes: []byte("?\r"), Words: "a question mark and CR"},
		{Bytes: []byte("?\r\n"), Words: "a question mark and CR LF"},
		{Bytes: []byte("\r"), Words: "CR alone"},
		{Bytes: []byte("\x05"), Words: "ENQ"},
		{Bytes: []byte(Identify), Words: "the SCPI query *IDN? (who are you)"},
		{Bytes: []byte("READ?\n"), Words: "the SCPI query READ?"},
		{Bytes: []byte("P\r\n"), Words: "the letter P (print) and CR LF"},
		{Bytes: []byte("D\r\n"), Words: "the letter D (data) and CR LF"},
		{Bytes: []byte("1"), Words: "the digit 1"},
		{Bytes: ModbusRead(1, 3, 0, 2), Words: "a Modbus read of holding registers 0 and 1 at address 1", Modbus: true},
		{Bytes: ModbusRead(1, 4, 0, 2), Words: "a Modbus read of input registers 0 and 1 at address 1", Modbus: true},
	}
}

// unmask finds seven data bits in bytes that were read as eight: the eighth is
// then a parity bit, or a stop bit.
func unmask(c Capture) (Capture, string) {
	raw := c.Bytes()
	high, even := 0, 0
	for _, b := range raw {
		if b >= 0x80 {
			high++
		}
		if ones(b)%2 == 0 {
			even++
		}
	}
	if len(raw) < 4 || high*10 < len(raw) || cmp.Or(c.Line.DataBits, 8) != 8 || cmp.Or(c.Line.Parity, "none") != "none" {
		return c, ""
	}
	masked := c
	masked.Chunks = make([]Chunk, len(c.Chunks))
	for i, k := range c.Chunks {
		m := bytes.Clone(k.Bytes)
		for j := range m {
			m[j] &= 0x7f
		}
		masked.Chunks[i] = Chunk{k.At, m}
	}
	if printable(masked.Bytes()) < 0.95 {
		return c, ""
	}
	words := ""
	switch {
	case even == len(raw):
		masked.Line.Parity, words = "even", "every byte has even parity"
	case even == 0:
		masked.Line.Parity, words = "odd", "every byte has odd parity"
	case high == len(raw):
		masked.Line.StopBits, words = "2", "the eighth bit is always 1, as a second stop bit is"
	default:
		return c, ""
	}
	masked.Line.DataBits = 7
	return masked, "7 data bits: " + words
}

// printable is the share of bytes that are text or its usual control characters.
func printable(p []byte) float64 {
	n := 0
	for _, b := range p {
		if b >= 0x20 && b < 0x7f || b == '\r' || b == '\n' || b == '\t' || b == 2 || b == 3 {
			n++
		}
	}
	return float64(n) / float64(max(len(p), 1))
}

func ones(b byte) (n int) {
	for ; b != 0; b &= b - 1 {
		n++
	}
	return n
}

// lineOf says what is known of the line settings.
func lineOf(p *Proposal, c Capture, words string) {
	l := c.Line
	if l == (config.Line{}) {
		p.unsure("the line settings of the capture are not known: take them from the manual")
		return
	}
	if words != "" {
		p.sure("%s", words)
	}
	if p.Frame.Kind == "text" || p.Frame.Kind == "scpi" {
		p.sure("%d baud: the text came out readable (a pseudo-terminal or a network adapter reads at any)", cmp.Or(l.Baud, config.DefaultBaud))
	} else {
		p.unsure("%d baud: bytes that are no text do not show whether the speed is right", cmp.Or(l.Baud, config.DefaultBaud))
	}
}

// pace tells how the frames came: the pauses between the instants at which
// they began.
func pace(p *Proposal, c Capture, starts []time.Duration) {
	if len(c.Request) > 0 {
		p.Frame.Request = escape(c.Request)
		p.sure("it answers %q", c.Request)
		return
	}
	if len(starts) < 4 {
		p.unsure("%d frames are too few to tell whether it streams or sends on a button: with a button, add button: true", len(starts))
		return
	}
	var gaps []time.Duration
	for i := 1; i < len(starts); i++ {
		gaps = append(gaps, starts[i]-starts[i-1])
	}
	slices.Sort(gaps)
	middle := gaps[len(gaps)/2]
	if middle > time.Second && gaps[len(gaps)-1] > 2*gaps[0] {
		p.Frame.Button = true
		p.unsure("it sends at irregular times (%s to %s apart): taken as a send button", gaps[0].Round(10*time.Millisecond), gaps[len(gaps)-1].Round(10*time.Millisecond))
		return
	}
	if every := (starts[len(starts)-1] - starts[0]) / time.Duration(len(starts)-1); every > 0 {
		p.sure("it sends unasked, a frame about every %s", every.Round(time.Millisecond))
	} else {
		p.unsure("whether it streams or sends on a button: all frames came at once")
	}
}
