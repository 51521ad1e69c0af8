package listen

import (
	"context"
	"strings"
	"time"

	"gaugelog/config"
	"gaugelog/device/guess"
)

// enough is the number of frames after which a good proposal is believed.
const enough = 3

// patience is how long an answer to a request may take.
const patience = 600 * time.Millisecond

// Guess tries line settings and, where nothing comes unasked, requests, and
// returns what the bytes may be, the likeliest first. Once a proposal explains
// nearly all that came it watches a while longer at that setting and ends. The
// captures are what was heard. Where ctx ends, it proposes from what it has.
func (o Options) Guess(ctx context.Context) ([]guess.Proposal, []guess.Capture, error) {
	if o.began.IsZero() {
		o.began = time.Now()
	}
	if o.Each <= 0 {
		o.Each = 3 * time.Second
	}
	request := o.Request
	o.Request = nil
	if len(request) > 0 {
		lines := guess.UsualLines()
		if o.Fixed {
			lines = []config.Line{o.Line}
		}
		var tries []try
		for _, l := range lines {
			tries = append(tries, try{l, []guess.Request{{Bytes: request, Words: "the request given"}}})
		}
		all, err := o.ask(ctx, tries)
		return guess.Propose(all...), all, err
	}
	all, found, err := o.hear(ctx)
	if err != nil || ctx.Err() != nil || found || o.Mute || anything(all) {
		return guess.Propose(all...), all, err
	}
	tries := usualTries()
	if o.Fixed {
		tries = []try{{o.Line, guess.UsualRequests()}}
	}
	n := 0
	for _, t := range tries {
		n += len(t.requests)
	}
	o.say("nothing came unasked; now the instrument will be asked, by requests that set nothing (at most %s)", (time.Duration(n) * patience).Round(time.Second))
	more, err := o.ask(ctx, tries)
	all = append(all, more...)
	return guess.Propose(all...), all, err
}

// hear listens at each setting until one makes sense; where bytes come that
// make none without parity, it listens with parity as well.
func (o Options) hear(ctx context.Context) (all []guess.Capture, found bool, err error) {
	if o.Fixed {
		return o.hearAt(ctx, []config.Line{o.Line})
	}
	lines := guess.UsualLines()
	o.say("trying %d line settings (at most %s); Ctrl-C ends it with what was heard so far", len(lines), time.Duration(len(lines))*o.Each)
	if all, found, err = o.hearAt(ctx, lines); found || err != nil || ctx.Err() != nil || !anything(all) {
		return all, found, err
	}
	lines = parityLines()
	o.say("something comes that makes no frames without parity; trying %d settings with it (at most %s)", len(lines), time.Duration(len(lines))*o.Each)
	more, found, err := o.hearAt(ctx, lines)
	return append(all, more...), found, err
}

// parityLines are settings with parity at the usual speeds of old instruments
// (common practice).
func parityLines() (out []config.Line) {
	for _, baud := range []int{9600, 4800, 2400, 1200, 19200} {
		for _, parity := range []string{"even", "odd"} {
			out = append(out, config.Line{Baud: baud, DataBits: 8, Parity: parity, StopBits: "1"})
		}
	}
	return out
}

func (o Options) hearAt(ctx context.Context, lines []config.Line) (all []guess.Capture, found bool, err error) {
	for _, l := range lines {
		o.Line = l
		o.say("listening at %s for %s", Words(l), o.Each)
		c, err := o.For(ctx, o.Each)
		if found = err == nil && ctx.Err() == nil && good(c); found {
			c, err = o.watch(ctx, c)
		} else if n := len(c.Bytes()); n > 0 && len(lines) > 1 {
			o.say("%d bytes came, which make no frames that can be trusted", n)
		}
		all = append(all, c)
		if err != nil || ctx.Err() != nil || found {
			return all, found, err
		}
	}
	return all, false, nil
}

// watch goes on at a setting that makes sense and returns both captures as one.
func (o Options) watch(ctx context.Context, c guess.Capture) (guess.Capture, error) {
	if o.Watch <= 0 {
		return c, nil
	}
	o.say("frames come at %s; watching for %s: move the plunger now, below zero too, and press unit and hold keys if it has them", Words(c.Line), o.Watch)
	more, err := o.For(ctx, o.Watch)
	c.Chunks = append(c.Chunks, more.Chunks...)
	return c, err
}

// try is a line setting with the requests worth sending at it.
type try struct {
	line     config.Line
	requests []guess.Request
}

// usualTries are the requests at the usual settings. A request must reach the
// instrument with the parity it expects: Modbus RTU's own setting is even
// parity (MODBUS over Serial Line V1.02, 2.5.1), and older text instruments
// use seven data bits with even parity (common practice).
func usualTries() (out []try) {
	var bus, text []guess.Request
	for _, r := range guess.UsualRequests() {
		if r.Modbus {
			bus = append(bus, r)
		} else {
			text = append(text, r)
		}
	}
	for _, l := range guess.UsualLines() {
		out = append(out, try{l, guess.UsualRequests()})
	}
	for _, baud := range []int{19200, 9600} {
		out = append(out, try{config.Line{Baud: baud, DataBits: 8, Parity: "even", StopBits: "1"}, bus})
	}
	for _, baud := range []int{9600, 4800} {
		out = append(out, try{config.Line{Baud: baud, DataBits: 7, Parity: "even", StopBits: "1"}, text})
	}
	return out
}

// ask tries requests at each setting; the first that is answered is repeated.
func (o Options) ask(ctx context.Context, tries []try) (all []guess.Capture, err error) {
	for i, t := range tries {
		for _, r := range t.requests {
			o.Line, o.Request, o.Again = t.line, r.Bytes, patience
			o.say("asking at %s (%d of %d settings): %s (%q)", Words(t.line), i+1, len(tries), r.Words, r.Bytes)
			c, err := o.For(ctx, patience)
			identified := string(r.Bytes) == guess.Identify && len(c.Chunks) > 0
			if identified {
				o.say("it answers %q, as SCPI instruments do: find the query for the reading in its manual and give it, such as --request 'MEAS?\\n'", strings.TrimSpace(string(c.Bytes())))
			}
			if err == nil && ctx.Err() == nil && len(c.Chunks) > 0 && !identified {
				o.say("it answers; asking it a few times more")
				more, again := o.For(ctx, max(6*patience, o.Watch))
				c.Chunks, err = append(c.Chunks, more.Chunks...), again
			}
			if len(c.Chunks) > 0 {
				all = append(all, c)
			}
			if err != nil || ctx.Err() != nil || good(c) {
				return all, err
			}
		}
	}
	return all, nil
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
