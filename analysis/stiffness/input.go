package stiffness

import (
	"fmt"
	"math"

	"gaugelog/config"
)

// Input is everything an estimate is made from.
type Input struct {
	// Rig is the rig file with its amendments applied.
	Rig *config.Rig
	// InitialAfterS is the time after full load to which the increments
	// belong, s; it is carried into the result's words only.
	InitialAfterS float64
	// Baseline holds what hung on the beam in the baseline; nil for nothing.
	Baseline []StepLoad
	// Steps are in the order in which they happened. Every change of load
	// belongs in here, also one no gauge answered (with no Gauges): loads are
	// differenced from one step to the next.
	Steps []StepObs
	// StandU is the standard uncertainty in mm, by stand's name, of that
	// stand's own movement over one increment (from its reference gauges).
	StandU map[string]float64
}

// StepObs is one step: what hung on the beam and how far each gauge went.
type StepObs struct {
	Name  string
	Loads []StepLoad // all loads on the beam in this step, not the change
	// Gauges are the answers to this step's change of load. Leave out a gauge
	// that was not working or not undisturbed, and reference gauges.
	Gauges []Obs
}

// StepLoad is one of the rig's loads in one step.
type StepLoad struct {
	Load string  // its name in the rig file
	N    float64 // the force on the beam: lever times (mass and tare times gravity, or force)
	// U is the standard uncertainty in N of the weight itself, without
	// gravity's and the lever's; 0 if none was stated. It is taken as one
	// relative error common to all steps of a load: weights from one scale.
	U float64
	// Weighed says that the force came from a mass, so gravity's error is in it.
	Weighed bool
}

// Obs is one gauge's increment in one step.
type Obs struct {
	Gauge int // index into the rig's gauges
	// MM is the increment of the gauge's own sag in mm, down positive, at the
	// initial-sag time after full load: sag then, less the trend from before
	// the change carried forward to the same instant. Calibration, sense and
	// offsets are applied; support movement is not taken off.
	MM float64
	// U is the standard uncertainty of MM in mm from scatter, resolution and
	// the carrying forward. A gauge's stated u and its gain's are added here,
	// not by the caller. 0: from the gauge's resolution.
	U float64
	// UBefore is the part of U that comes from the plateau before the change,
	// which the increment before shares with the opposite sign; 0: U/sqrt2.
	UBefore float64
	// Carried is by how much, in mm and with its sign, MM may be wrong (one
	// standard uncertainty, beside U) because the trend before the change was
	// carried forward by the wrong curve. All gauges of a step err so together.
	Carried float64
	// DOF are the degrees of freedom behind U; 0 for many.
	DOF float64
}

// check refuses what cannot be estimated from.
func (in *Input) check() error {
	if in.Rig == nil {
		return fmt.Errorf("stiffness: no rig was handed in; mend: load the run's rig.yaml")
	}
	for _, s := range in.Steps {
		for _, o := range s.Gauges {
			if o.Gauge < 0 || o.Gauge >= len(in.Rig.Gauges) {
				return fmt.Errorf("stiffness: step %s has a reading of gauge number %d; mend: the rig has %d gauges", s.Name, o.Gauge, len(in.Rig.Gauges))
			}
			for _, v := range []float64{o.MM, o.U, o.UBefore, o.DOF, o.Carried} {
				if math.IsNaN(v) || math.IsInf(v, 0) {
					return fmt.Errorf("stiffness: step %s, gauge %s: a figure is not a number; mend: leave the gauge out of this step", s.Name, in.Rig.Gauges[o.Gauge].Name)
				}
			}
			if o.U < 0 || o.UBefore < 0 {
				return fmt.Errorf("stiffness: step %s, gauge %s: an uncertainty is below zero; mend: hand in 0 where unknown", s.Name, in.Rig.Gauges[o.Gauge].Name)
			}
		}
	}
	return in.checkLoads()
}

func (in *Input) checkLoads() error {
	known := map[string]bool{}
	for _, l := range in.Rig.Loads {
		known[l.Name] = true
	}
	all := append([]StepObs{{Name: "baseline", Loads: in.Baseline}}, in.Steps...)
	for _, s := range all {
		for _, l := range s.Loads {
			if !known[l.Load] {
				return fmt.Errorf("stiffness: step %s hangs load %s, which the rig does not have; mend: name it under loads in the rig file or an amendment", s.Name, l.Load)
			}
			if math.IsNaN(l.N) || math.IsInf(l.N, 0) || !(l.U >= 0) {
				return fmt.Errorf("stiffness: step %s: load %s is %g\u202fN with u %g\u202fN; mend: give both as numbers", s.Name, l.Load, l.N, l.U)
			}
		}
	}
	return nil
}
