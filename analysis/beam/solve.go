package beam

import (
	"math"

	"gonum.org/v1/gonum/mat"
)

// Solve finds the elastic line under the loads. The error is a *LayoutError:
// a beam that does not stand, a load off the beam, a number that is not
// finite.
func (b Beam) Solve(loads []Load) (*Solution, error) {
	if err := b.check(); err != nil {
		return nil, err
	}
	for i, l := range loads {
		if err := b.checkLoad(i, l); err != nil {
			return nil, err
		}
	}
	if !b.LiftOff {
		f, err := b.factor(nil)
		if err != nil {
			return nil, err
		}
		return f.solve(loads), nil
	}
	return b.solveResting(loads)
}

// SolveEach finds the elastic line under each of several sets of loads. It
// gives what Solve would for each, but decomposes the beam's system once;
// with LiftOff, whose system depends on the loads, it does not.
func (b Beam) SolveEach(sets [][]Load) ([]*Solution, error) {
	out := make([]*Solution, len(sets))
	if b.LiftOff {
		for i, loads := range sets {
			s, err := b.Solve(loads)
			if err != nil {
				return nil, err
			}
			out[i] = s
		}
		return out, nil
	}
	if err := b.check(); err != nil {
		return nil, err
	}
	f, err := b.factor(nil)
	if err != nil {
		return nil, err
	}
	for i, loads := range sets {
		for j, l := range loads {
			if err := b.checkLoad(j, l); err != nil {
				return nil, err
			}
		}
		out[i] = f.solve(loads)
	}
	return out, nil
}

// Influence is the sag in mm at each place (rows) for one newton of each load
// (columns): a load's places count, its Force does not. Supports hold both
// ways, whatever LiftOff says, and do not settle, or the matrix would depend
// on the loads.
func (b Beam) Influence(places []float64, loads []Load) (*mat.Dense, error) {
	if len(places) == 0 || len(loads) == 0 {
		return nil, wrong("give at least one place and one load", "an influence matrix of %d places and %d loads is empty", len(places), len(loads))
	}
	if err := b.check(); err != nil {
		return nil, err
	}
	for i, x := range places {
		if !b.on(x) {
			return nil, wrong("put it between the beam's ends", "place %d at %g\u202fmm is off the beam (%g\u202fmm to %g\u202fmm)", i+1, x, b.From, b.End())
		}
	}
	b.Supports = append([]Support(nil), b.Supports...)
	for i := range b.Supports {
		b.Supports[i].Settlement = 0
	}
	f, err := b.factor(nil)
	if err != nil {
		return nil, err
	}
	out := mat.NewDense(len(places), len(loads), nil)
	for j, l := range loads {
		l.Force = 1
		if err := b.checkLoad(j, l); err != nil {
			return nil, err
		}
		s := f.solve([]Load{l})
		for i, x := range places {
			out.Set(i, j, s.Deflection(x))
		}
	}
	return out, nil
}

// held is a place where an unknown force acts on the beam.
type held struct {
	xi         float64 // (x - From) / Length
	compliance float64 // mm/N
	settlement float64 // mm
	clamp      bool
	support    int // index, or -1 for a spring
	spring     int // index, or -1 for a support
}

// factored is a beam's system, decomposed once for any loads. Lengths are in
// units of the beam's length and deflections in units of d, so that its
// entries are of the order of 1.
type factored struct {
	beam        Beam
	held        []held
	clamps      []int // indices into held
	bend, shear float64
	d           float64
	lu          mat.LU
}

// hopeless is the condition number from which a layout is called a mechanism.
const hopeless = 1e14

// factor sets up and decomposes the system for the supports not lifted.
func (b Beam) factor(lifted []bool) (*factored, error) {
	f := &factored{beam: b}
	for i, s := range b.Supports {
		if lifted == nil || !lifted[i] {
			f.held = append(f.held, held{clip(f.xi(s.At)), s.Compliance, s.Settlement, s.Clamp, i, -1})
		}
	}
	for i, s := range b.Springs {
		if s.Stiffness > 0 {
			f.held = append(f.held, held{clip(f.xi(s.At)), 1 / s.Stiffness, 0, false, -1, i})
		}
	}
	f.scale()
	n := len(f.held)
	for i, h := range f.held {
		if h.clamp {
			f.clamps = append(f.clamps, i)
		}
	}
	size := n + len(f.clamps) + 2
	a := mat.NewDense(size, size, nil)
	for i, h := range f.held {
		f.line(a, i, h.xi, false)
		a.Set(i, i, a.At(i, i)+h.compliance/f.d)
		a.Set(size-2, i, 1)
		a.Set(size-1, i, 1-h.xi)
	}
	for j, i := range f.clamps {
		f.line(a, n+j, f.held[i].xi, true)
		a.Set(size-1, n+j, 1)
	}
	f.lu.Factorize(a)
	if c := f.lu.Cond(); math.IsNaN(c) || c > hopeless {
		return nil, wrong("move the supports apart, or let one of them yield",
			"the supports do not fix the beam's line: the system's condition number is %.0e", c)
	}
	return f, nil
}

func (f *factored) xi(x float64) float64 { return (x - f.beam.From) / f.beam.Length }

// scale chooses the unit of deflection from the beam's own flexibility.
func (f *factored) scale() {
	l := f.beam.Length
	bend, shear := l*l*l/f.beam.EI, l/f.beam.S
	f.d = math.Max(bend, shear)
	if f.d == 0 {
		for _, h := range f.held {
			f.d = math.Max(f.d, h.compliance)
		}
	}
	if f.d == 0 {
		f.d = 1
	}
	f.bend, f.shear = bend/f.d, shear/f.d
}

// line writes the coefficients of the deflection (or, where turn is set, of
// the section's rotation) at xi into one row.
func (f *factored) line(a *mat.Dense, row int, xi float64, turn bool) {
	n := len(f.held)
	size, _ := a.Dims()
	for k, h := range f.held {
		if dx := xi - h.xi; dx > 0 {
			if turn {
				a.Set(row, k, f.bend*dx*dx/2)
			} else {
				a.Set(row, k, f.bend*dx*dx*dx/6-f.shear*dx)
			}
		}
	}
	for j, i := range f.clamps {
		if dx := xi - f.held[i].xi; dx > 0 {
			if turn {
				a.Set(row, n+j, f.bend*dx)
			} else {
				a.Set(row, n+j, f.bend*dx*dx/2)
			}
		}
	}
	if turn {
		a.Set(row, size-1, 1)
		return
	}
	a.Set(row, size-2, 1)
	a.Set(row, size-1, xi)
}

// solve finds the line for one set of loads, already checked.
func (f *factored) solve(loads []Load) *Solution {
	s := newSolution(f, loads)
	n, size := len(f.held), len(f.held)+len(f.clamps)+2
	rhs := mat.NewVecDense(size, nil)
	for i, h := range f.held {
		w, _ := s.loadLine(h.xi)
		rhs.SetVec(i, h.settlement/f.d-w)
	}
	for j, i := range f.clamps {
		_, turn := s.loadLine(f.held[i].xi)
		rhs.SetVec(n+j, -turn)
	}
	force, moment := s.resultant()
	rhs.SetVec(size-2, -force)
	rhs.SetVec(size-1, -moment)
	var x mat.VecDense
	// The condition was looked at in factor, so the only error left (a
	// warning of poor condition) cannot occur.
	_ = f.lu.SolveVecTo(&x, false, rhs)
	s.take(f, x.RawVector().Data)
	return s
}

// solveResting lets pins go where the beam lifts off them: an active set that
// frees the pin pulled hardest and takes back one the beam would sink through.
func (b Beam) solveResting(loads []Load) (*Solution, error) {
	lifted := make([]bool, len(b.Supports))
	for range 4*len(b.Supports) + 8 {
		if err := b.stands(lifted); err != nil {
			return nil, err
		}
		f, err := b.factor(lifted)
		if err != nil {
			return nil, err
		}
		s := f.solve(loads)
		s.lifted = append([]bool(nil), lifted...)
		change := s.worstContact()
		if change < 0 {
			return s, nil
		}
		lifted[change] = !lifted[change]
	}
	return nil, wrong("hold the beam down, or leave out the support it barely touches",
		"which supports the beam rests on cannot be settled under these loads")
}

// worstContact is the index of the pin whose state contradicts the solution
// most, or -1.
func (s *Solution) worstContact() int {
	b := s.beam
	total := 0.0
	for _, p := range s.points {
		total += math.Abs(p.force)
	}
	for _, q := range s.patches {
		total += math.Abs(q.force)
	}
	pull, worst := 1e-12*total, -1
	for i, sup := range b.Supports {
		if !sup.Clamp && !s.lifted[i] && -s.reactions[i].Force > pull {
			pull, worst = -s.reactions[i].Force, i
		}
	}
	if worst >= 0 {
		return worst
	}
	sink := 1e-12 * total * s.d
	for i, sup := range b.Supports {
		if !s.lifted[i] {
			continue
		}
		if gap := s.Deflection(sup.At) - sup.Settlement; gap > sink {
			sink, worst = gap, i
		}
	}
	return worst
}
