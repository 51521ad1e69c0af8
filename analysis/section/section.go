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
	"slices"
	"strings"

	"gaugelog/analysis/stiffness"
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
		return fmt.Sprintf("%s %s is far from the %.2f mm in the rig file", s.Dimension(), p.Shown, m)
	}
	m := median(others)
	if math.Abs(p.MM-m) <= s.tolerance(m, others) {
		return ""
	}
	return fmt.Sprintf("%s %s is %+.2f mm from the middle of the others (%.2f mm)", s.Dimension(), p.Shown, p.MM-m, m)
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

// Section is the rig file's section with the places taken in it.
func (s *Session) Section() config.Section {
	c := s.base
	for name, list := range s.places {
		var out []config.Length
		for _, p := range list {
			out = append(out, config.Length{Quantity: config.Quantity{Value: p.MM, Shown: p.Shown}})
		}
		set(&c, name, out)
	}
	return c
}

func listOf(c config.Section, name string) []config.Length {
	return map[string][]config.Length{"width": c.Width, "depth": c.Depth, "diameter": c.Diameter, "wall": c.Wall}[name]
}

func set(c *config.Section, name string, list []config.Length) {
	switch name {
	case "width":
		c.Width = list
	case "depth":
		c.Depth = list
	case "diameter":
		c.Diameter = list
	case "wall":
		c.Wall = list
	}
}

// Summary is what one dimension's places come to.
type Summary struct {
	Name  string  `json:"name"`
	N     int     `json:"n"`
	Mean  float64 `json:"mean_mm"`
	Least float64 `json:"least_mm"`
	Most  float64 `json:"most_mm"`
	// AtLeast and AtMost are by how much the modulus would change if the beam
	// had the least, the greatest value everywhere, as a share of it.
	AtLeast float64 `json:"modulus_at_least"`
	AtMost  float64 `json:"modulus_at_most"`
	// URelative is the modulus's relative standard uncertainty from this
	// dimension alone: the caliper's u and the scatter over sqrt(n); 0 where
	// neither is known.
	URelative float64 `json:"u_modulus_relative"`
}

// Result is a finished session.
type Result struct {
	Dimensions []Summary `json:"dimensions"`
	// SecondMoment in mm4 and its standard uncertainty, 0 where unknown.
	SecondMoment float64 `json:"second_moment_mm4"`
	USecond      float64 `json:"u_second_moment_mm4"`
	// URelative is the modulus's relative standard uncertainty from the
	// section: the modulus goes with 1/I.
	URelative float64 `json:"u_modulus_relative"`
	// Taper is the greatest range over mean, and TaperOf its dimension.
	Taper   float64 `json:"taper"`
	TaperOf string  `json:"taper_of,omitempty"`
}

// Finish works out what the places come to. The error says what lacks.
func (s *Session) Finish() (*Result, error) {
	if err := s.Done(); err != nil {
		return nil, err
	}
	c := s.Section()
	sec, err := stiffness.SectionOf(c)
	if err != nil {
		return nil, err
	}
	r := &Result{SecondMoment: sec.SecondMoment.Value, USecond: sec.SecondMoment.U, Taper: sec.Taper, TaperOf: sec.TaperOf}
	r.URelative = r.USecond / r.SecondMoment
	for _, name := range s.names {
		var mm []float64
		for _, p := range s.places[name] {
			mm = append(mm, p.MM)
		}
		sum := Summary{Name: name, N: len(mm), Mean: mean(mm), Least: slices.Min(mm), Most: slices.Max(mm)}
		if sum.AtLeast, err = change(c, name, sum.Least, r.SecondMoment); err != nil {
			return nil, err
		}
		if sum.AtMost, err = change(c, name, sum.Most, r.SecondMoment); err != nil {
			return nil, err
		}
		if sum.URelative, err = onlyU(c, name); err != nil {
			return nil, err
		}
		r.Dimensions = append(r.Dimensions, sum)
	}
	return r, nil
}

// change is the modulus with one dimension at mm over the modulus as it is,
// less one.
func change(c config.Section, name string, mm, second float64) (float64, error) {
	set(&c, name, []config.Length{{Quantity: config.Quantity{Value: mm}}})
	sec, err := stiffness.SectionOf(c)
	if err != nil {
		return 0, err
	}
	return second/sec.SecondMoment.Value - 1, nil
}

// onlyU is the relative u of I from one dimension, by its own sensitivity: the
// change of I over a step of that dimension's u.
func onlyU(c config.Section, name string) (float64, error) {
	list := listOf(c, name)
	mm, u2 := make([]float64, len(list)), 0.0
	for i, l := range list {
		mm[i] = l.Value
	}
	m := mean(mm)
	if c.U != nil {
		u2 = c.U.Value * c.U.Value
	}
	if n := float64(len(mm)); n > 1 {
		for _, v := range mm {
			u2 += (v - m) * (v - m) / (n - 1) / n
		}
	}
	u := math.Sqrt(u2)
	if u == 0 {
		return 0, nil
	}
	at := func(v float64) (float64, error) {
		d := c
		set(&d, name, []config.Length{{Quantity: config.Quantity{Value: v}}})
		sec, err := stiffness.SectionOf(d)
		if err != nil {
			return 0, err
		}
		return sec.SecondMoment.Value, nil
	}
	up, err := at(m + u)
	if err != nil {
		return 0, err
	}
	down, err := at(m - u)
	if err != nil {
		return 0, err
	}
	mid, err := at(m)
	if err != nil {
		return 0, err
	}
	return math.Abs(up-down) / 2 / mid, nil
}

// Words lists the places of a dimension for the rig file.
func (s *Session) Words(name string) []string {
	var out []string
	for _, p := range s.places[name] {
		out = append(out, strings.TrimSpace(p.Shown))
	}
	return out
}

func mean(v []float64) float64 {
	sum := 0.0
	for _, x := range v {
		sum += x
	}
	return sum / float64(len(v))
}

func median(v []float64) float64 {
	sorted := slices.Sorted(slices.Values(v))
	n := len(sorted)
	return (sorted[(n-1)/2] + sorted[n/2]) / 2
}
