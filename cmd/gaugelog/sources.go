package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"maps"
	"slices"
	"time"

	"gaugelog/config"
	"gaugelog/device"
)

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
		paths, err := listedPorts(listed.file)
		return slices.Sorted(maps.Keys(paths)), err
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
