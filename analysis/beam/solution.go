package beam

import (
	"math"
	"sort"
)

// Reaction is what one support does to the beam.
type Reaction struct {
	Name   string
	At     float64 // mm
	Force  float64 // N, upward; below zero the support holds the beam down
	Moment float64 // N.mm, what a clamp adds to the sagging moment going right
	// Lifted is true where the beam has left the support (LiftOff only).
	Lifted bool
}

// SpringForce is what one spring does to the beam.
type SpringForce struct {
	Name  string
	At    float64 // mm
	Force float64 // N, upward
}

type pointForce struct{ xi, force float64 }
type patchForce struct{ from, to, force float64 }

// Solution is the elastic line of one beam under one set of loads. Its
// methods take places in mm and hold for the whole beam; a place beyond an
// end is taken as that end.
type Solution struct {
	beam             Beam
	d, bend, shear   float64
	points, supports []pointForce // loads; forces of supports and springs
	moments          []pointForce // at clamps, force times the beam's length
	patches          []patchForce
	a, b             float64 // in units of d
	reactions        []Reaction
	springs          []SpringForce
	lifted           []bool
}

func newSolution(f *factored, loads []Load) *Solution {
	s := &Solution{beam: f.beam, d: f.d, bend: f.bend, shear: f.shear}
	s.points = make([]pointForce, 0, len(loads))
	for _, l := range loads {
		from, to := clip(f.xi(l.From)), clip(f.xi(l.To))
		if to-from <= near {
			s.points = append(s.points, pointForce{(from + to) / 2, l.Force})
		} else {
			s.patches = append(s.patches, patchForce{from, to, l.Force})
		}
	}
	return s
}

func clip(xi float64) float64 { return math.Min(1, math.Max(0, xi)) }

// loadLine is the deflection and the rotation the loads alone would give at
// xi to a beam held at its left end, in units of d (and d per length).
func (s *Solution) loadLine(xi float64) (w, turn float64) {
	for _, p := range s.points {
		if dx := xi - p.xi; dx > 0 {
			w += p.force * (s.bend*dx*dx*dx/6 - s.shear*dx)
			turn += p.force * s.bend * dx * dx / 2
		}
	}
	for _, p := range s.patches {
		_, second, third, fourth := p.powers(xi)
		w += p.force * (s.bend*fourth/24 - s.shear*second/2)
		turn += p.force * s.bend * third / 6
	}
	return w, turn
}

// powers are (<xi-from>^n - <xi-to>^n)/(to-from) for n = 1..4, with the
// division done in algebra, so that a short stretch loses no digits.
func (p patchForce) powers(xi float64) (first, second, third, fourth float64) {
	a, b := xi-p.from, xi-p.to
	if a <= 0 {
		return 0, 0, 0, 0
	}
	if b <= 0 {
		first = a / (p.to - p.from)
		return first, a * first, a * a * first, a * a * a * first
	}
	return 1, a + b, a*a + a*b + b*b, (a + b) * (a*a + b*b)
}

// resultant is the loads' total and their moment about the right end.
func (s *Solution) resultant() (force, moment float64) {
	for _, p := range s.points {
		force += p.force
		moment += p.force * (1 - p.xi)
	}
	for _, p := range s.patches {
		force += p.force
		moment += p.force * (1 - (p.from+p.to)/2)
	}
	return force, moment
}

// take reads the solved unknowns.
func (s *Solution) take(f *factored, x []float64) {
	n := len(f.held)
	s.a, s.b = x[len(x)-2], x[len(x)-1]
	s.reactions = make([]Reaction, 0, len(s.beam.Supports))
	s.supports = make([]pointForce, 0, n)
	for _, sup := range s.beam.Supports {
		s.reactions = append(s.reactions, Reaction{Name: sup.Name, At: sup.At, Lifted: true})
	}
	for _, sp := range s.beam.Springs {
		s.springs = append(s.springs, SpringForce{Name: sp.Name, At: sp.At})
	}
	for i, h := range f.held {
		s.supports = append(s.supports, pointForce{h.xi, x[i]})
		if h.support >= 0 {
			s.reactions[h.support].Force, s.reactions[h.support].Lifted = -x[i], false
		} else {
			s.springs[h.spring].Force = -x[i]
		}
	}
	for j, i := range f.clamps {
		s.moments = append(s.moments, pointForce{f.held[i].xi, x[n+j]})
		s.reactions[f.held[i].support].Moment = -x[n+j] * s.beam.Length
	}
}

// places are all xi at which the line's polynomial changes, ends included.
func (s *Solution) places() []float64 {
	all := []float64{0, 1}
	for _, set := range [][]pointForce{s.points, s.supports, s.moments} {
		for _, p := range set {
			all = append(all, clip(p.xi))
		}
	}
	for _, p := range s.patches {
		all = append(all, p.from, p.to)
	}
	sort.Float64s(all)
	out := all[:1]
	for _, x := range all[1:] {
		if x > out[len(out)-1] {
			out = append(out, x)
		}
	}
	return out
}

// state is the line and its derivatives at one xi, approached from the right.
type state struct {
	w, slope, curve float64 // units of d, d per length, d per length squared
	moment, shear   float64 // N times length, N
}

func (s *Solution) at(xi float64) state {
	w, turn := s.loadLine(xi)
	st := state{w: s.a + s.b*xi + w, slope: s.b + turn}
	q := 0.0
	for _, p := range s.points {
		st.push(xi-p.xi, p.force)
	}
	for _, p := range s.supports {
		if dx := xi - p.xi; dx > 0 {
			st.w += p.force * (s.bend*dx*dx*dx/6 - s.shear*dx)
			st.slope += p.force * s.bend * dx * dx / 2
		}
		st.push(xi-p.xi, p.force)
	}
	for _, p := range s.moments {
		if dx := xi - p.xi; dx >= 0 {
			st.w += p.force * s.bend * dx * dx / 2
			st.slope += p.force * s.bend * dx
			st.moment -= p.force
		}
	}
	for _, p := range s.patches {
		first, second, _, _ := p.powers(xi)
		st.shear -= p.force * first
		st.moment -= p.force * second / 2
		if xi >= p.from && xi < p.to {
			q += p.force / (p.to - p.from)
		}
	}
	st.slope += s.shear * st.shear
	st.curve = -s.bend*st.moment - s.shear*q
	return st
}

// push adds a force at distance dx to the left of the place looked at.
func (st *state) push(dx, force float64) {
	if dx >= 0 {
		st.shear -= force
		st.moment -= force * dx
	}
}

func (s *Solution) xi(x float64) float64 { return clip((x - s.beam.From) / s.beam.Length) }

// Deflection is the sag in mm at a place, downward positive.
func (s *Solution) Deflection(x float64) float64 {
	xi := s.xi(x)
	w, _ := s.loadLine(xi)
	w += s.a + s.b*xi
	for _, p := range s.supports {
		if dx := xi - p.xi; dx > 0 {
			w += p.force * (s.bend*dx*dx*dx/6 - s.shear*dx)
		}
	}
	for _, p := range s.moments {
		if dx := xi - p.xi; dx > 0 {
			w += p.force * s.bend * dx * dx / 2
		}
	}
	return w * s.d
}

// Slope is dw/dx at a place (mm per mm), the shear's part included: what a
// plunger's tip sees. Where a point force makes it jump, the value to the
// right is given (at the beam's right end, to the left).
func (s *Solution) Slope(x float64) float64 {
	return s.at(s.inside(x)).slope * s.d / s.beam.Length
}

// Moment is the bending moment in N.mm, sagging positive; at a clamp inside
// the beam, the value to the right.
func (s *Solution) Moment(x float64) float64 {
	return s.at(s.inside(x)).moment * s.beam.Length
}

// Shear is the shear force in N, positive where the part to the left is
// pushed up; at a point force, the value to the right.
func (s *Solution) Shear(x float64) float64 { return s.at(s.inside(x)).shear }

// inside keeps the right end's one-sided values from falling behind the last
// force there.
func (s *Solution) inside(x float64) float64 {
	xi := s.xi(x)
	if xi >= 1 {
		return math.Nextafter(1, 0)
	}
	return xi
}

// Reactions are the supports' forces and moments, in the beam's order.
func (s *Solution) Reactions() []Reaction { return append([]Reaction(nil), s.reactions...) }

// Reaction is that of the support of this index, as in Reactions.
func (s *Solution) Reaction(i int) Reaction { return s.reactions[i] }

// SpringForces are the springs' forces, in the beam's order.
func (s *Solution) SpringForces() []SpringForce { return append([]SpringForce(nil), s.springs...) }

// Uplift names the pins that hold the beam down or, with LiftOff, have been
// left by it: places where a beam that only rests would rise. Empty if none.
func (s *Solution) Uplift() []Reaction {
	var out []Reaction
	total := 0.0
	for _, r := range s.reactions {
		total += math.Abs(r.Force)
	}
	for i, r := range s.reactions {
		if !s.beam.Supports[i].Clamp && (r.Lifted || r.Force < -1e-9*total) {
			out = append(out, r)
		}
	}
	return out
}
