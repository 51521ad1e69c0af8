package compare

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"gaugelog/analysis"
	"gaugelog/analysis/lsq"
	"gaugelog/config"
)

// Subject is one run.
type Subject struct {
	Run    string // its folder, as given
	Rig    *config.Rig
	Result *analysis.Result
}

// Error is what the runs do not allow, and what to do.
type Error struct{ What, Fix string }

// Error says what is wrong.
func (e *Error) Error() string { return e.What }

// Mend says what to do.
func (e *Error) Mend() string { return e.Fix }

// Comparison is several runs side by side. Lists are never nil.
type Comparison struct {
	Schema    string             `json:"schema"`
	Specimens []Specimen         `json:"specimens"`
	Figures   []Figure           `json:"figures"`
	Spans     *Spans             `json:"spans,omitempty"` // one specimen at several spans
	Warnings  []analysis.Warning `json:"warnings"`
}

// Schema is the name of the comparison's layout.
const Schema = "gaugelog.comparison/1"

// Specimen names one run's.
type Specimen struct {
	Run      string  `json:"run"`
	Specimen string  `json:"specimen"`
	Title    string  `json:"title,omitempty"`
	SpanMM   float64 `json:"span_mm"`
}

// Figure is one quantity over all runs.
type Figure struct {
	Name   string  `json:"name"` // modulus | apparent_modulus | shear_modulus | creep_coefficient
	Unit   string  `json:"unit"`
	AfterS float64 `json:"after_s,omitempty"` // of a creep coefficient
	// Values stand in the order of the specimens; nil where a run has none.
	Values      []*analysis.Q `json:"values"`
	Differences []Difference  `json:"differences"`
	Sample      *Sample       `json:"sample,omitempty"` // from two values on
}

// Difference is run B less run A.
type Difference struct {
	A     int        `json:"a"` // indices into the specimens
	B     int        `json:"b"`
	Value analysis.Q `json:"value"`
	// UIndependent is what u would be if nothing were shared; nil where u is.
	UIndependent *float64 `json:"u_independent,omitempty"`
	// Shared names the causes that are common to both.
	Shared []string `json:"shared"`
	// Beyond is true where the difference is more than twice its u.
	Beyond bool `json:"beyond_2u"`
}

// Sample is what several specimens are together.
type Sample struct {
	N      int     `json:"n"`
	Mean   float64 `json:"mean"`
	SD     float64 `json:"sd"` // of one specimen
	CV     float64 `json:"cv"` // SD over mean, a ratio; 0 where the mean is
	Least  float64 `json:"least"`
	Median float64 `json:"median"`
	Most   float64 `json:"most"`
	// Half is the half-width of the mean's 95 % interval by Student's t, as
	// far as the specimens' scatter knows it.
	Half float64 `json:"mean_half95"`
}

// Compare sets runs side by side. The same specimen at several spans makes
// Spans; whatever else stands in its way is a warning there, and an error of
// VariableSpan. It is an error to give fewer than two runs, or one twice.
func Compare(list []Subject) (*Comparison, error) {
	if len(list) < 2 {
		return nil, &Error{fmt.Sprintf("%d run is nothing to compare", len(list)), "give two run folders or more"}
	}
	c := &Comparison{Schema: Schema, Specimens: []Specimen{}, Figures: []Figure{}, Warnings: []analysis.Warning{}}
	for i, s := range list {
		for _, o := range list[:i] {
			if o.Run == s.Run {
				return nil, &Error{"run " + s.Run + " is given twice", "give each run once"}
			}
		}
		c.Specimens = append(c.Specimens, Specimen{s.Run, s.Rig.Specimen.Name, s.Result.Run.Title, spanOf(s.Rig)})
	}
	c.stiffness(list)
	c.creep(list)
	switch {
	case !sameSpecimen(list):
	case oneSpan(list):
		c.warn("one-specimen", "all runs are of one specimen at one span: their scatter is that of repeats, not of a sample")
	default:
		spans, err := VariableSpan(list)
		if err != nil {
			c.warn("no-variable-span", err.Error())
		}
		c.Spans = spans
		for i := range c.Figures {
			c.Figures[i].Sample = nil // one specimen is no sample
		}
	}
	return c, nil
}

func (c *Comparison) warn(code, text string) {
	c.Warnings = append(c.Warnings, analysis.Warning{Code: code, Text: text})
}

// sameSpecimen tells whether all runs are of one specimen.
func sameSpecimen(list []Subject) bool {
	return !slices.ContainsFunc(list, func(s Subject) bool { return s.Rig.Specimen.Name != list[0].Rig.Specimen.Name })
}

// oneSpan tells whether all spans are alike within 2 %.
func oneSpan(list []Subject) bool {
	first := spanOf(list[0].Rig)
	return !slices.ContainsFunc(list, func(s Subject) bool { return math.Abs(spanOf(s.Rig)-first) > 0.02*first })
}

// spanOf is the distance between the outermost supports, mm.
func spanOf(rig *config.Rig) float64 {
	lo, hi := math.Inf(1), math.Inf(-1)
	for _, s := range rig.Supports {
		lo, hi = math.Min(lo, s.At.Value), math.Max(hi, s.At.Value)
	}
	if len(rig.Supports) == 0 {
		return 0
	}
	return hi - lo
}

// stiffness compares the moduli; their causes are those of the modulus's
// budget, relative to it, for the apparent modulus too: both go with the same
// load, section and gain.
func (c *Comparison) stiffness(list []Subject) {
	for _, f := range []struct {
		name string
		of   func(*analysis.Stiffness) *analysis.Q
	}{
		{"modulus", func(s *analysis.Stiffness) *analysis.Q { return s.Modulus }},
		{"apparent_modulus", func(s *analysis.Stiffness) *analysis.Q { return s.ApparentModulus }},
		{"shear_modulus", func(s *analysis.Stiffness) *analysis.Q { return s.ShearModulus }},
	} {
		fig := Figure{Name: f.name, Unit: "MPa"}
		for _, s := range list {
			q := f.of(&s.Result.Stiffness)
			if f.name == "shear_modulus" && s.Result.Stiffness.ShearFrom != "test" {
				q = nil // a prior is no finding
			}
			fig.Values = append(fig.Values, q)
		}
		c.add(fig, list, f.name != "shear_modulus")
	}
}

// creep compares the creep coefficients at the times all runs state.
func (c *Comparison) creep(list []Subject) {
	for _, a := range list[0].Result.Creep.After {
		if a.Coefficient == nil || a.Coefficient.Value == 0 && a.Coefficient.U == nil {
			continue // the initial sag itself: 0 by its definition
		}
		fig := Figure{Name: "creep_coefficient", Unit: "1", AfterS: a.AfterS}
		for _, s := range list {
			var q *analysis.Q
			for _, o := range s.Result.Creep.After {
				if o.AfterS == a.AfterS {
					q = o.Coefficient
				}
			}
			fig.Values = append(fig.Values, q)
		}
		// Gain, loads and gravity drop out of a ratio of sags: nothing is shared.
		c.add(fig, list, false)
	}
}

// add puts in a figure that at least two runs have, with differences and
// statistics.
func (c *Comparison) add(fig Figure, list []Subject, shares bool) {
	fig.Differences = []Difference{}
	var have []int
	var values []float64
	for i, q := range fig.Values {
		if q != nil {
			have = append(have, i)
			values = append(values, q.Value)
		}
	}
	if len(have) < 2 {
		return
	}
	for i, q := range fig.Values {
		if q == nil {
			c.warn("figure-missing", fmt.Sprintf("run %s has no %s: it is left out there", list[i].Run, strings.ReplaceAll(fig.Name, "_", " ")))
		}
	}
	for k, a := range have {
		if k > 0 && len(have) > 6 {
			break // of many, each against the first
		}
		for _, b := range have[k+1:] {
			fig.Differences = append(fig.Differences, difference(fig, list, a, b, shares))
		}
	}
	fig.Sample = sampleOf(values)
	c.Figures = append(c.Figures, fig)
}

// difference is b less a: u^2 = u_a^2 + u_b^2 - 2 sum of c_a c_b over the
// shared causes, c = sensitivity times u (JCGM 100:2008, equation 13).
func difference(fig Figure, list []Subject, a, b int, shares bool) Difference {
	qa, qb := fig.Values[a], fig.Values[b]
	d := Difference{A: a, B: b, Value: analysis.Q{Value: qb.Value - qa.Value, Unit: fig.Unit}, Shared: []string{}}
	if qa.U == nil || qb.U == nil {
		return d
	}
	independent := math.Hypot(*qa.U, *qb.U)
	variance := independent * independent
	if shares {
		other := causesOf(list[b])
		for _, ca := range causesOf(list[a]) {
			i := slices.IndexFunc(other, func(cb cause) bool { return cb.key == ca.key })
			if i < 0 {
				continue
			}
			variance -= 2 * ca.relative * qa.Value * other[i].relative * qb.Value
			d.Shared = append(d.Shared, ca.name)
		}
	}
	if u := math.Sqrt(math.Max(variance, 0)); u > 0 {
		d.Value.U, d.UIndependent = &u, &independent
		d.Beyond = math.Abs(d.Value.Value) > 2*u
	}
	return d
}

func sampleOf(values []float64) *Sample {
	sorted := slices.Sorted(slices.Values(values))
	n := len(sorted)
	s := &Sample{N: n, Least: sorted[0], Most: sorted[n-1], Median: lsq.Median(sorted)}
	for _, v := range sorted {
		s.Mean += v / float64(n)
	}
	ss := 0.0
	for _, v := range sorted {
		ss += (v - s.Mean) * (v - s.Mean)
	}
	s.SD = math.Sqrt(ss / float64(n-1))
	if s.Mean != 0 {
		s.CV = s.SD / math.Abs(s.Mean)
	}
	s.Half = lsq.Coverage95(float64(n-1)) * s.SD / math.Sqrt(float64(n))
	return s
}
