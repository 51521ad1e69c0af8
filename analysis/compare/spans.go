package compare

import (
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"

	"gaugelog/analysis"
	"gaugelog/analysis/lsq"
	"gaugelog/analysis/stiffness"
	"gaugelog/config"
)

// Spans is one specimen bent at several spans under a load in the middle. Its
// apparent moduli lie on a line over (h/L)^2: 1/E_app = 1/E + (h/L)^2 /
// (kappa G), h^2 standing for 12 I/A (the variable-span method of EN 408 and
// ASTM D198; Timoshenko's beam).
type Spans struct {
	Modulus      analysis.Q `json:"modulus"`       // MPa, free of shear
	ShearModulus analysis.Q `json:"shear_modulus"` // MPa
	// Correlation of the two.
	Correlation float64 `json:"correlation"`
	ShearFactor float64 `json:"shear_factor"` // kappa
	Chi2        float64 `json:"chi2"`
	DOF         int     `json:"dof"`
	P           float64 `json:"p"`
	// Common is the relative standard uncertainty that all spans share (load,
	// gain) and the moduli carry beside the scatter about the line.
	Common float64     `json:"common_u_relative"`
	Points []SpanPoint `json:"points"`
	// Intercept and Slope draw the line, 1/MPa.
	Intercept float64 `json:"intercept"`
	Slope     float64 `json:"slope"`
}

// SpanPoint is one span's point of the plot: X = (h/L)^2, Y = 1/E_app in
// 1/MPa, U its own standard uncertainty (what all spans share left out),
// Fitted the line's value.
type SpanPoint struct {
	Run    string  `json:"run"`
	SpanMM float64 `json:"span_mm"`
	X      float64 `json:"x"`
	Y      float64 `json:"y"`
	U      float64 `json:"u"`
	Fitted float64 `json:"fitted"`
}

// middle is how far a load or gauge may stand off mid-span, as a share of the
// span, to count as there: it changes the sag by less than 0.1 %.
const middle = 0.01

// VariableSpan fits modulus and shear modulus to runs of one specimen. The
// error says which run does not fit the method, and its mend.
func VariableSpan(list []Subject) (*Spans, error) {
	if !sameSpecimen(list) {
		return nil, &Error{"the runs are of different specimens: " + list[0].Rig.Specimen.Name + " and others", "give runs of one specimen at several spans"}
	}
	sec, err := oneSection(list)
	if err != nil {
		return nil, err
	}
	s := &Spans{ShearFactor: sec.ShearFactor}
	h2 := 12 * sec.SecondMoment.Value / sec.Area.Value
	shared := sharedByAll(list)
	var spans []float64
	for _, r := range list {
		e, err := suited(r)
		if err != nil {
			return nil, err
		}
		l := spanOf(r.Rig)
		if !slices.ContainsFunc(spans, func(o float64) bool { return math.Abs(o-l) < 0.02*l }) {
			spans = append(spans, l)
		}
		y := 1 / e.Value
		own := math.Pow(*e.U/e.Value, 2) - math.Pow(shared.section, 2) - math.Pow(shared.rest, 2)
		// Rounding, or a modulus whose budget differs from the apparent one's,
		// must not leave nothing: a tenth of the whole is its own at least.
		own = math.Sqrt(math.Max(own, math.Pow(*e.U/e.Value/10, 2)))
		s.Points = append(s.Points, SpanPoint{Run: r.Run, SpanMM: l, X: h2 / (l * l), Y: y, U: own * y})
	}
	if len(spans) < 2 {
		return nil, &Error{fmt.Sprintf("all runs have a span of %g\u202fmm: bending and shear cannot be told apart", spans[0]), "test the specimen at a shorter span too, of 5 to 10 times its depth"}
	}
	if err := s.fit(sec, shared); err != nil {
		return nil, err
	}
	return s, nil
}

// oneSection is the section all runs agree on.
func oneSection(list []Subject) (*stiffness.Section, error) {
	first := list[0].Rig.Specimen.Section
	for _, r := range list[1:] {
		if sectionWords(r.Rig.Specimen.Section) != sectionWords(first) {
			return nil, &Error{"runs " + list[0].Run + " and " + r.Run + " state different sections of one specimen", "amend the section of one of them; a specimen has one"}
		}
	}
	sec, err := stiffness.SectionOf(first)
	if err != nil {
		return nil, err
	}
	if !(sec.Area.Value > 0) || !(sec.ShearFactor > 0) {
		return nil, &Error{"the section states no area, so its shear stiffness says nothing of G", "add area: and shear_factor: to the section"}
	}
	return sec, nil
}

// suited is the apparent modulus of a run that the method can use.
func suited(r Subject) (*analysis.Q, error) {
	rig := r.Rig
	if len(rig.Supports) != 2 || slices.ContainsFunc(rig.Supports, func(s config.Support) bool { return s.Kind == "clamp" }) {
		return nil, &Error{"run " + r.Run + " does not lie on two plain supports", "the variable-span method needs two pins; leave this run out"}
	}
	l := spanOf(rig)
	mid := (rig.Supports[0].At.Value + rig.Supports[1].At.Value) / 2
	for _, load := range rig.Loads {
		if load.At == nil || math.Abs(load.At.Value-mid) > middle*l {
			return nil, &Error{"run " + r.Run + ": load " + load.Name + " does not hang in the middle of the span", "the variable-span method needs one load at mid-span; leave this run out"}
		}
	}
	gauge := rig.Read.CreepGauge
	for _, g := range rig.Gauges {
		if g.Name == gauge && math.Abs(g.At.Value-mid) > middle*l {
			return nil, &Error{"run " + r.Run + ": gauge " + gauge + " does not stand in the middle of the span", "name the gauge at mid-span as read.creep_gauge"}
		}
	}
	e := r.Result.Stiffness.ApparentModulus
	if e == nil || !(e.Value > 0) {
		return nil, &Error{"run " + r.Run + " has no apparent modulus", "see `gaugelog analyse " + r.Run + "` for the reason"}
	}
	if e.U == nil {
		return nil, &Error{"run " + r.Run + ": the apparent modulus has no uncertainty, so the spans cannot be weighed", "state u of the section and of the gauges in the rig file"}
	}
	return e, nil
}

// common are relative standard uncertainties that all runs share.
type common struct{ section, rest float64 }

// sharedByAll sums the causes found in every run: those of the section, and
// the rest (load, gravity, gain), which scale all apparent moduli alike.
func sharedByAll(list []Subject) (c common) {
	for _, k := range causesOf(list[0]) {
		in := 0
		least := math.Abs(k.relative)
		for _, r := range list {
			causes := causesOf(r)
			if i := slices.IndexFunc(causes, func(o cause) bool { return o.key == k.key }); i >= 0 {
				in++
				least = math.Min(least, math.Abs(causes[i].relative))
			}
		}
		switch {
		case in < len(list):
		case ofSection(k.name):
			c.section = math.Hypot(c.section, least)
		default:
			c.rest = math.Hypot(c.rest, least)
		}
	}
	return c
}

// fit draws the line and turns it into the moduli. The section's error goes
// with I in the modulus and with A in the shear modulus.
func (s *Spans) fit(sec *stiffness.Section, shared common) error {
	design := mat.NewDense(len(s.Points), 2, nil)
	var y, u []float64
	for i, p := range s.Points {
		design.SetRow(i, []float64{1, p.X})
		y, u = append(y, p.Y), append(u, p.U)
	}
	sol, err := lsq.Solve(lsq.Problem{Design: design, Y: y, U: u, Names: []string{"bending", "shear"}})
	if err != nil {
		return &Error{"the spans do not tell bending from shear: " + err.Error(), "test at spans that differ by a factor of two or more"}
	}
	for i := range s.Points {
		s.Points[i].Fitted = sol.Fitted[i]
	}
	s.Intercept, s.Slope, s.Chi2, s.DOF, s.P = sol.X[0], sol.X[1], sol.Chi2, sol.DOF, lsq.Chi2P(sol.Chi2, sol.DOF)
	s.Common = shared.rest
	if !(s.Intercept > 0) || !(s.Slope > 0) {
		return &Error{fmt.Sprintf("the line over (h/L)^2 has the intercept %.3g\u202f1/MPa and the slope %.3g\u202f1/MPa; both must be more than 0 to be moduli", s.Intercept, s.Slope),
			"look at supports and seats at the short spans, where small movements count most, or add shorter spans"}
	}
	e, g := 1/s.Intercept, 1/(s.ShearFactor*s.Slope)
	relI, relA := 0.0, sec.Area.U/sec.Area.Value
	if shared.section > 0 {
		relI = sec.SecondMoment.U / sec.SecondMoment.Value
	}
	ue := e * math.Sqrt(math.Pow(sol.U(0)*e, 2)+relI*relI+shared.rest*shared.rest)
	ug := g * math.Sqrt(math.Pow(sol.U(1)/s.Slope, 2)+relA*relA+shared.rest*shared.rest)
	s.Modulus = analysis.Q{Value: e, U: &ue, Unit: "MPa"}
	s.ShearModulus = analysis.Q{Value: g, U: &ug, Unit: "MPa"}
	// The section's part of it is left out: I and A share their dimensions only in part.
	r := (sol.Covariance.At(0, 1)/(s.Intercept*s.Slope) + shared.rest*shared.rest) * e * g / (ue * ug)
	s.Correlation = math.Max(-1, math.Min(1, r))
	return nil
}
