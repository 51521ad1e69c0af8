package simulators

import (
	"encoding/json"
	"fmt"
	"io"
	"math"
)

// Stiffness is the true stiffness: bending in N mm2, shear in N (infinite
// where the truth gives no shear modulus), modulus in MPa.
func (s *Sim) Stiffness() (modulus, bending, shear float64) {
	return float64(s.truth.Specimen.Modulus), s.beam.bending, s.beam.shear
}

// Creep is the true relative compliance J(t)/J(0) at t seconds under load.
func (s *Sim) Creep(t float64) float64 { return s.beam.law.At(t) }

// Steps lists the plan's steps as they really happened.
func (s *Sim) Steps() []StepTruth { return s.timeline.steps }

// Faults lists what really went wrong, in the order of the fault file. Frames
// and MM fill as the simulation goes on.
func (s *Sim) Faults() []FaultTruth {
	out := make([]FaultTruth, len(s.log))
	for i, f := range s.log {
		out[i] = *f
	}
	return out
}

// Sag is the true displacement of the beam under a gauge since the start, in
// mm, down positive, with the plungers as they are: total, and net of what the
// supports did. at is nanoseconds from the start. ok is false for a gauge that
// does not look at the beam.
func (s *Sim) Sag(gauge string, at int64) (total, net float64, ok bool) {
	view, ok := s.views[gauge]
	if !ok {
		return 0, 0, false
	}
	for _, g := range s.gauges {
		if g.name == gauge && g.probe == nil {
			t := float64(at) / 1e9
			return s.curveAt(g.gauge.curve, t), s.curveAt(view, t), true
		}
	}
	return 0, 0, false
}

// Lost are the frames a port sent and nobody could read because of a power
// cut or because it was unplugged.
func (s *Sim) Lost(port int) int { return s.lines[port].lost }

// WriteTruth writes the log of the truth as JSON lines: one object with the
// specimen, one for each step, each sag at the times asked (s after each
// step's full load; those that lie within it) and each fault. Times are
// seconds from the start and wall-clock nanoseconds since 1970 UTC.
//
// The lines of kind gauge count each instrument's frames ([Counts]); what the
// recording must hold is all that are intact. An error of [Options.Frames] is
// returned too.
func (s *Sim) WriteTruth(w io.Writer, times []float64) error {
	if s.frames != nil && s.frames.err != nil {
		return fmt.Errorf("frames log: %w", s.frames.err)
	}
	enc := json.NewEncoder(w)
	modulus, bending, shear := s.Stiffness()
	type object = map[string]any
	specimen := object{"kind": "specimen", "modulus_mpa": modulus, "bending_n_mm2": bending,
		"gravity_m_s2": s.gravity, "creep": s.truth.Creep.describe(), "start_unix_ns": s.start.Wall, "end_s": s.timeline.end}
	if !math.IsInf(shear, 0) {
		specimen["shear_n"] = shear
	}
	lines := []object{specimen}
	for _, st := range s.timeline.steps {
		loads := object{}
		for _, l := range st.Loads {
			loads[l.Name] = l.Newton
		}
		line := object{"kind": "step", "step": st.Step, "from_s": seconds(st.From), "full_s": seconds(st.Full),
			"from_unix_ns": s.start.Wall + st.From, "full_unix_ns": s.start.Wall + st.Full, "to_s": seconds(st.To), "newton": loads}
		if st.Marked >= 0 {
			line["marked_s"], line["marked_unix_ns"] = seconds(st.Marked), s.start.Wall+st.Marked
		}
		lines = append(lines, line)
		for _, after := range times {
			at := st.Full + nanoseconds(after)
			if at >= st.To {
				continue
			}
			for _, g := range s.gauges {
				if total, net, ok := s.Sag(g.name, at); ok {
					lines = append(lines, object{"kind": "sag", "step": st.Step, "gauge": g.name,
						"after_s": after, "total_mm": total, "net_mm": net})
				}
			}
		}
	}
	for _, f := range s.log {
		lines = append(lines, object{"kind": "fault", "fault": f.Fault.Kind, "from_s": seconds(f.From), "to_s": seconds(f.To),
			"from_unix_ns": s.start.Wall + f.From, "gauges": f.Gauges, "frames": f.Frames, "mm": f.size(), "load": f.Fault.Load, "by": f.Fault.By.Shown})
	}
	for _, c := range s.Counts() {
		lines = append(lines, object{"kind": "gauge", "gauge": c.Name, "due": c.Due(), "intact": c.Intact, "doubtful": c.Doubtful,
			"no_reading": c.NoReading, "damaged": c.Damaged, "silent": c.Silent, "lost": c.Lost})
	}
	for i, p := range s.ports {
		lines = append(lines, object{"kind": "port", "port": p.Name, "gauges": p.Gauges, "bytes": s.lines[i].sent,
			"frames": s.lines[i].frames, "lost": s.lines[i].lost})
	}
	for _, line := range lines {
		if err := enc.Encode(line); err != nil {
			return fmt.Errorf("truth log: %w", err)
		}
	}
	return nil
}

func (f *FaultTruth) size() float64 {
	if f.MM != 0 {
		return f.MM
	}
	return float64(f.Fault.Size)
}

// describe gives the law's parameters by their names in the truth file.
func (c TruthCreep) describe() map[string]any {
	out := map[string]any{"law": c.Law}
	switch c.Law {
	case "power":
		out["amplitude"], out["n"] = c.Amplitude, c.N
	case "log", "standard-solid":
		out["amplitude"], out["tau_s"] = c.Amplitude, float64(c.Tau)
	case "burgers":
		out["amplitude"], out["tau_s"], out["flow_per_h"] = c.Amplitude, float64(c.Tau), c.Flow
	case "kelvin-chain":
		out["amplitudes"], out["taus_s"] = c.Amplitudes, c.Taus
	}
	return out
}

func seconds(ns int64) float64 { return float64(ns) / 1e9 }
