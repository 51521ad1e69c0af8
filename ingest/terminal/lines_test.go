package terminal

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"strings"
	"testing"
	"time"

	"gaugelog/ingest/answer"
	"gaugelog/ingest/desk/desktest"
)

// script is a source that gives frames it was told, and ends.
type script struct {
	frames []Frame
	end    error
	seen   []int
}

func (s *script) Run(ctx context.Context, give func(Frame)) error {
	for _, f := range s.frames {
		if ctx.Err() != nil {
			return nil
		}
		give(f)
	}
	return s.end
}

func (s *script) See(_ context.Context, id int, _ string) error {
	s.seen = append(s.seen, id)
	return nil
}

// day is a frame each second for as long as asked, with a figure that changes in
// each and what change makes of the frame.
func day(t *testing.T, seconds int, change func(i int, f *Frame)) []Frame {
	t.Helper()
	d, s := desktest.Morning(t)
	first := Frame{View: answer.Of(d, s), Figures: answer.Figures(d, s)}
	first.View.Alarms, first.View.Whole = nil, true
	out := make([]Frame, seconds)
	for i := range out {
		out[i] = first
		out[i].View.Instant = first.View.Instant.Add(time.Duration(i) * time.Second)
		out[i].View.Travel.Short = strings.Repeat("6", i%7+1) + " mm"
		if change != nil {
			change(i, &out[i])
		}
	}
	return out
}

// Where there is no terminal a line comes at most once a minute, but at once
// when a tone, an alarm, a load or the connection changes.
func TestLinesComeSeldom(t *testing.T) {
	var out bytes.Buffer
	frames := day(t, 600, func(i int, f *Frame) {
		if i >= 130 {
			f.View.Speed.Tone = answer.Danger
		}
		if i >= 140 && i < 145 {
			f.Lost = "No connection to the recorder since 07:16"
		}
	})
	if err := Lines(t.Context(), &script{frames: frames}, &out); err != nil {
		t.Fatal(err)
	}
	var at []string
	for line := range strings.SplitSeq(strings.TrimSuffix(out.String(), "\n"), "\n") {
		stamp, _, _ := strings.Cut(line, " ")
		when, err := time.Parse(time.RFC3339, stamp)
		if err != nil {
			t.Fatalf("%q begins with no instant", line)
		}
		at = append(at, when.Sub(frames[0].View.Instant).String())
	}
	if got, want := strings.Join(at, " "), "0s 1m0s 2m0s 2m10s 2m20s 2m25s 3m25s 4m25s 5m25s 6m25s 7m25s 8m25s 9m25s"; got != want {
		t.Errorf("lines came at %s, want %s", got, want)
	}
	if !strings.Contains(out.String(), "speed [danger] No: slowing down") || !strings.Contains(out.String(), "No connection to the recorder") {
		t.Errorf("the lines are\n%s", out.String())
	}
}

// Nothing is said twice while nothing changes, and no line is longer than 600 bytes.
func TestLinesAreBounded(t *testing.T) {
	var out bytes.Buffer
	frames := day(t, 400, func(_ int, f *Frame) {
		f.View.Travel.Short = strings.Repeat("−", 2000)
		f.View.Load.Headline = "a\nb\x1b[2J"
	})
	if err := Lines(t.Context(), &script{frames: frames}, &out); err != nil {
		t.Fatal(err)
	}
	if n := strings.Count(out.String(), "\n"); n != 1 || out.Len() > longestLine+1 || strings.Contains(out.String(), "\x1b") {
		t.Errorf("%d lines, %d bytes", n, out.Len())
	}
}

// Once waits for a whole look, prints it and ends; an error of the output is told.
func TestOnce(t *testing.T) {
	frames := day(t, 5, func(i int, f *Frame) { f.View.Whole = i >= 3 })
	var out bytes.Buffer
	if err := Once(t.Context(), &script{frames: frames}, &out); err != nil {
		t.Fatal(err)
	}
	want := "How much travel is left? [normal] 6666 mm\n"
	if !strings.Contains(out.String(), want) || strings.Count(out.String(), "travel is left") != 1 {
		t.Errorf("it printed\n%s", out.String())
	}
	full := errors.New("the pipe is closed")
	if err := Once(t.Context(), &script{frames: frames}, failing{full}); !errors.Is(err, full) {
		t.Errorf("the error is %v", err)
	}
	if err := Once(t.Context(), &script{frames: []Frame{{Lost: "No connection (refused)"}}}, &out); err == nil || err.Error() != "No connection (refused)" {
		t.Errorf("without any look the error is %v", err)
	}
	if err := Once(t.Context(), &script{end: full}, &out); !errors.Is(err, full) {
		t.Errorf("the error is %v", err)
	}
}

type failing struct{ err error }

func (f failing) Write([]byte) (int, error) { return 0, f.err }

// The JSON is the view, one line each.
func TestJSON(t *testing.T) {
	var out bytes.Buffer
	if err := JSON(t.Context(), &script{frames: day(t, 61, nil)}, &out); err != nil {
		t.Fatal(err)
	}
	lines := strings.Split(strings.TrimSuffix(out.String(), "\n"), "\n")
	if len(lines) != 2 {
		t.Fatalf("%d lines", len(lines))
	}
	var v answer.View
	if err := json.Unmarshal([]byte(lines[1]), &v); err != nil {
		t.Fatal(err)
	}
	if v.Alive.Short != "Not wholly: 2 of 4 instruments answer" || v.Gauges[0].Sag != "+4.312" || v.Travel.Tone != answer.Normal {
		t.Errorf("read back: %+v", v)
	}
	out.Reset()
	if err := JSONOnce(t.Context(), &script{frames: day(t, 61, nil)}, &out); err != nil || strings.Count(out.String(), "\n") != 1 {
		t.Errorf("%v, %d lines", err, strings.Count(out.String(), "\n"))
	}
}
