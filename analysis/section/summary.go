package section

import (
	"math"
	"slices"

	"gaugelog/analysis/stiffness"
	"gaugelog/config"
)

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
