package stiffness

import (
	"fmt"
	"math"
	"strings"

	"gaugelog/analysis/lsq"

	"gonum.org/v1/gonum/mat"
)

// Rules of thumb behind the cautions, all common practice.
const (
	frictionCoefficient = 0.3 // steel on wood, fixed knives
	stiffestPlunger     = 0.1 // N/mm, of plungers in general use
)

// cautions says what the figures leave out.
func (e *Estimate) cautions() {
	e.sectionCautions()
	e.inputCautions()
	e.supportCautions()
	e.shapeCautions()
	e.twist()
	e.doubtful()
	e.departures()
	if e.Fit.P < 0.01 && e.Fit.DOF > 0 {
		e.warn("poor-fit", "", "the beam model does not hold the readings within their uncertainties: chi2 %.1f at %d degrees of freedom (probability %.2g); look at the residuals by gauge and step", e.Fit.Chi2, e.Fit.DOF, e.Fit.P)
		if hint := e.fit.wiring(); hint != "" {
			e.warn("wiring", "", "%s", hint)
		}
	}
	if e.Fit.Birge > 1 {
		e.warn("widened", "", "the readings' own uncertainty was widened by %.2f, the fit's scatter", e.Fit.Birge)
	}
	if e.ShearFrom != "test" {
		e.warn("shear-not-told", "", "shear stiffness %s", e.ShearWords)
	}
}

// A modulus beyond these (MPa) is no material's: from soft foam to diamond,
// with room.
const (
	leastModulus    = 1e-3
	greatestModulus = 2e6
)

// widest is the relative standard uncertainty up to which a figure that goes
// with a third power is worth propagating by its slope.
const widest = 0.2

// doubtful tells of a modulus that can only come of a slip, or that is hardly
// known.
func (e *Estimate) doubtful() {
	if v := e.Modulus.Value; v < leastModulus || v > greatestModulus {
		e.warn("modulus-implausible", "", "a modulus of %.3g\u202fMPa is no material's: check the units of width, depth, span and loads", v)
	}
	if u := e.Modulus.U / e.Modulus.Value; u > widest && len(e.Budget) > 0 {
		e.warn("too-uncertain", "", "the modulus is uncertain by %.0f %% (standard), %.0f %% of its variance from %s: so wide an interval is not to be used; correct or measure that better", 100*u, 100*e.Budget[0].Share, e.Budget[0].Input)
	}
}

func (e *Estimate) sectionCautions() {
	if e.Section.Taper > 0.01 {
		e.warn("taper", "", "the %s varies by %.1f %% of its mean between the measured places; the modulus goes with its third power where it is the depth", e.Section.TaperOf, 100*e.Section.Taper)
	}
	if !e.Section.stated {
		e.warn("section-without-uncertainty", "", "no uncertainty of the section is stated: the modulus's leaves it out (the bending stiffness EI does not need it)")
	}
}

func (e *Estimate) inputCautions() {
	in, rig := e.fit.in, e.fit.m.rig
	if rig.Gravity.Value == nil && rig.Gravity.Latitude == nil && e.fit.m.weighed() {
		e.warn("gravity-unplaced", "", "neither gravity nor latitude is stated: standard gravity was taken, with %.2f %% for the range over the globe", 100*e.Gravity.U/e.Gravity.Value)
	}
	rel := relativeWeights(in)
	var bare []string
	for i, l := range rig.Loads {
		if e.fit.m.hangs(i) && rel[l.Name] == 0 {
			bare = append(bare, l.Name)
		}
	}
	if len(bare) > 0 {
		e.warn("loads-without-uncertainty", "", "no uncertainty is stated for the weight of %s: the figures leave it out", strings.Join(bare, ", "))
	}
	var free []string
	for g, gauge := range rig.Gauges {
		if e.fit.m.reads(g) && sees(gauge) == "beam" && (gauge.Contact == nil || gauge.Contact.Stiffness == nil) {
			free = append(free, gauge.Name)
		}
	}
	if len(free) == 0 {
		return
	}
	if bound := stiffestPlunger * e.flexibility(); bound > 0.001 {
		e.warn("plunger-unknown", "", "the plunger stiffness of %s is not stated: at %g\u202fN/mm each would carry up to %.1f %% of a load beside it, and the stiffness would seem as much too high", strings.Join(free, ", "), stiffestPlunger, 100*bound)
	}
}

// flexibility is the sag at mid-span (or a cantilever's tip) per newton there.
func (e *Estimate) flexibility() float64 {
	l := span(e.fit.m.rig)
	if len(e.fit.m.rig.Supports) == 1 {
		return l * l * l / (3 * e.Bending.Value)
	}
	return l * l * l / (48 * e.Bending.Value)
}

func (e *Estimate) supportCautions() {
	m := e.fit.m
	var blind []string
	for s, sup := range m.rig.Supports {
		if !m.fitted(s) && sup.Compliance == nil {
			blind = append(blind, sup.Name)
		}
	}
	switch {
	case len(blind) == 0:
	case len(blind) == len(m.rig.Supports):
		e.warn("supports-unmeasured", "", "no gauge watches a support and no compliance is stated: sags are not corrected for yielding supports, and the modulus's uncertainty allows for up to %g\u202fmm/N each; a gauge over each support, or its stated compliance, would tell", softestSupport)
	default:
		e.warn("half-corrected", "", "support %s has no gauge and no stated compliance: sags are corrected for the other supports only, and at mid-span half of this one's yielding is left in; the modulus's uncertainty allows for up to %g\u202fmm/N of it", strings.Join(blind, ", "), softestSupport)
	}
	if b := 1.5 * frictionCoefficient * m.sec.Depth / span(m.rig); len(m.rig.Supports) >= 2 && b >= 0.001 {
		e.warn("friction-bound", "", "fixed supports with a friction of %g would hide up to %.1f %% of the sag; rollers or a loading and unloading loop would tell", frictionCoefficient, 100*b)
	}
}

// shapeCautions looks for sags too large for small-deflection theory.
func (e *Estimate) shapeCautions() {
	worst, name := 0.0, ""
	l := span(e.fit.m.rig)
	for k, s := range e.fit.in.Steps {
		line, err := e.fit.line(e.fit.theta, e.fit.best, k, false)
		if err != nil {
			continue
		}
		b := e.fit.m.rig.Specimen
		if v := line.Greatest(b.From.Value, b.From.Value+b.Length.Value).Value; v > worst {
			worst, name = v, s.Name
		}
	}
	if worst > l/50 {
		text := "not corrected, because it hangs on how the supports let the beam slide"
		if worst > l/20 {
			text = "beyond 1/20 of the span the modulus is not to be used: load less, or take a shorter span"
		}
		e.warn("large-deflection", "", "the sag of step %s is 1/%.0f of the span: under a centre load on fixed knives it would be %.2f %% greater than straight-beam theory has it, and the modulus up to as much too low; %s",
			name, l/worst, 100*LargeDeflection(worst/l), text)
	}
}

// LargeDeflection is by how much (as a share) the sag of a beam on two fixed
// knives under a centre load exceeds straight-beam theory's, for a sag of
// ratio times the span: 108/35 ratio^2.
func LargeDeflection(ratio float64) float64 { return 108.0 / 35 * ratio * ratio }

// wiring looks for the one swap of two gauges, or the one reversed sense, that
// makes a poor fit good, and says it. The comparison takes 1 % of each
// reading beside its own error, so that small misfits do not decide.
func (f *fitted) wiring() string {
	y, _, err := f.m.evaluate(f.st, f.theta)
	if err != nil {
		return ""
	}
	base, _ := f.altered(y, func(r int) float64 { return f.m.rows[r].mm })
	best, hint, second := base/10, "", math.Inf(1)
	try := func(text string, mm func(r int) float64) {
		chi2, ok := f.altered(y, mm)
		if ok && chi2 < best {
			second, best, hint = best, chi2, text
		} else if ok {
			second = math.Min(second, chi2)
		}
	}
	gauges := f.m.rig.Gauges
	for i := range gauges {
		if !f.m.reads(i) {
			continue
		}
		try(fmt.Sprintf("the readings fit if the sense of gauge %s is reversed: check its sense in the rig file", gauges[i].Name), func(r int) float64 {
			if f.m.rows[r].gauge == i {
				return -f.m.rows[r].mm
			}
			return f.m.rows[r].mm
		})
		for j := range i {
			if f.m.reads(j) {
				try(fmt.Sprintf("the readings fit if gauges %s and %s are swapped: check their ports or places", gauges[j].Name, gauges[i].Name), f.swapped(i, j))
			}
		}
	}
	if hint == "" || !(lsq.Chi2P(best, f.sol.DOF) > 0.001) || best > second/2 {
		return ""
	}
	return hint
}

func (f *fitted) swapped(i, j int) func(r int) float64 {
	other := map[[2]int]float64{}
	for _, o := range f.m.rows {
		other[[2]int{o.gauge, o.step}] = o.mm
	}
	return func(r int) float64 {
		o := f.m.rows[r]
		g := o.gauge
		switch g {
		case i:
			g = j
		case j:
			g = i
		}
		if v, ok := other[[2]int{g, o.step}]; ok {
			return v
		}
		return o.mm
	}
}

// altered is the chi2 of other readings on the same design.
func (f *fitted) altered(y []float64, mm func(r int) float64) (chi2 float64, ok bool) {
	res := make([]float64, len(y))
	v := mat.NewSymDense(len(y), nil)
	v.CopySym(f.read)
	for r := range y {
		res[r] = mm(r) - y[r]
		for j, t := range f.theta {
			res[r] += f.x.At(r, j) * t
		}
		v.SetSym(r, r, v.At(r, r)+1e-4*mm(r)*mm(r))
	}
	s, err := lsq.Solve(lsq.Problem{Design: f.x, Y: res, Covariance: v, Priors: f.priors()})
	if err != nil {
		return math.Inf(1), false
	}
	return s.Chi2, s.X[0] > 0
}
