package listen

import (
	"context"
	"errors"
	"fmt"
	"time"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/device/guess"
)

// Options says what to listen to.
type Options struct {
	Opener device.Opener
	Port   string
	// Line is the setting of one listening; Guess tries the usual ones unless
	// Fixed is set.
	Line  config.Line
	Fixed bool
	// Request, if any, is sent after opening and again when an answer was
	// followed by a pause. For Guess: the only request to try.
	Request []byte
	// Mute forbids Guess to send anything.
	Mute bool
	// Again is the pause between two requests; default 1 s.
	Again time.Duration
	// Heard is told of every chunk as it comes; may be nil. began is when the
	// first listening did.
	Heard func(guess.Chunk)
	// Opened is told of each opening; may be nil.
	Opened func(config.Line)
	// Say is told in words what is tried next, before it is; may be nil.
	Say func(string)
	// Each is how long Guess listens at one setting; default 3 s.
	Each time.Duration

	began time.Time
}

func (o *Options) say(format string, args ...any) {
	if o.Say != nil {
		o.Say(fmt.Sprintf(format, args...))
	}
}

// Words names a line setting as the trade does, such as "9600 baud, 8N1".
func Words(l config.Line) string {
	parity := "?"
	if l.Parity != "" {
		parity = string(l.Parity[0] - 'a' + 'A')
	}
	return fmt.Sprintf("%d baud, %d%s%s", l.Baud, l.DataBits, parity, l.StopBits)
}

// For opens the port and listens until ctx ends or d is over (0: no end). The
// capture is whole up to an error; a lost port gives one wrapping
// device.ErrUnplugged.
func (o Options) For(ctx context.Context, d time.Duration) (c guess.Capture, err error) {
	if o.began.IsZero() {
		o.began = time.Now()
	}
	c = guess.Capture{Line: o.Line, Request: o.Request}
	port, err := o.Opener.Open(ctx, o.Port, o.Line)
	if err != nil {
		return c, err
	}
	defer func() { err = errors.Join(err, port.Close()) }()
	if o.Opened != nil {
		o.Opened(o.Line)
	}
	again := o.Again
	if again <= 0 {
		again = time.Second
	}
	var asked time.Time
	began := time.Now()
	buf := make([]byte, 4096)
	for ctx.Err() == nil && (d == 0 || time.Since(began) < d) {
		if len(o.Request) > 0 && time.Since(asked) >= again {
			if _, err := port.Write(o.Request); err != nil {
				return c, fmt.Errorf("asking: %w", err)
			}
			asked = time.Now()
		}
		n, err := port.Read(buf)
		if n > 0 {
			k := guess.Chunk{At: time.Since(o.began), Bytes: append([]byte(nil), buf[:n]...)}
			c.Chunks = append(c.Chunks, k)
			if o.Heard != nil {
				o.Heard(k)
			}
		}
		if err != nil && !errors.Is(err, device.ErrQuiet) {
			return c, err
		}
	}
	return c, nil
}

// enough is the number of frames after which a good proposal is believed.
const enough = 3

// Guess tries line settings and, where nothing comes unasked, requests, and
// returns what the bytes may be, the likeliest first. It returns early once a
// proposal explains nearly all that came. The captures are what was heard.
func (o Options) Guess(ctx context.Context) ([]guess.Proposal, []guess.Capture, error) {
	if o.began.IsZero() {
		o.began = time.Now()
	}
	if o.Each <= 0 {
		o.Each = 3 * time.Second
	}
	lines := guess.UsualLines()
	if o.Fixed {
		lines = []config.Line{o.Line}
	}
	request := o.Request
	o.Request = nil
	var all []guess.Capture
	if len(request) == 0 {
		for _, l := range lines {
			o.Line = l
			o.say("listening at %s for %s", Words(l), o.Each)
			c, err := o.For(ctx, o.Each)
			all = append(all, c)
			if err != nil || ctx.Err() != nil || good(c) {
				return guess.Propose(all...), all, err
			}
		}
		if o.Mute || anything(all) {
			return guess.Propose(all...), all, nil
		}
	}
	requests := guess.UsualRequests()
	if len(request) > 0 {
		requests = []guess.Request{{Bytes: request, Words: "the request given"}}
	} else {
		o.say("nothing came unasked; now the instrument will be asked, by requests that set nothing")
	}
	return o.ask(ctx, lines, requests, all)
}

// ask tries requests at each setting; the first that is answered is repeated.
func (o Options) ask(ctx context.Context, lines []config.Line, requests []guess.Request, all []guess.Capture) ([]guess.Proposal, []guess.Capture, error) {
	const patience = 600 * time.Millisecond
	for _, l := range lines {
		for _, r := range requests {
			o.Line, o.Request, o.Again = l, r.Bytes, patience
			o.say("asking at %s: %s (%q)", Words(l), r.Words, r.Bytes)
			c, err := o.For(ctx, patience)
			if err == nil && ctx.Err() == nil && len(c.Chunks) > 0 {
				o.say("it answers; asking it a few times more")
				more, again := o.For(ctx, 6*patience)
				c.Chunks, err = append(c.Chunks, more.Chunks...), again
			}
			if len(c.Chunks) > 0 {
				all = append(all, c)
			}
			if err != nil || ctx.Err() != nil || good(c) {
				return guess.Propose(all...), all, err
			}
		}
	}
	return guess.Propose(all...), all, nil
}

// good tells whether a capture explains itself well enough to stop.
func good(c guess.Capture) bool {
	p := guess.Propose(c)
	if len(p) == 0 || p[0].Share < 0.95 {
		return false
	}
	switch p[0].Frame.Kind {
	case "modbus", "scpi":
		return true
	case "binary":
		return p[0].Frame.Checksum != nil
	}
	return p[0].Frames >= enough
}

func anything(all []guess.Capture) bool {
	for _, c := range all {
		if len(c.Chunks) > 0 {
			return true
		}
	}
	return false
}
