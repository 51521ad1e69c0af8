package listen

import (
	"cmp"
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
	// Watch is how long Guess goes on where frames were found, so that the
	// plunger can be moved and the keys pressed: what was not seen cannot be
	// proposed. 0: not at all.
	Watch time.Duration

	began time.Time
}

func (o *Options) say(format string, args ...any) {
	if o.Say != nil {
		o.Say(fmt.Sprintf(format, args...))
	}
}

// Words names a line setting as the trade does, such as "9600 baud, 8N1".
func Words(l config.Line) string {
	parity := "N"
	if l.Parity != "" {
		parity = string(l.Parity[0] - 'a' + 'A')
	}
	return fmt.Sprintf("%d baud, %d%s%s", cmp.Or(l.Baud, config.DefaultBaud), cmp.Or(l.DataBits, config.DefaultDataBits), parity, cmp.Or(l.StopBits, "1"))
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
