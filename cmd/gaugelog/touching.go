package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"slices"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/device/nudge"
)

// touched is what a touch said of a gauge.
type touched struct {
	gauge  config.Gauge // as in the rig file
	source config.Gauge // where its readings came from
	moved  float64      // mm
}

// sense is the beam's direction when the indication grows, the plunger having
// been moved as sag moves it.
func (t touched) sense() string {
	if t.moved > 0 {
		return "down"
	}
	return "up"
}

// touching is the conversation in which gauges are told apart.
type touching struct {
	live    *live
	watcher *nudge.Watcher
	began   time.Time
	sources *config.Rig
	lines   <-chan string
	out     io.Writer // prompts and what is not counted
	last    map[string]float64
	found   []*touched // one a gauge that was asked for; nil where it was skipped
}

// touchAll asks for each gauge in turn and tells on w what was found.
func touchAll(ctx context.Context, cmd *cobra.Command, sources *config.Rig, wanted []config.Gauge, opener device.Opener, lines <-chan string, size float64) (found []touched, err error) {
	l, err := listenLive(ctx, sources, opener)
	if err != nil {
		return nil, err
	}
	defer func() { err = errors.Join(err, l.close()) }()
	t := &touching{live: l, watcher: nudge.New(nudge.Options{Size: size}), began: time.Now(),
		sources: sources, lines: lines, out: cmd.ErrOrStderr(), last: map[string]float64{}}
	for len(t.found) < len(wanted) {
		g := wanted[len(t.found)]
		fmt.Fprintf(t.out, "touch gauge %s (at %s): move its plunger the way sag moves it, and let go\n", g.Name, g.At.Shown)
		next, one := t.wait(ctx)
		if next == "q" {
			break
		}
		switch next {
		case "again":
		case "u":
			t.takeBack(wanted)
		case "s":
			fmt.Fprintf(t.out, "skipped %s\n", g.Name)
			t.found = append(t.found, nil)
		default:
			one.gauge = g
			t.found = append(t.found, &one)
			fmt.Fprintf(cmd.OutOrStdout(), "gauge %s is on %s: it moved by %+.3f mm, so the beam goes %s when the indication grows%s\n",
				g.Name, placeOf(one.source), one.moved, one.sense(), otherwise(one))
		}
	}
	for _, f := range t.found {
		if f != nil {
			found = append(found, *f)
		}
	}
	return found, nil
}

// takeBack forgets the gauge asked for last, so that it is asked for again.
func (t *touching) takeBack(wanted []config.Gauge) {
	n := len(t.found) - 1
	if n < 0 {
		fmt.Fprintln(t.out, "there is nothing to take back")
		return
	}
	fmt.Fprintf(t.out, "took back gauge %s\n", wanted[n].Name)
	t.found = t.found[:n]
}

// otherwise says where the rig file says something else.
func otherwise(t touched) string {
	var parts []string
	if t.gauge.Port != t.source.Port || t.gauge.Channel != t.source.Channel {
		parts = append(parts, "has it on "+placeOf(t.gauge))
	}
	if t.gauge.Sense != t.sense() {
		parts = append(parts, "says sense "+t.gauge.Sense)
	}
	if len(parts) == 0 {
		return " (as in the rig file)"
	}
	return " (the rig file " + strings.Join(parts, " and ") + ")"
}

func placeOf(g config.Gauge) string {
	switch {
	case g.Port == "":
		return "no port"
	case g.Channel != "":
		return g.Port + ", channel " + g.Channel
	}
	return g.Port
}

// remindAfter is how long nothing may move before it is shown what each source
// reads: a gauge that is not heard at all can then be seen.
const remindAfter = 15 * time.Second

// wait waits for a touch or a typed letter: next is "s", "u", "q", "again" or
// "" for a touch.
func (t *touching) wait(ctx context.Context) (next string, one touched) {
	remind := time.NewTicker(remindAfter)
	defer remind.Stop()
	for {
		select {
		case <-ctx.Done():
			return "q", one
		case <-remind.C:
			t.remind()
		case text, open := <-t.lines:
			if !open {
				t.lines = nil // the input is over; touches still count
				continue
			}
			switch text {
			case "s", "u", "q":
				return text, one
			}
			fmt.Fprintf(t.out, "%q is not known: s skips, u takes the last one back, q ends\n", text)
		case r := <-t.live.readings:
			if r.Kind != device.Indication {
				if words := troubleWords(r); words != "" {
					fmt.Fprintln(t.out, words)
				}
				continue
			}
			t.last[r.Gauge] = r.MM
			if touch, ok := t.watcher.Add(r.Gauge, time.Since(t.began), r.MM); ok {
				return t.judge(touch)
			}
		}
	}
}

// judge tells whether a touch counts: one source alone, and not one that was
// found already.
func (t *touching) judge(touch nudge.Touch) (next string, one touched) {
	one = touched{source: sourceOf(t.sources, touch.Source), moved: touch.Moved()}
	if len(touch.Beside) > 0 {
		fmt.Fprintf(t.out, "%s moved by %+.3f mm, and %s moved too: touch one gauge at a time\n", placeOf(one.source), one.moved, namesOf(t.sources, touch.Beside))
		return "again", one
	}
	for _, f := range t.found {
		if f != nil && f.source.Name == one.source.Name {
			fmt.Fprintf(t.out, "%s moved by %+.3f mm, but that is gauge %s already (u takes the last one back)\n", placeOf(one.source), one.moved, f.gauge.Name)
			return "again", one
		}
	}
	return "", one
}

// remind shows what each source reads.
func (t *touching) remind() {
	fmt.Fprintln(t.out, "nothing has moved yet (s skips this gauge, u takes the last one back, q ends):")
	for _, g := range t.sources.Gauges {
		if mm, heard := t.last[g.Name]; heard {
			fmt.Fprintf(t.out, "  %s reads %.3f mm\n", placeOf(g), mm)
		} else {
			fmt.Fprintf(t.out, "  %s: nothing was heard from it\n", placeOf(g))
		}
	}
}

func sourceOf(sources *config.Rig, name string) config.Gauge {
	i := slices.IndexFunc(sources.Gauges, func(g config.Gauge) bool { return g.Name == name })
	return sources.Gauges[i]
}

func namesOf(sources *config.Rig, names []string) string {
	var out []string
	for _, n := range names {
		out = append(out, placeOf(sourceOf(sources, n)))
	}
	return strings.Join(out, " and ")
}

// putTouched splices what a touch said into the rig file.
func putTouched(file *splicing, t touched) error {
	path := "gauges[" + t.gauge.Name + "]."
	for _, v := range []struct{ key, is, was string }{
		{"port", t.source.Port, t.gauge.Port}, {"channel", t.source.Channel, t.gauge.Channel},
		{"frame", t.source.Frame, t.gauge.Frame}, {"sense", t.sense(), t.gauge.Sense},
	} {
		if v.is != v.was {
			if err := file.put(path+v.key, v.is); err != nil {
				return err
			}
		}
	}
	return nil
}

// shared warns of gauges that were not found and stand in the rig file at a
// place where another was.
func shared(rig *config.Rig, found []touched) (warnings []string) {
	for _, g := range rig.Gauges {
		if g.Port == "" || slices.ContainsFunc(found, func(f touched) bool { return f.gauge.Name == g.Name }) {
			continue
		}
		for _, f := range found {
			if f.source.Port == g.Port && f.source.Channel == g.Channel {
				warnings = append(warnings, fmt.Sprintf("warning: the rig file has gauge %s on %s, where gauge %s was found", g.Name, placeOf(g), f.gauge.Name))
			}
		}
	}
	return warnings
}
