package main

import (
	"context"
	"fmt"
	"io"
	"strconv"
	"strings"
	"time"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/ingest"
	"gaugelog/ingest/round"
)

// roundTalk is the conversation of one walk.
type roundTalk struct {
	walk   *round.Walk
	boards []*visited
	out    io.Writer
	lines  <-chan string
	live   *live // nil: everything is typed
	button bool
}

func (t *roundTalk) run(ctx context.Context) error {
	var readings <-chan device.Reading
	if t.live != nil && t.button {
		readings = t.live.readings
	}
	t.prompt()
	for {
		select {
		case <-ctx.Done():
			return nil // what was taken counts
		case r := <-readings:
			if r.Kind != device.Indication {
				if w := troubleWords(r); w != "" {
					fmt.Fprintln(t.out, w)
				}
			} else if err := t.take(r); err != nil {
				return err
			}
		case text, open := <-t.lines:
			if !open || text == "done" || text == "" && t.finished() {
				return nil
			}
			if err := t.typed(ctx, text); err != nil {
				return err
			}
		}
	}
}

// finished says that every board had its turn; the last reading can still be
// taken back.
func (t *roundTalk) finished() bool {
	b, _ := t.walk.Board()
	return b == nil
}

func (t *roundTalk) prompt() {
	if t.finished() {
		fmt.Fprintln(t.out, "every board had its turn: Enter ends, u takes the last reading back")
	}
	if b, n := t.walk.Board(); b != nil {
		last := "not read before"
		if k := len(b.Before); k > 0 {
			last = fmt.Sprintf("last %s mm on %s", strconv.FormatFloat(b.Before[k-1].MM, 'f', -1, 64), time.Unix(0, b.Before[k-1].At).UTC().Format("2006-01-02 15:04 UTC"))
		}
		fmt.Fprintf(t.out, "%d of %d: %s, gauge %s (%s)\n", n, len(t.boards), b.Name, b.Gauge, last)
	}
}

func (t *roundTalk) take(r device.Reading) error {
	if t.finished() {
		t.prompt()
		return nil
	}
	q, err := t.walk.Take(round.Reading{At: r.At.Wall, MM: r.MM}, r)
	if err != nil {
		return err
	}
	if q != "" {
		fmt.Fprintf(t.out, "%s: take it again, or k keeps it, u forgets it, s skips the board\n", q)
		return nil
	}
	t.prompt()
	return nil
}

// typed deals with a line; its error is one of the disk.
func (t *roundTalk) typed(ctx context.Context, text string) error {
	switch text {
	case "u":
		what, ok := t.walk.Back()
		if !ok {
			fmt.Fprintln(t.out, "there is nothing to take back: what is on disk stays; enter a note with `gaugelog mark`")
			return nil
		}
		fmt.Fprintf(t.out, "took back %s\n", what)
	case "k":
		if err := t.walk.Keep(); err != nil {
			fmt.Fprintln(t.out, err)
			return nil
		}
	case "s":
		if t.finished() {
			break
		}
		if err := t.walk.Skip(); err != nil {
			return err
		}
	case "":
		return t.look(ctx)
	default:
		return t.takeText(text)
	}
	t.prompt()
	return nil
}

// look takes the next reading of a gauge that sends without a button.
func (t *roundTalk) look(ctx context.Context) error {
	if t.live == nil || t.button {
		fmt.Fprintln(t.out, "press the gauge's send button, or type the reading; s skips the board")
		return nil
	}
	t.live.forget()
	ctx, stop := context.WithTimeout(ctx, 5*time.Second)
	defer stop()
	for {
		select {
		case r := <-t.live.readings:
			if r.Kind == device.Indication {
				return t.take(r)
			}
			if w := troubleWords(r); w != "" {
				fmt.Fprintln(t.out, w)
			}
		case <-ctx.Done():
			fmt.Fprintln(t.out, "no reading came within 5 s: look at the gauge's cable")
			return nil
		}
	}
}

func (t *roundTalk) takeText(text string) error {
	number, unit, _ := strings.Cut(text, " ")
	unit = strings.TrimSpace(unit)
	shown, err := strconv.ParseFloat(number, 64)
	if unit == "" {
		unit = "mm"
	}
	l, lengthErr := config.ParseLength(number + " " + unit)
	if err != nil || lengthErr != nil {
		fmt.Fprintf(t.out, "%q is no reading; type such as 12.34 or 0.486 in, k, u, s or done\n", text)
		return nil
	}
	return t.take(device.Reading{Kind: device.Indication, At: ingest.SystemClock{}.Now(), MM: l.Value, Shown: shown, Unit: unit})
}
