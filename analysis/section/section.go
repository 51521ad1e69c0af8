// Package section is a session with a caliper: a cross-section's dimensions at
// several places, taken one after the other, questioned where one does not fit
// the others, and what their spread does to the modulus.
//
// It promises that no place is dropped or kept in silence: one that is far
// from the others is held until it is kept, taken back or measured anew. It
// knows no port and no terminal. Lengths are in mm.
package section

import (
	"fmt"
	"math"
	"strings"

	"gaugelog/config"
)

// Place is one measured place: the length in mm, and as it was shown or typed.
type Place struct {
	MM    float64
	Shown string
}

// Session takes the dimensions of one section. It is not safe for concurrent
// use.
type Session struct {
	base   config.Section
	names  []string
	now    int
	places map[string][]Place
	held   *Place
}

// dimensionsOf are what has to be measured, by shape.
var dimensionsOf = map[string][]string{
	"rectangle": {"width", "depth"}, "round": {"diameter"}, "tube": {"diameter", "wall"}, "box": {"width", "depth", "wall"},
}

// New begins a session for the rig file's section, whose shape and u count.
func New(base config.Section) (*Session, error) {
	names := dimensionsOf[base.Shape]
	if names == nil {
		return nil, fmt.Errorf("a section of shape %q has nothing to measure with a caliper: its second moment is stated", base.Shape)
	}
	return &Session{base: base, names: names, places: map[string][]Place{}}, nil
}

// Names are the dimensions of the shape, in the order in which they are taken.
func (s *Session) Names() []string { return s.names }

// Dimension is the one that is being measured.
func (s *Session) Dimension() string { return s.names[s.now] }

// Places are those taken of a dimension so far, without one that is held.
func (s *Session) Places(name string) []Place { return s.places[name] }

// Held is the place that was questioned and not yet answered for; nil if none.
func (s *Session) Held() *Place { return s.held }

// Next goes on to the next dimension; false where this was the last. It is an
// error while a place is held, or before one was taken.
func (s *Session) Next() (bool, error) {
	if err := s.ready(); err != nil {
		return false, err
	}
	if s.now == len(s.names)-1 {
		return false, nil
	}
	s.now++
	return true, nil
}

func (s *Session) ready() error {
	if s.held != nil {
		return fmt.Errorf("the %s of %s was questioned and not answered for", s.Dimension(), s.held.Shown)
	}
	if len(s.places[s.Dimension()]) == 0 {
		return fmt.Errorf("no %s was taken", s.Dimension())
	}
	return nil
}

// Done says whether every dimension has been taken; the error says what lacks.
func (s *Session) Done() error {
	if s.held != nil {
		return s.ready()
	}
	for _, n := range s.names {
		if len(s.places[n]) == 0 {
			return fmt.Errorf("no %s was taken", n)
		}
	}
	return nil
}

// Take takes one place. question is "" where it fits the others; else it is
// held, and Keep, Back or another Take answers: another one that agrees with
// the held one confirms that and stands for both, any other replaces it. An
// error says that it is no dimension.
func (s *Session) Take(p Place) (question string, err error) {
	if !(p.MM > 0) || math.IsInf(p.MM, 0) {
		return "", fmt.Errorf("%s is no %s: it must be more than 0 mm", p.Shown, s.Dimension())
	}
	if held := s.held; held != nil {
		s.held = nil
		if math.Abs(p.MM-held.MM) <= s.tolerance(held.MM, nil) {
			s.add(p)
			return "", nil
		}
	}
	if q := s.question(p); q != "" {
		s.held = &p
		return q, nil
	}
	s.add(p)
	return "", nil
}

func (s *Session) add(p Place) { s.places[s.Dimension()] = append(s.places[s.Dimension()], p) }

// Keep takes the held place as it is.
func (s *Session) Keep() error {
	if s.held == nil {
		return fmt.Errorf("there is nothing in question")
	}
	s.add(*s.held)
	s.held = nil
	return nil
}

// Back takes the last place back: the held one, else the last taken of this
// dimension, else of the one before (to which it returns). ok is false where
// nothing was taken.
func (s *Session) Back() (p Place, ok bool) {
	if s.held != nil {
		p, s.held = *s.held, nil
		return p, true
	}
	for len(s.places[s.Dimension()]) == 0 {
		if s.now == 0 {
			return p, false
		}
		s.now--
	}
	list := s.places[s.Dimension()]
	s.places[s.Dimension()] = list[:len(list)-1]
	return list[len(list)-1], true
}

// question compares a place with those before, or with the rig file's.
func (s *Session) question(p Place) string {
	var others []float64
	for _, o := range s.places[s.Dimension()] {
		others = append(others, o.MM)
	}
	if len(others) == 0 {
		before := s.stated(s.Dimension())
		if len(before) == 0 {
			return ""
		}
		m := median(before)
		if math.Abs(p.MM-m) <= 0.1*m {
			return ""
		}
		return fmt.Sprintf("%s %s is far from the %.2f\u202fmm in the rig file", s.Dimension(), p.Shown, m)
	}
	m := median(others)
	if math.Abs(p.MM-m) <= s.tolerance(m, others) {
		return ""
	}
	return fmt.Sprintf("%s %s is %+.2f\u202fmm from the middle of the others (%.2f\u202fmm)", s.Dimension(), p.Shown, p.MM-m, m)
}

// tolerance is how far a place may lie from the others' median: 2 % of it
// (more makes 6 % of the modulus by a depth alone), six times their scatter or
// five times the caliper's u, whichever is most.
func (s *Session) tolerance(m float64, others []float64) float64 {
	t := 0.02 * m
	if len(others) >= 3 {
		dev := make([]float64, len(others))
		for i, v := range others {
			dev[i] = math.Abs(v - m)
		}
		t = math.Max(t, 6*1.4826*median(dev))
	}
	if s.base.U != nil {
		t = math.Max(t, 5*s.base.U.Value)
	}
	return t
}

// stated are the places of a dimension in the rig file.
func (s *Session) stated(name string) (out []float64) {
	for _, l := range listOf(s.base, name) {
		out = append(out, l.Value)
	}
	return out
}

// Words lists the places of a dimension for the rig file.
func (s *Session) Words(name string) []string {
	var out []string
	for _, p := range s.places[name] {
		out = append(out, strings.TrimSpace(p.Shown))
	}
	return out
}
