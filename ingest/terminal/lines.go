package terminal

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"strings"
	"time"

	"gaugelog/ingest/answer"
)

// Bounds of what is printed where there is no terminal.
const (
	seldom      = time.Minute // between lines about figures; an alarm's comes at once
	longestLine = 600         // bytes
)

// errOnce ends a source after its first whole frame.
var errOnce = errors.New("once")

// patience bounds the wait for a whole frame.
const patience = 2 * time.Minute

// once hands the first whole frame of a source to f, and after two minutes the
// next that comes.
func once(ctx context.Context, s Source, f func(Frame) error) error {
	began := time.Now()
	var failed error
	err := each(ctx, s, func(fr Frame) error {
		if !fr.View.Whole && fr.Lost == "" && time.Since(began) < patience {
			return nil
		}
		if failed = errors.New(fr.Lost); fr.View.At != "" {
			failed = f(fr)
		}
		return errOnce
	})
	if errors.Is(err, errOnce) {
		return failed
	}
	return err
}

// Lines prints a line for each change of the answers until the context or the
// source ends: at once where a tone, an alarm or the connection changes, at
// most once a minute where figures do. A line is an instant and the answers'
// short words, at most 600 bytes long.
func Lines(ctx context.Context, s Source, out io.Writer) error {
	var last string
	var at time.Time
	var grave string
	return each(ctx, s, func(f Frame) error {
		line, state := summary(&f), urgent(&f)
		if line == last || state == grave && f.View.Instant.Sub(at) < seldom {
			return nil
		}
		last, grave, at = line, state, f.View.Instant
		_, err := fmt.Fprintln(out, limited(f.View.Instant.Format(time.RFC3339)+" "+line))
		return err
	})
}

// Once prints the answers in full, as text, and ends.
func Once(ctx context.Context, s Source, out io.Writer) error {
	return once(ctx, s, func(f Frame) error {
		var b strings.Builder
		v := &f.View
		fmt.Fprintf(&b, "%s, %s\n", v.Title, v.At)
		if f.Lost != "" {
			fmt.Fprintf(&b, "[abnormal] %s: what follows is old\n", f.Lost)
		}
		fmt.Fprintf(&b, "Alarms: [%s] %s\n", v.Banner.Tone.Word, v.Banner.Short)
		for _, q := range v.Questions() {
			fmt.Fprintf(&b, "%s [%s] %s\n", q.Text, q.Answer.Tone.Word, q.Answer.Short)
			for _, line := range q.Answer.More {
				fmt.Fprintf(&b, "  %s\n", line)
			}
		}
		fmt.Fprintf(&b, "Under load: %s\n", v.Load.Headline)
		for _, line := range v.Load.Lines {
			fmt.Fprintf(&b, "  %s\n", line)
		}
		_, err := io.WriteString(out, b.String())
		return err
	})
}

// JSON prints the view as one line of JSON when it changes, as seldom as Lines
// does.
func JSON(ctx context.Context, s Source, out io.Writer) error {
	var grave string
	var at time.Time
	return each(ctx, s, func(f Frame) error {
		state := urgent(&f)
		if state == grave && f.View.Instant.Sub(at) < seldom {
			return nil
		}
		grave, at = state, f.View.Instant
		return writeJSON(out, &f)
	})
}

// JSONOnce prints the first whole view as one line of JSON.
func JSONOnce(ctx context.Context, s Source, out io.Writer) error {
	return once(ctx, s, func(f Frame) error { return writeJSON(out, &f) })
}

func writeJSON(out io.Writer, f *Frame) error {
	b, err := json.Marshal(struct {
		answer.View
		Lost string `json:"lost,omitempty"`
	}{f.View, f.Lost})
	if err != nil {
		return err
	}
	_, err = out.Write(append(b, '\n'))
	return err
}

// each hands the frames of a source to f, cleaned, until f fails.
func each(ctx context.Context, s Source, f func(Frame) error) error {
	ctx, stop := context.WithCancel(ctx)
	defer stop()
	var failed error
	err := s.Run(ctx, func(fr Frame) {
		if failed != nil || ctx.Err() != nil {
			return
		}
		if failed = f(cleaned(fr)); failed != nil {
			stop()
		}
	})
	return errors.Join(failed, err)
}

// summary is the answers in short, on one line.
func summary(f *Frame) string {
	var parts []string
	if f.Lost != "" {
		parts = append(parts, f.Lost)
	}
	if len(f.View.Alarms) > 0 {
		parts = append(parts, strings.ToUpper(f.View.Banner.Tone.Word)+" "+f.View.Banner.Short)
	}
	for _, q := range f.View.Questions() {
		parts = append(parts, q.Name+" ["+q.Answer.Tone.Word+"] "+q.Answer.Short)
	}
	return strings.Join(append(parts, "load "+f.View.Load.Headline), "; ")
}

// urgent changes when something changes that should be said at once.
func urgent(f *Frame) string {
	parts := []string{f.Lost, f.View.Load.Headline}
	for _, a := range f.View.Alarms {
		parts = append(parts, a.Cause, a.Raised, a.Seen)
	}
	for _, q := range f.View.Questions() {
		parts = append(parts, q.Answer.Tone.Class)
	}
	return strings.Join(parts, "\x00")
}

func limited(line string) string {
	if len(line) <= longestLine {
		return line
	}
	return strings.ToValidUTF8(line[:longestLine-3], "") + "…"
}
