package main

import (
	"fmt"
	"maps"
	"slices"
	"strings"
	"testing"

	"gaugelog/simulators"
)

// everyFault is what the bench must hold: the schedule the simulator promises.
var everyFault = []string{
	simulators.Garble, simulators.DropBytes, simulators.Stall, simulators.Unplug, simulators.UnitKey,
	simulators.Freeze, simulators.ZeroPressed, simulators.BatteryLow, simulators.Echo, simulators.LateReply,
	simulators.Noise, simulators.Endless, simulators.OverRange, simulators.Hold, simulators.ShowStatus,
}

// checkSchedule: every kind of frame, every fault, a port shared by two gauges
// of two rigs, a bus, and ports that come back under another name; and none of
// the faults passed by without touching a frame.
func (b *benchRun) checkSchedule(t *testing.T) {
	kinds, gauges, shared, renamed := map[string]int{}, 0, 0, 0
	for n := 1; n <= simulators.BenchRigs; n++ {
		rig := simulators.BenchRig(n).Rig
		for _, g := range rig.Gauges {
			gauges++
			f, _ := rig.FrameOf(g.Frame)
			kinds[f.Kind]++
		}
	}
	for _, p := range b.joint.Ports() {
		if len(p.Gauges) > 1 {
			shared++
		}
	}
	if gauges != 7 || len(kinds) != 5 || kinds["text"] != 2 || kinds["modbus"] != 2 || shared != 2 {
		t.Errorf("%d gauges, kinds %v, %d shared ports", gauges, kinds, shared)
	}
	for _, kind := range everyFault {
		found := b.faults(kind)
		if len(found) == 0 {
			t.Errorf("no fault %s in the schedule", kind)
		}
		for _, f := range found {
			if f.Fault.Name != "" && f.Fault.Name != f.port {
				renamed++
			}
			if f.Frames == 0 && kind != simulators.Unplug && kind != simulators.ZeroPressed {
				t.Errorf("%s on %s at %.0f s touched no frame", kind, f.port, float64(f.From)/1e9)
			}
		}
	}
	if renamed == 0 {
		t.Error("no port comes back under another name")
	}
}

// entry is one event expected or found: what, of whom, and when it happened.
type entry struct {
	kind, about, says string
	from, to          int64 // wall clock: it must be stamped in here
	n                 int   // 0: not known beforehand
}

// expected lists what one run must tell of a fault: one event, and one more
// where the fault's end is told. The instants are the simulator's own.
func (b *benchRun) expected(f *happenedFault, names map[string]string) (out []entry) {
	from, to := b.wall(f.From), b.wall(f.To)
	const second, soon = int64(1e9), int64(25e9) // a button is pressed every 20 s
	each := func(begins, ends entry) {
		for _, name := range f.touches() {
			if _, ours := names[name]; ours {
				begins.about, ends.about = name, name
				out = append(out, begins)
				if ends.kind != "" {
					out = append(out, ends)
				}
			}
		}
	}
	status := func(word string) {
		each(entry{kind: "status", says: "says " + word, from: from, to: from + soon},
			entry{kind: "status", says: "no longer says " + word, from: to, to: to + 61*second})
	}
	switch f.Fault.Kind {
	case simulators.Unplug:
		for name, port := range names {
			if port == f.port {
				out = append(out, entry{kind: "port-lost", about: name, from: from, to: from},
					entry{kind: "port-back", about: name, says: "gap", from: to, to: to + soon})
			}
		}
	case simulators.Stall:
		each(entry{kind: "no-reading", says: "silent", from: from, to: to}, entry{kind: "gap", from: to, to: to + soon})
	case simulators.OverRange:
		each(entry{kind: "no-reading", says: "over-range", from: from, to: to, n: f.Frames}, entry{})
	case simulators.UnitKey:
		each(entry{kind: "unit-key", says: "shows in", from: from, to: from + soon}, entry{kind: "unit-key", says: "shows mm", from: to, to: to + soon})
	case simulators.BatteryLow:
		status("battery-low")
	case simulators.Hold:
		status("hold")
	case simulators.ShowStatus:
		status(f.Fault.Status)
	case simulators.Garble, simulators.DropBytes, simulators.Noise, simulators.Endless, simulators.LateReply:
		if f.Frames > 0 && slices.Contains(slices.Collect(maps.Values(names)), f.port) {
			out = append(out, entry{kind: "frames-refused", about: f.port, from: from, to: to + 2*second})
		}
	}
	return out
}

// checkLedger: each run's events are those its faults make, each once, in its
// time, and no others.
func (b *benchRun) checkLedger(t *testing.T) {
	var kinds []string
	kinds = append(kinds, everyFault...)
	for run, events := range b.events {
		names := benchNames(run)
		var want []entry
		for _, f := range b.faults(kinds...) {
			want = append(want, b.expected(&f, names)...)
		}
		found := make([]int, len(want))
		for _, e := range events {
			if e.kind == "started" || e.kind == "stopped" {
				continue
			}
			about := e.gauge
			if e.kind == "frames-refused" {
				about, _, _ = strings.Cut(e.detail, ": ")
			}
			i := slices.IndexFunc(want, func(w entry) bool {
				return w.kind == e.kind && w.about == about && w.from <= e.ns && e.ns <= w.to && strings.Contains(e.detail, w.says)
			})
			if i < 0 {
				t.Errorf("run %d: no fault explains %s", run+1, b.tellEvent(e))
				continue
			}
			if found[i]++; found[i] > 1 {
				t.Errorf("run %d: once more: %s, %d frames", run+1, b.tellEvent(e), e.n)
			}
			if want[i].n != 0 && e.n != want[i].n {
				t.Errorf("run %d: %s counts %d frames, %d were sent", run+1, b.tellEvent(e), e.n, want[i].n)
			}
		}
		for i, n := range found {
			if n != 1 {
				t.Errorf("run %d: %s of %s from %.0f s is told %d times", run+1, want[i].kind, want[i].about, float64(want[i].from-b.wall(0))/1e9, n)
			}
		}
		t.Logf("run %d: %d events for the beginnings and ends of its faults, each once", run+1, len(want))
	}
}

func (b *benchRun) tellEvent(e foundEvent) string {
	return fmt.Sprintf("%s of %q at %.3f s (%s)", e.kind, e.gauge, float64(e.ns-b.wall(0))/1e9, e.detail)
}
