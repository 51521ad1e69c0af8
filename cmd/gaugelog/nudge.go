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

// nudgeFlags are the flags of `nudge`.
type nudgeFlags struct {
	all, write, yes    bool
	ports, lasts, size string
	gauges             []string
}

func nudgeCommand() *cobra.Command {
	var f nudgeFlags
	c := &cobra.Command{
		Use:     "nudge RIG",
		GroupID: "prepare",
		Short:   "Which gauge is on which port? Touch them in turn",
		Long: `Watches the ports of a rig (--all: every port of this machine) and asks you to
touch each gauge in turn: move its plunger the way the beam takes it when it sags,
by half a millimetre or so, and let go. It says which port moved, by how much and
which way. "s" and Enter skips a gauge, "q" ends.

--write puts port and sense into the rig file, after showing the lines and asking;
comments and order stay.`,
		Example: "  gaugelog nudge rig.yaml --all --write",
		Args:    cobra.ExactArgs(1),
		RunE:    func(cmd *cobra.Command, args []string) error { return runNudge(cmd, args[0], f) },
	}
	fl := c.Flags()
	fl.BoolVar(&f.all, "all", false, "watch every port of this machine, by the frames the rig's gauges have")
	fl.StringSliceVar(&f.gauges, "gauge", nil, "ask for this gauge only (may be repeated)")
	fl.StringVar(&f.size, "size", "0.05 mm", "the smallest movement that counts")
	fl.StringVar(&f.lasts, "for", "", "give up after this time (default: wait until all were touched)")
	fl.StringVar(&f.ports, "ports", "", "file of \"name path\" lines that say where the ports are, as `simulate` prints them")
	fl.BoolVar(&f.write, "write", false, "put port and sense into the rig file")
	fl.BoolVar(&f.yes, "yes", false, "with --write: do not ask")
	return c
}

func runNudge(cmd *cobra.Command, rigFile string, f nudgeFlags) (err error) {
	rig, file, err := openRig(rigFile)
	if err != nil {
		return err
	}
	wanted, err := gaugesWanted(rig, f.gauges)
	if err != nil {
		return err
	}
	size, err := config.ParseLength(f.size)
	if err != nil {
		return wrong(fmt.Errorf("--size: %w", err), mendOf(err))
	}
	opener, err := openerOf(f.ports)
	if err != nil {
		return err
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
	sources := sourcesOf(rig)
	if f.all {
		if sources, err = everySource(ctx, cmd.ErrOrStderr(), rig, opener); err != nil {
			return err
		}
	}
	if len(sources.Gauges) == 0 {
		return wrongf("add port: and frame: to the gauges, or give --all", "no gauge of the rig has a port and a frame to be read by")
	}
	lines := typed(cmd.Context(), cmd.InOrStdin())
	found, err := touchAll(ctx, cmd, sources, wanted, opener, lines, size.Value)
	if err != nil {
		return err
	}
	if f.write {
		for _, t := range found {
			if err := putTouched(file, t); err != nil {
				return err
			}
		}
		if err := file.write(cmd, lines, f.yes); err != nil {
			return err
		}
	}
	if len(found) < len(wanted) {
		return failed(fmt.Errorf("%d of %d gauges were not told apart", len(wanted)-len(found), len(wanted)), "run it again with --gauge for those")
	}
	return nil
}

// gaugesWanted are the gauges to be touched, in the rig's order.
func gaugesWanted(rig *config.Rig, names []string) ([]config.Gauge, error) {
	for _, n := range names {
		if _, _, err := gaugeOf(rig, n); err != nil {
			return nil, err
		}
	}
	var out []config.Gauge
	for _, g := range rig.Gauges {
		if len(names) == 0 || slices.Contains(names, g.Name) {
			out = append(out, g)
		}
	}
	return out, nil
}

// sourcesOf is a rig whose gauges are the different places readings may come
// from, named s0, s1 and so on.
func sourcesOf(rig *config.Rig) *config.Rig {
	out := *rig
	out.Gauges, out.Probes = nil, nil
	for _, g := range rig.Gauges {
		same := func(o config.Gauge) bool { return o.Port == g.Port && o.Channel == g.Channel }
		if g.Port != "" && g.Frame != "" && !slices.ContainsFunc(out.Gauges, same) {
			g.Name = fmt.Sprintf("s%d", len(out.Gauges))
			out.Gauges = append(out.Gauges, g)
		}
	}
	return &out
}

// everySource finds which of the machine's ports speaks which of the rig's
// frames, by listening to all with each in turn.
func everySource(ctx context.Context, w io.Writer, rig *config.Rig, opener device.Opener) (*config.Rig, error) {
	ports, err := portNames(opener)
	if err != nil {
		return nil, err
	}
	out := *rig
	out.Gauges, out.Probes = nil, nil
	for _, like := range manners(rig) {
		try := *rig
		try.Gauges, try.Probes = nil, nil
		for _, p := range ports {
			if !slices.ContainsFunc(out.Gauges, func(g config.Gauge) bool { return g.Port == p && g.Channel == like.Channel }) {
				g := like
				g.Port, g.Name = p, fmt.Sprintf("t%d", len(try.Gauges))
				try.Gauges = append(try.Gauges, g)
			}
		}
		if len(try.Gauges) == 0 {
			continue
		}
		fmt.Fprintf(w, "listening to %d ports for frame %s\n", len(try.Gauges), like.Frame)
		heard, err := whoSpeaks(ctx, &try, opener)
		if err != nil {
			return nil, err
		}
		for _, g := range try.Gauges {
			if heard[g.Name] {
				g.Name = fmt.Sprintf("s%d", len(out.Gauges))
				out.Gauges = append(out.Gauges, g)
			}
		}
	}
	return &out, nil
}

// portNames are the machine's ports that nobody holds, or those of a list.
func portNames(opener device.Opener) ([]string, error) {
	if listed, ok := opener.(listedOpener); ok {
		var names []string
		for n := range listed {
			names = append(names, n)
		}
		slices.Sort(names)
		return names, nil
	}
	list, err := device.ListPorts("", device.DefaultLockDir())
	if err != nil {
		return nil, err
	}
	var names []string
	for _, p := range list {
		if p.HeldBy == "" {
			names = append(names, p.Identity)
		}
	}
	return names, nil
}

// manners are the different ways in which the rig's gauges speak.
func manners(rig *config.Rig) []config.Gauge {
	var out []config.Gauge
	for _, g := range rig.Gauges {
		same := func(o config.Gauge) bool { return o.Frame == g.Frame && o.Channel == g.Channel }
		if g.Frame != "" && !slices.ContainsFunc(out, same) {
			out = append(out, g)
		}
	}
	return out
}

// whoSpeaks listens a while and tells which gauges gave an indication.
func whoSpeaks(ctx context.Context, rig *config.Rig, opener device.Opener) (heard map[string]bool, err error) {
	l, err := listenLive(ctx, rig, opener)
	if err != nil {
		return nil, err
	}
	defer func() { err = errors.Join(err, l.close()) }()
	heard = map[string]bool{}
	end := time.NewTimer(4 * time.Second)
	defer end.Stop()
	for {
		select {
		case r := <-l.readings:
			if r.Kind == device.Indication {
				heard[r.Gauge] = true
			}
		case <-end.C:
			return heard, nil
		case <-ctx.Done():
			return heard, nil
		}
	}
}

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

// touchAll asks for each gauge in turn.
func touchAll(ctx context.Context, cmd *cobra.Command, sources *config.Rig, wanted []config.Gauge, opener device.Opener, lines <-chan string, size float64) (found []touched, err error) {
	l, err := listenLive(ctx, sources, opener)
	if err != nil {
		return nil, err
	}
	defer func() { err = errors.Join(err, l.close()) }()
	w := nudge.New(nudge.Options{Size: size})
	began := time.Now()
	for len(wanted) > 0 {
		g := wanted[0]
		fmt.Fprintf(cmd.ErrOrStderr(), "touch gauge %s (at %s): move its plunger the way sag moves it, and let go\n", g.Name, g.At.Shown)
		next, t, err := waitForTouch(ctx, cmd, l, w, began, &lines, sources, found)
		switch {
		case err != nil || next == "q":
			return found, err
		case next == "s":
			fmt.Fprintf(cmd.ErrOrStderr(), "skipped %s\n", g.Name)
		case next == "again":
			continue
		default:
			t.gauge = g
			found = append(found, t)
			fmt.Fprintf(cmd.OutOrStdout(), "gauge %s is on %s: it moved by %+.3f mm, so the beam goes %s when the indication grows%s\n",
				g.Name, placeOf(t.source), t.moved, t.sense(), otherwise(t))
		}
		wanted = wanted[1:]
	}
	return found, nil
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

// waitForTouch waits for a touch or a typed letter: next is "s", "q", "again"
// or "" for a touch.
func waitForTouch(ctx context.Context, cmd *cobra.Command, l *live, w *nudge.Watcher, began time.Time, lines *<-chan string, sources *config.Rig, found []touched) (next string, t touched, err error) {
	out := cmd.ErrOrStderr()
	for {
		select {
		case <-ctx.Done():
			return "q", t, nil
		case text, open := <-*lines:
			if !open {
				*lines = nil // the input is over; touches still count
			}
			if text == "s" || text == "q" {
				return text, t, nil
			}
		case r := <-l.readings:
			if r.Kind != device.Indication {
				if words := troubleWords(r); words != "" {
					fmt.Fprintln(out, words)
				}
				continue
			}
			touch, ok := w.Add(r.Gauge, time.Since(began), r.MM)
			if !ok {
				continue
			}
			t := touched{source: sourceOf(sources, touch.Source), moved: touch.Moved()}
			if len(touch.Beside) > 0 {
				fmt.Fprintf(out, "%s moved by %+.3f mm, and %s moved too: touch one gauge at a time\n", placeOf(t.source), t.moved, namesOf(sources, touch.Beside))
				return "again", t, nil
			}
			for _, f := range found {
				if f.source.Name == t.source.Name {
					fmt.Fprintf(out, "%s moved by %+.3f mm, but that is gauge %s already\n", placeOf(t.source), t.moved, f.gauge.Name)
					return "again", t, nil
				}
			}
			return "", t, nil
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
