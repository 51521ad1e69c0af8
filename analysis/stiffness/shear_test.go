package stiffness

import (
	"math"
	"testing"

	"gaugelog/config"
)

// deep is a deep beam of known shear (G = 600 MPa) with gauges on its
// overhangs, read with u on every increment.
func deep(u float64) (*plank, Input) {
	p := newPlank()
	p.h = 250
	p.rig.Specimen.Section.Depth = []config.Length{length(250, 0)}
	p.ei = 11800 * 140 * 250 * 250 * 250 / 12.0
	p.s = 600.0 * 5 / 6 * 140 * 250
	p.c = [2]float64{2e-6, 3e-6}
	p.rig.Specimen.From, p.rig.Specimen.Length = length(-900, 0), length(3900, 0)
	p.rig.Gauges[0].At, p.rig.Gauges[7].At = length(-850, 0), length(2950, 0)
	in := p.ladder()
	for k := range in.Steps {
		for i := range in.Steps[k].Loads {
			in.Steps[k].Loads[i].N *= 100
		}
		for i := range in.Steps[k].Gauges {
			in.Steps[k].Gauges[i].MM *= 100
			in.Steps[k].Gauges[i].U = u
		}
	}
	return p, in
}

// A test that tells the shear, and a prior within reason of it, say together
// more than either: the shear modulus lies between the two, weighted by what
// each knows, and is known better than by either.
func TestPriorIsOneMoreReading(t *testing.T) {
	p, in := deep(0.05)
	m, err := prepare(&in)
	if err != nil {
		t.Fatal(err)
	}
	free := *m
	free.mode = shearFree
	f, err := newFit(&in, &free)
	if err != nil {
		t.Fatal(err)
	}
	own := 600 * f.sol.U(1) / f.theta[1]
	prior := 600 + 1.5*own // as uncertain as the test, and within reason
	p.rig.Specimen.Expect.ShearModulus = &config.Stress{Quantity: config.Quantity{Value: prior, U: own}}
	e := mustCompute(t, in)
	if e.ShearFrom != "test" {
		t.Fatalf("shear from %s: %s", e.ShearFrom, e.ShearWords)
	}
	// In terms of 1/G, in which the test is linear, the two weigh alike.
	want := 2 / (1/600.0 + 1/prior)
	relative(t, "G", e.ShearModulus.Value, want, 0.02)
	relative(t, "u(G)", e.ShearModulus.U, own/math.Sqrt2*want/600, 0.1)
	if share := shareOf(e.Budget, "shear modulus"); share == 0 {
		t.Error("the prior is not in the budget")
	}
}

// A prior that the test contradicts is set aside, and said.
func TestContradictedPriorStandsAside(t *testing.T) {
	p, in := deep(0.05)
	p.rig.Specimen.Expect.ShearModulus = &config.Stress{Quantity: config.Quantity{Value: 2000, U: 40}}
	e := mustCompute(t, in)
	if e.ShearFrom != "test" || !codes(e)["shear-not-as-expected"] {
		t.Errorf("shear from %s, warnings %v", e.ShearFrom, e.Warnings)
	}
	relative(t, "G", e.ShearModulus.Value, 600, 1e-9)
	relative(t, "E", e.Modulus.Value, 11800, 1e-9)
}

// A stated shear modulus that nobody can check alters what is reported of a
// measured sag by nothing: load over sag does not know it.
func TestPriorLeavesLoadOverSag(t *testing.T) {
	p, in := deep(0.05)
	var u []float64
	for _, own := range []float64{1, 300} {
		p.rig.Specimen.Expect.ShearModulus = &config.Stress{Quantity: config.Quantity{Value: 610, U: own}}
		e := mustCompute(t, in)
		for _, g := range e.StiffnessAt {
			if g.Gauge == "g4" && g.Ratio != nil {
				u = append(u, g.Ratio.U/g.Ratio.Value)
			}
		}
	}
	// Seat gauges measure the supports, so that the shear enters nowhere.
	if len(u) != 2 || math.Abs(u[0]/u[1]-1) > 0.05 {
		t.Errorf("relative u of load over sag with a sure and an unsure shear: %v", u)
	}
}

func shareOf(budget []Line, input string) float64 {
	for _, l := range budget {
		if l.Input == input {
			return l.Share
		}
	}
	return 0
}
