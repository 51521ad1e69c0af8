// Package statics gives the sag of a statically determinate beam by the
// unit-load theorem: the moments and shears of the load and of a unit force at
// the place asked are written down in closed form and the products M m/EI and
// V v/S are integrated piece by piece with Simpson's rule, which is exact for
// them (they are of third degree at most between two places where something
// happens).
//
// It promises results exact to rounding for beams on two pinned supports, with
// any overhangs, and for cantilevers, under point loads and evenly spread
// loads, with yielding supports. It knows no matrices and no elements, so that
// it shares no mathematics with a general solver it is compared with. Units
// are mm and N.
package statics

import (
	"errors"
	"fmt"
	"math"
	"slices"
)

// Support holds the beam at a place.
type Support struct {
	At    float64 // mm
	Clamp bool
}

// Load is one newton at From (where From == To) or spread evenly over
// [From, To], positive down.
type Load struct{ From, To float64 }

// Layout is a beam that statics alone can solve: two pins, or one clamp.
type Layout struct{ supports []Support }

// ErrLayout says that the supports are none this package can solve.
var ErrLayout = errors.New("the simulator solves beams on two pinned supports and cantilevers only")

// New checks the supports. Two pins at different places or one clamp are
// taken; everything else is ErrLayout, wrapped with what was found.
func New(supports []Support) (*Layout, error) {
	s := slices.Clone(supports)
	switch {
	case len(s) == 1 && s[0].Clamp:
	case len(s) == 2 && !s[0].Clamp && !s[1].Clamp && s[0].At != s[1].At:
	default:
		clamps := 0
		for _, one := range s {
			if one.Clamp {
				clamps++
			}
		}
		return nil, fmt.Errorf("%d supports, %d of them clamps: %w", len(s), clamps, ErrLayout)
	}
	return &Layout{supports: s}, nil
}

// Reactions returns the upward force of each support, in N for one newton of
// load, in the order given to New.
func (l *Layout) Reactions(load Load) []float64 {
	if len(l.supports) == 1 {
		return []float64{1}
	}
	a, b := l.supports[0].At, l.supports[1].At
	right := ((load.From+load.To)/2 - a) / (b - a)
	return []float64{1 - right, right}
}

// Sag is the displacement at x (mm, down positive) for one newton of load:
// bending must be divided by EI (N mm2), shear by S (N).
func (l *Layout) Sag(x float64, load Load) (bending, shear float64) {
	unit := Load{From: x, To: x}
	cuts := []float64{load.From, load.To, x}
	for _, s := range l.supports {
		cuts = append(cuts, s.At)
	}
	slices.Sort(cuts)
	for i := 1; i < len(cuts); i++ {
		a, b := cuts[i-1], cuts[i]
		if b <= a {
			continue
		}
		m := (a + b) / 2
		bending += (b - a) / 6 * (l.moment(a, m, load)*l.moment(a, m, unit) +
			4*l.moment(m, m, load)*l.moment(m, m, unit) + l.moment(b, m, load)*l.moment(b, m, unit))
		shear += (b - a) / 6 * (l.shear(a, m, load)*l.shear(a, m, unit) +
			4*l.shear(m, m, load)*l.shear(m, m, unit) + l.shear(b, m, load)*l.shear(b, m, unit))
	}
	return bending, shear
}

// moment is the sagging moment at s (N mm per N). The piece that holds s is
// known by a place m inside it, so that ends of pieces are read from the
// inside.
func (l *Layout) moment(s, m float64, load Load) float64 {
	if len(l.supports) == 1 {
		return l.cantileverMoment(s, m, load)
	}
	sum := 0.0
	for i, r := range l.Reactions(load) {
		if at := l.supports[i].At; m > at {
			sum += r * (s - at)
		}
	}
	return sum - leftMoment(s, m, load)
}

// shear is the derivative of moment along the beam (N per N).
func (l *Layout) shear(s, m float64, load Load) float64 {
	if len(l.supports) == 1 {
		clamp := l.supports[0].At
		left := leftShare(s, m, load)
		if m < clamp {
			return -left
		}
		return 1 - left
	}
	sum := 0.0
	for i, r := range l.Reactions(load) {
		if m > l.supports[i].At {
			sum += r
		}
	}
	return sum - leftShare(s, m, load)
}

// cantileverMoment takes the free side of the section: left of the clamp what
// hangs left of it, right of the clamp what hangs right of it.
func (l *Layout) cantileverMoment(s, m float64, load Load) float64 {
	left := leftMoment(s, m, load)
	if m < l.supports[0].At {
		return -left
	}
	// The moment of the whole load about s, less the part on the left.
	return -((load.From+load.To)/2 - s) - left
}

// leftShare is the part of the load left of s.
func leftShare(s, m float64, load Load) float64 {
	switch {
	case m <= load.From:
		return 0
	case m >= load.To:
		return 1
	}
	return (s - load.From) / (load.To - load.From)
}

// leftMoment is the moment about s of the load's part left of s.
func leftMoment(s, m float64, load Load) float64 {
	switch {
	case m <= load.From:
		return 0
	case m >= load.To:
		return s - (load.From+load.To)/2
	}
	return (s - load.From) * (s - load.From) / (2 * (load.To - load.From))
}

// Follow is how much a place x moves when support i alone moves by one: the
// chord's shape, carried on straight over the overhangs.
func (l *Layout) Follow(x float64) []float64 {
	return l.Reactions(Load{From: x, To: x})
}

// Settle is the displacement at x (mm) for one newton of load that comes from
// supports giving by compliance (mm/N, one a support).
func (l *Layout) Settle(x float64, load Load, compliance []float64) float64 {
	sum := 0.0
	follow := l.Follow(x)
	for i, r := range l.Reactions(load) {
		sum += compliance[i] * r * follow[i]
	}
	return sum
}

// Span is the distance between the supports in mm; 0 for a cantilever.
func (l *Layout) Span() float64 {
	if len(l.supports) == 1 {
		return 0
	}
	return math.Abs(l.supports[1].At - l.supports[0].At)
}
