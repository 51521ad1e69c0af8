package stiffness

import (
	"math"

	"gaugelog/config"
)

// StepLoads turns what a load is set to into forces on the beam in N: lever
// times mass times gravity (m/s2) for what was weighed, lever times force for
// what was stated as such, the tare with either once the load is not zero.
// U is the weight's own standard uncertainty as stated. A load set to nothing
// gives nothing.
func StepLoads(l config.Load, w config.Weight, gravity float64) []StepLoad {
	lever := 1.0
	if l.Lever != nil {
		lever = l.Lever.Value
	}
	mass, u := 0.0, 0.0
	force, uf := 0.0, 0.0
	if w.Mass != nil {
		mass, u = w.Mass.Value, w.Mass.U
	}
	if w.Force != nil {
		force, uf = w.Force.Value, w.Force.U
	}
	if mass == 0 && force == 0 {
		return nil
	}
	if l.Tare != nil {
		mass, u = mass+l.Tare.Value, math.Hypot(u, l.Tare.U)
	}
	var out []StepLoad
	if mass != 0 {
		out = append(out, StepLoad{Load: l.Name, N: lever * mass * gravity, U: math.Abs(lever) * u * gravity, Weighed: true})
	}
	if force != 0 {
		out = append(out, StepLoad{Load: l.Name, N: lever * force, U: math.Abs(lever) * uf})
	}
	return out
}
