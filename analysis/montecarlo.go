package analysis

import "gaugelog/analysis/stiffness"

// MonteCarlo is the check of the stiffness's uncertainty by drawn inputs (JCGM
// 101); it is there only where it was asked for.
type MonteCarlo struct {
	Draws   int    `json:"draws"`
	Seed    uint64 `json:"seed"`
	Refused int    `json:"refused"` // draws whose inputs made no beam
	// Agrees says that modulus and bending stiffness both agree.
	Agrees  bool   `json:"agrees"`
	Modulus Drawn  `json:"modulus"` // MPa
	Bending Drawn  `json:"bending"` // N.mm2
	Text    string `json:"text"`
}

// Drawn is one figure's draws held against its propagated interval.
type Drawn struct {
	Unit string  `json:"unit"`
	Mean float64 `json:"mean"`
	SD   float64 `json:"sd"`
	// Lo95 and Hi95 are the shortest interval that holds 95 % of the draws.
	Lo95           float64 `json:"lo95"`
	Hi95           float64 `json:"hi95"`
	PropagatedLo95 float64 `json:"propagated_lo95"`
	PropagatedHi95 float64 `json:"propagated_hi95"`
	// Digits of u to which the ends agree (JCGM 101, clause 8): 2, 1, or 0 where
	// they do not. Tolerance is how far they may differ at that, Noise how far
	// this many draws know them.
	Digits    int     `json:"digits"`
	Tolerance float64 `json:"tolerance"`
	Noise     float64 `json:"noise"`
	Agrees    bool    `json:"agrees"`
}

func monteCarloOf(mc *stiffness.MonteCarlo) *MonteCarlo {
	return &MonteCarlo{
		Draws: mc.Draws, Seed: mc.Seed, Refused: mc.Refused, Agrees: mc.Modulus.Agrees && mc.Bending.Agrees,
		Modulus: drawnOf(mc.Modulus, "MPa"), Bending: drawnOf(mc.Bending, "N.mm2"), Text: mc.Words,
	}
}

func drawnOf(d stiffness.Drawn, unit string) Drawn {
	return Drawn{
		Unit: unit, Mean: d.Mean, SD: d.SD, Lo95: d.Lo, Hi95: d.Hi,
		PropagatedLo95: d.PropagatedLo, PropagatedHi95: d.PropagatedHi,
		Digits: d.Digits, Tolerance: d.Tolerance, Noise: d.Noise, Agrees: d.Agrees,
	}
}
