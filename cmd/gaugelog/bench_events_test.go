package main

import (
	"fmt"
	"math"
	"slices"
	"strings"
	"testing"

	"gaugelog/simulators"
)

// of lists the events of one kind and gauge.
func of(events []foundEvent, kind, gauge string) (out []foundEvent) {
	for _, e := range events {
		if e.kind == kind && (gauge == "*" || e.gauge == gauge) {
			out = append(out, e)
		}
	}
	return out
}

// happened is one fault of the schedule with the port it happened on.
type happenedFault struct {
	simulators.FaultTruth
	port   string
	gauges []string // on the port, of both rigs
}

// faults lists those of both rigs, in order of time.
func (b *benchRun) faults(kinds ...string) (out []happenedFault) {
	for _, s := range b.joint.Sims() {
		for _, f := range s.Faults() {
			if !slices.Contains(kinds, f.Fault.Kind) {
				continue
			}
			for _, p := range b.joint.Ports() {
				if p.Name == f.Fault.Port || slices.Contains(p.Gauges, f.Fault.Gauge) {
					out = append(out, happenedFault{f, p.Name, p.Gauges})
				}
			}
		}
	}
	slices.SortFunc(out, func(a, b happenedFault) int { return int((a.From - b.From) / 1e6) })
	return out
}

// touches lists the instruments a line's fault happens to.
func (f *happenedFault) touches() []string {
	if f.Fault.Gauge != "" {
		return []string{f.Fault.Gauge}
	}
	return f.gauges
}

// names lists the gauges and probes of one run, each with its port.
func benchNames(run int) map[string]string {
	out := map[string]string{}
	rig := simulators.BenchRig(run + 1).Rig
	for _, g := range rig.Gauges {
		out[g.Name] = g.Port
	}
	for _, p := range rig.Probes {
		out[p.Name] = p.Port
	}
	return out
}

func (b *benchRun) wall(at int64) int64 { return b.joint.Sims()[0].Instant(at).Wall }

// checkPorts: a port that was unplugged is said to be lost once and back once,
// in each run that has something on it, with the length of the gap.
func (b *benchRun) checkPorts(t *testing.T) {
	unplugs := b.faults(simulators.Unplug)
	for run, events := range b.events {
		for name, port := range benchNames(run) {
			var want []happenedFault
			for _, f := range unplugs {
				if f.port == port {
					want = append(want, f)
				}
			}
			lost, back := of(events, "port-lost", name), of(events, "port-back", name)
			if len(lost) != len(want) || len(back) != len(want) {
				t.Errorf("run %d: %s was unplugged %d times; %d losses and %d returns are recorded: %+v", run+1, name, len(want), len(lost), len(back), append(lost, back...))
				continue
			}
			for i, f := range want {
				if lost[i].ns != b.wall(f.From) {
					t.Errorf("%s: lost at %d, was unplugged at %d", name, lost[i].ns, b.wall(f.From))
				}
				var gap float64
				at := strings.LastIndex(back[i].detail, "gap ")
				if _, err := fmt.Sscanf(back[i].detail[max(at, 0):], "gap %f s", &gap); at < 0 || err != nil {
					t.Errorf("%s: no length in %q", name, back[i].detail)
				}
				first := int64(math.MaxInt64) // that came after it was plugged in
				for _, g := range f.gauges {
					for _, s := range b.sent[g] {
						if s.NS >= b.wall(f.To) {
							first = min(first, s.NS)
						}
					}
				}
				near(t, name+"'s gap, s", gap, float64(first-b.wall(f.From))/1e9, 0.0011)
				if back[i].ns != first {
					t.Errorf("%s: back at %d, spoke first at %d", name, back[i].ns, first)
				}
			}
		}
	}
}

// checkUnits: each press of a unit key is one event, to inches and back.
func (b *benchRun) checkUnits(t *testing.T) {
	pressed := map[string]int{}
	for _, f := range b.faults(simulators.UnitKey) {
		pressed[f.Fault.Gauge] += 2
	}
	for run, events := range b.events {
		for name := range benchNames(run) {
			keys := of(events, "unit-key", name)
			if len(keys) != pressed[name] {
				t.Errorf("%s: %d unit keys recorded, want %d: %+v", name, len(keys), pressed[name], keys)
			}
			for i, k := range keys {
				if want := []string{"in", "mm"}[i%2]; !strings.HasSuffix(k.detail, "now shows "+want) {
					t.Errorf("%s: unit key %d says %q, want %s", name, i, k.detail, want)
				}
			}
		}
	}
}

// checkNoReadings: frames without a number are events with their reason, which
// count every one, and a gauge that stopped speaking is said to be silent once
// and its gap recorded once.
func (b *benchRun) checkNoReadings(t *testing.T) {
	for run, events := range b.events {
		for name := range benchNames(run) {
			sent, told, silent := 0, 0, 0
			for _, f := range b.sent[name] {
				if f.State == "no-reading" {
					sent++
				}
			}
			for _, e := range of(events, "no-reading", name) {
				switch {
				case strings.Contains(e.detail, "over-range"):
					told += e.n
				case strings.HasPrefix(e.detail, "silent"):
					silent++
				default:
					t.Errorf("%s: a non-reading for an unknown reason: %+v", name, e)
				}
			}
			if told != sent {
				t.Errorf("%s: %d frames without a number sent, %d told: %+v", name, sent, told, of(events, "no-reading", name))
			}
			if gaps := len(of(events, "gap", name)); gaps != silent {
				t.Errorf("%s: silent %d times, with %d gaps", name, silent, gaps)
			}
		}
	}
	for _, f := range b.faults(simulators.Stall) {
		for run, events := range b.events {
			for _, name := range f.touches() {
				if _, ours := benchNames(run)[name]; !ours {
					continue
				}
				found := 0
				for _, e := range of(events, "no-reading", name) {
					if strings.HasPrefix(e.detail, "silent") && b.wall(f.From) < e.ns && e.ns <= b.wall(f.To) {
						found++
					}
				}
				if found != 1 {
					t.Errorf("%s fell silent at %.0f s; that is told %d times", name, float64(f.From)/1e9, found)
				}
			}
		}
	}
}

// checkRefused: wherever frames were damaged, refused ones are counted, and
// nowhere else.
func (b *benchRun) checkRefused(t *testing.T) {
	spoiling := b.faults(simulators.Garble, simulators.DropBytes, simulators.Noise, simulators.Endless, simulators.LateReply)
	for run, events := range b.events {
		names := benchNames(run)
		total := map[string]int{}
		touched := make([]int, len(spoiling))
		for _, e := range of(events, "frames-refused", "*") {
			port, _, _ := strings.Cut(e.detail, ": ")
			total[port] += e.n
			inside := false
			for i, f := range spoiling {
				// Sums are told at most once a minute, with the next frame.
				if f.port == port && b.wall(f.From) <= e.ns && e.ns <= b.wall(f.To+85e9) {
					inside = true
					touched[i] += e.n
				}
			}
			if !inside {
				t.Errorf("run %d: refused where nothing was damaged: %+v", run+1, e)
			}
		}
		for i, f := range spoiling {
			ours := false
			for _, port := range names {
				ours = ours || port == f.port
			}
			if ours && f.Frames > 0 && touched[i] == 0 {
				t.Errorf("run %d: %s on %s at %.0f s touched %d frames; none was refused", run+1, f.Fault.Kind, f.port, float64(f.From)/1e9, f.Frames)
			}
		}
		t.Logf("run %d refused %v", run+1, total)
	}
}
