package beam

import (
	"fmt"
	"math"
)

// Beam is a straight beam of constant section on its supports.
type Beam struct {
	From   float64 // mm, where the beam begins
	Length float64 // mm, > 0
	// EI is the bending stiffness in N.mm2, > 0. +Inf is allowed: a beam
	// that does not bend, of use for taking a sag apart into its causes.
	EI float64
	// S is the shear stiffness kappa G A in N, > 0. +Inf makes the beam an
	// Euler-Bernoulli beam.
	S        float64
	Supports []Support
	Springs  []Spring
	// LiftOff says that the beam only rests on its pins: a pin cannot pull
	// it down. Clamps always hold both ways.
	LiftOff bool
}

// Support holds the beam at one place.
type Support struct {
	Name       string
	At         float64 // mm
	Clamp      bool    // holds the section's rotation at zero as well
	Compliance float64 // mm/N, >= 0: how far it yields per newton of reaction
	Settlement float64 // mm, downward: how far it goes down of itself
}

// Spring pushes back where the beam moves, such as a gauge's plunger. It does
// not hold the beam: a layout must stand without its springs.
type Spring struct {
	Name      string
	At        float64 // mm
	Stiffness float64 // N/mm, >= 0
}

// Load is a force on the beam, spread evenly from From to To; where the two
// are equal it is a point load.
type Load struct {
	Name     string
	From, To float64 // mm
	Force    float64 // N in total, downward
}

// Point is a point load of force N at a place in mm.
func Point(at, force float64) Load { return Load{From: at, To: at, Force: force} }

// Spread is a load of force N in total, spread evenly between two places in mm.
func Spread(from, to, force float64) Load { return Load{From: from, To: to, Force: force} }

// SelfWeight is the beam's own weight, force N in total.
func (b Beam) SelfWeight(force float64) Load {
	return Load{Name: "self-weight", From: b.From, To: b.From + b.Length, Force: force}
}

// End is the place in mm where the beam ends.
func (b Beam) End() float64 { return b.From + b.Length }

// LayoutError says what is wrong with a beam or its loads and what to do.
type LayoutError struct {
	What string
	Mend string
}

// Error gives what is wrong and the mend in one line.
func (e *LayoutError) Error() string { return e.What + "; mend: " + e.Mend }

func wrong(mend, format string, args ...any) error {
	return &LayoutError{What: fmt.Sprintf(format, args...), Mend: mend}
}

// near is the share of the beam's length below which two places are one.
const near = 1e-9

func finite(v float64) bool { return !math.IsNaN(v) && !math.IsInf(v, 0) }

// on reports whether a place lies on the beam, to rounding.
func (b Beam) on(x float64) bool {
	slack := near * b.Length
	return finite(x) && x >= b.From-slack && x <= b.End()+slack
}

// check looks at everything but the loads.
func (b Beam) check() error {
	switch {
	case !finite(b.From):
		return wrong("give the place where the beam begins in mm", "the beam begins at %g\u202fmm", b.From)
	case !finite(b.Length) || b.Length <= 0:
		return wrong("give the beam a length greater than 0", "the beam is %g\u202fmm long", b.Length)
	case math.IsNaN(b.EI) || b.EI <= 0:
		return wrong("give a bending stiffness greater than 0", "the bending stiffness is %g\u202fN.mm2", b.EI)
	case math.IsNaN(b.S) || b.S <= 0:
		return wrong("give a shear stiffness greater than 0, or +Inf for none", "the shear stiffness is %g\u202fN", b.S)
	}
	for i, s := range b.Supports {
		if err := b.checkSupport(i, s); err != nil {
			return err
		}
	}
	for i, s := range b.Springs {
		if !b.on(s.At) {
			return wrong("put it between the beam's ends", "spring %s at %g\u202fmm is off the beam (%g\u202fmm to %g\u202fmm)", named(s.Name, i), s.At, b.From, b.End())
		}
		if !finite(s.Stiffness) || s.Stiffness < 0 {
			return wrong("give a stiffness of 0 N/mm or more", "spring %s has a stiffness of %g\u202fN/mm", named(s.Name, i), s.Stiffness)
		}
	}
	return b.stands(nil)
}

func (b Beam) checkSupport(i int, s Support) error {
	name := named(s.Name, i)
	if !b.on(s.At) {
		return wrong("put it between the beam's ends, or mend the beam's from and length",
			"support %s at %g\u202fmm is off the beam (%g\u202fmm to %g\u202fmm)", name, s.At, b.From, b.End())
	}
	if !finite(s.Compliance) || s.Compliance < 0 {
		return wrong("give a compliance of 0 mm/N or more", "support %s has a compliance of %g\u202fmm/N", name, s.Compliance)
	}
	if !finite(s.Settlement) {
		return wrong("give the settlement in mm", "support %s settles by %g\u202fmm", name, s.Settlement)
	}
	for j, other := range b.Supports[:i] {
		if math.Abs(s.At-other.At) <= near*b.Length {
			return wrong("leave one of them out, or move it", "supports %s and %s are both at %g\u202fmm", named(other.Name, j), name, s.At)
		}
	}
	return nil
}

// stands reports a mechanism: fewer than two supports and no clamp among
// those that are not lifted.
func (b Beam) stands(lifted []bool) error {
	held := 0
	for i, s := range b.Supports {
		if lifted != nil && lifted[i] {
			continue
		}
		if s.Clamp {
			return nil
		}
		held++
	}
	if held >= 2 {
		return nil
	}
	if lifted != nil {
		return wrong("move the loads between the supports, or hold the beam down", "the beam tips off its supports under these loads")
	}
	return wrong("give it two supports at different places, or one of kind clamp", "the beam can turn or fall: it has %d support(s) and none is a clamp", held)
}

// check looks at one load.
func (b Beam) checkLoad(i int, l Load) error {
	name := named(l.Name, i)
	switch {
	case !finite(l.Force):
		return wrong("give the force in N", "load %s is %g\u202fN", name, l.Force)
	case l.To < l.From:
		return wrong("let from be less than to", "load %s runs backwards, from %g\u202fmm to %g\u202fmm", name, l.From, l.To)
	case !b.on(l.From) || !b.on(l.To):
		where := fmt.Sprintf("at %g\u202fmm", l.From)
		if l.To != l.From {
			where = fmt.Sprintf("from %g\u202fmm to %g\u202fmm", l.From, l.To)
		}
		return wrong("put the load between the beam's ends", "load %s %s is off the beam (%g\u202fmm to %g\u202fmm)", name, where, b.From, b.End())
	}
	return nil
}

func named(name string, i int) string {
	if name != "" {
		return name
	}
	return fmt.Sprintf("%d", i+1)
}
