package analysis

import (
	"math"

	"gaugelog/analysis/history"
	"gaugelog/analysis/steps"
	"gaugelog/analysis/stiffness"
	"gaugelog/config"
)

// stiffnessInput hands the increments of every answered step to the
// stiffness fit. Seat gauges count, reference gauges do not; a gauge without
// an increment in a step is left out of that step, and so are all of a step
// of which nobody knows by how much it changed the load.
func stiffnessInput(h *history.History, f *steps.Findings, gravity float64) stiffness.Input {
	in := stiffness.Input{Rig: h.Rig, InitialAfterS: h.Rig.Read.InitialAfter.Value}
	for i, s := range f.Steps {
		loads := stepLoads(h, s, gravity)
		if i <= f.Baseline {
			in.Baseline = loads
			continue
		}
		obs := stiffness.StepObs{Name: s.Name, Loads: loads}
		if s.Response != nil && *s.Response && s.DeltaKnown {
			obs.Gauges = increments(h.Rig, s)
		}
		in.Steps = append(in.Steps, obs)
	}
	in.StandU = standMovement(h.Rig, f)
	return in
}

// standMovement is by how much (mm, one standard uncertainty) each stand may
// have moved over one increment: what the reference gauges on it show beyond
// their own errors, for nothing else moves them. A stand without a reference
// gauge, or one that stood still as far as it can tell, is left out.
func standMovement(rig *config.Rig, f *steps.Findings) map[string]float64 {
	square, n := map[string]float64{}, map[string]float64{}
	for i := f.Baseline + 1; i < len(f.Steps); i++ {
		s := f.Steps[i]
		if s.Response == nil || !*s.Response {
			continue
		}
		for g, gauge := range rig.Gauges {
			if gauge.Sees != "reference" || gauge.Stand == "" || g >= len(s.Gauges) || s.Gauges[g].Gross.Increment == nil {
				continue
			}
			v := s.Gauges[g].Gross.Increment
			own := v.U * v.U
			if gauge.U != nil {
				own += 2 * gauge.U.Value * gauge.U.Value
			}
			square[gauge.Stand] += v.MM*v.MM - own
			n[gauge.Stand]++
		}
	}
	out := map[string]float64{}
	for stand, sum := range square {
		if sum > 0 {
			out[stand] = math.Sqrt(sum / n[stand])
		}
	}
	return out
}

func increments(rig *config.Rig, s steps.Step) []stiffness.Obs {
	var out []stiffness.Obs
	for g, figures := range s.Gauges {
		of := figures.Gross
		if len(rig.Gauges[g].Bar) == 2 {
			of = figures.Net
		}
		if of.Increment == nil || rig.Gauges[g].Sees == "reference" {
			continue
		}
		u := math.Sqrt(math.Max(0, of.Increment.U*of.Increment.U-of.Carried*of.Carried))
		out = append(out, stiffness.Obs{
			Gauge: g, MM: of.Increment.MM, U: u, Carried: of.Carried,
			// Scatter differs before and after; what a plateau leaves in both its
			// increments is where it lies within a step of the resolution.
			UBefore: math.Min(u/math.Sqrt2, rig.Gauges[g].Resolution.Value/math.Sqrt(12)),
		})
	}
	return out
}

// stepLoads lists what hangs in a step with the uncertainty of its weights,
// from the mark's own text or the plan's.
func stepLoads(h *history.History, s steps.Step, gravity float64) []stiffness.StepLoad {
	var out []stiffness.StepLoad
	for i := range h.Rig.Loads {
		l := &h.Rig.Loads[i]
		n, hangs := s.Loads[l.Name]
		if !hangs {
			continue
		}
		sl := stiffness.StepLoad{Load: l.Name, N: n}
		kg, weighed := s.Kilogram[l.Name]
		sl.Weighed = weighed
		if w := weightOf(h, l.Name, s, kg); w != nil {
			sl.U = weightU(w, l, gravity)
		}
		out = append(out, sl)
	}
	return out
}

// weightOf finds the text that set a load's value in a step: the last mark of
// that load up to the step, or the plan's entry of the same mass.
func weightOf(h *history.History, load string, s steps.Step, kg float64) *config.Weight {
	var shown string
	until := max(s.From, s.Marked)
	for _, m := range h.Marks {
		if m.Kind == "load" && m.Load == load && m.Time <= until+sameChange {
			shown = m.Shown
		}
	}
	if w, err := config.ParseWeight(shown); err == nil && (w.Mass != nil && w.Mass.U > 0 || w.Force != nil && w.Force.U > 0) {
		return &w
	}
	for _, p := range h.Rig.Plan {
		for _, set := range p.Set {
			if set.Load == load && set.Weight.Mass != nil && set.Weight.Mass.Value == kg && kg != 0 {
				w := set.Weight
				return &w
			}
		}
	}
	return nil
}

// sameChange is how far apart marks may lie that tell of one change of load
// (design: marks within 20 s of each other), ns.
const sameChange = int64(20e9)

// weightU is the standard uncertainty of a weight as a force on the beam, N.
func weightU(w *config.Weight, l *config.Load, gravity float64) float64 {
	lever := 1.0
	if l.Lever != nil {
		lever = l.Lever.Value
	}
	switch {
	case w.Mass != nil:
		return w.Mass.U * gravity * lever
	case w.Force != nil:
		return w.Force.U * lever
	}
	return 0
}
