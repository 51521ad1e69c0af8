package analysis

import (
	"math"

	"gaugelog/analysis/steps"
	"gaugelog/analysis/stiffness"
	"gaugelog/config"
)

// manyDOF are degrees of freedom that nobody needs to be told.
const manyDOF = 1e6

// expanded makes a Q with its freedom, coverage factor and U95.
func expanded(v *stiffness.Quantity, unit string) *Q {
	if v == nil || math.IsNaN(v.Value) {
		return nil
	}
	q := quantity(v.Value, v.U, unit)
	if q.U != nil && v.K > 0 {
		k, u95 := v.K, v.U95
		q.K, q.U95 = &k, &u95
		if v.DOF > 0 && v.DOF < manyDOF {
			dof := v.DOF
			q.DOF = &dof
		}
	}
	return &q
}

// emptyStiffness is the section of a run that fixes no stiffness.
func emptyStiffness(rig *config.Rig) Stiffness {
	return Stiffness{
		Supports: []SupportStiffness{}, StiffnessAt: []StiffnessAt{}, Budget: []BudgetLine{}, Residuals: []Residual{},
		Standards: []StandardModulus{}, BendingBudget: []BudgetLine{},
		InitialAfterS: rig.Read.InitialAfter.Value,
	}
}

// stiffnessOf renders an estimate.
func stiffnessOf(rig *config.Rig, e *stiffness.Estimate) Stiffness {
	s := emptyStiffness(rig)
	s.Modulus = expanded(e.Modulus, "MPa")
	s.ApparentModulus = expanded(e.ApparentModulus, "MPa")
	s.ShearModulus = expanded(e.ShearModulus, "MPa")
	s.Bending = expanded(&e.Bending, "N.mm2")
	s.Shear = expanded(e.Shear, "N")
	s.ShearFrom, s.ShearText = e.ShearFrom, e.ShearWords
	s.CorrelationBendingShear = e.CorrelationBendingShear
	for _, p := range e.Supports {
		s.Supports = append(s.Supports, SupportStiffness{Name: p.Name, Compliance: expanded(p.Compliance, "mm/N")})
	}
	for _, g := range e.StiffnessAt {
		s.StiffnessAt = append(s.StiffnessAt, StiffnessAt{
			Gauge: g.Gauge, Ratio: expanded(g.Ratio, "N/mm"),
			LocalModulus: expanded(g.Local, "MPa"), GlobalModulus: expanded(g.Global, "MPa"),
		})
	}
	for _, m := range e.Standards {
		s.Standards = append(s.Standards, StandardModulus{Standard: m.Standard, Gauge: m.Gauge, Includes: m.Includes, Modulus: *expanded(&m.Modulus, "MPa")})
	}
	s.Fit = &Fit{Chi2: e.Fit.Chi2, DOF: e.Fit.DOF, P: e.Fit.P, Birge: e.Fit.Birge, Condition: e.Fit.Condition, Unknowns: e.Unknowns, Correlation: e.Correlation}
	s.Budget, s.BendingBudget = budgetOf(e.Budget), budgetOf(e.BendingBudget)
	for _, r := range e.Residuals {
		s.Residuals = append(s.Residuals, Residual{Gauge: r.Gauge, Step: r.Step, MM: r.MM, U: r.U})
	}
	return s
}

func budgetOf(lines []stiffness.Line) []BudgetLine {
	out := []BudgetLine{}
	for _, l := range lines {
		b := BudgetLine{
			Input: l.Input, Type: l.Type, Distribution: l.Distribution, UInput: quantity(l.U, 0, l.Unit),
			Sensitivity: l.Sensitivity, Share: l.Share, Source: l.Source,
		}
		if l.DOF > 0 && l.DOF < manyDOF {
			b.DOF = &l.DOF
		}
		out = append(out, b)
	}
	return out
}

// curvePlaces is at how many places the fitted curve is drawn.
const curvePlaces = 121

// addCurves draws the fitted beam in every answered step and sets the step's
// greatest sag. The estimate's steps begin behind the baseline.
func addCurves(r *Result, rig *config.Rig, f *steps.Findings, e *stiffness.Estimate) {
	places := make([]float64, curvePlaces)
	for i := range places {
		places[i] = rig.Specimen.From.Value + rig.Specimen.Length.Value*float64(i)/float64(curvePlaces-1)
	}
	sums := make([]steps.Value, len(rig.Gauges))
	whole := make([]bool, len(rig.Gauges))
	for i := range whole {
		whole[i] = true
	}
	for i := f.Baseline + 1; i < len(f.Steps); i++ {
		step := f.Steps[i]
		addIncrements(step, sums, whole)
		if !step.LoadsKnown || step.Response == nil || !*step.Response || totalOf(step.Loads) <= totalOf(f.Steps[f.Baseline].Loads) {
			continue
		}
		k := i - f.Baseline - 1
		sags, err := e.Curve(k, places)
		if err != nil {
			r.Warnings = append(r.Warnings, Warning{Code: "no-curve", Text: "step " + step.Name + ": " + err.Error()})
			continue
		}
		c := ElasticCurve{Step: step.Name, AtMM: places, SagMM: sags, PointAtMM: []float64{}, PointMM: []float64{}, PointU: []float64{}}
		for g, v := range sums {
			if whole[g] && touches(rig.Gauges[g]) && len(rig.Gauges[g].Bar) == 0 {
				c.PointAtMM = append(c.PointAtMM, rig.Gauges[g].At.Value)
				c.PointMM, c.PointU = append(c.PointMM, v.MM), append(c.PointU, v.U)
			}
		}
		r.Series.Curve = append(r.Series.Curve, c)
		if peak, err := e.Largest(k); err == nil {
			r.Steps[i].Largest = largestOf(rig, r.Steps[i], peak, func(at []float64) ([]float64, error) { return e.Curve(k, at) })
		} else {
			r.Warnings = append(r.Warnings, Warning{Code: "no-greatest-sag", Text: "step " + step.Name + ": " + err.Error()})
		}
	}
}

// largestOf is the greatest total net sag: the fitted curve has the shape, and
// the gauges on the beam say by how much the older steps' creep has lifted all
// of it. Its uncertainty takes in the best gauge's own. Nil where no gauge can
// say, or the curve cannot be read there.
func largestOf(rig *config.Rig, s Step, peak *stiffness.Peak, curve func(places []float64) ([]float64, error)) *Largest {
	var sxy, sxx float64
	best := math.Inf(1)
	for i, g := range s.Gauges {
		if !touches(rig.Gauges[i]) || len(rig.Gauges[i].Bar) == 2 || g.Initial == nil || g.Initial.U == nil {
			continue
		}
		model, err := netCurve(rig, curve, g.AtMM)
		if err != nil || math.Abs(model) < 0.2*math.Abs(peak.Sag.Value) {
			continue
		}
		sxy += model * g.Initial.Value
		sxx += model * model
		best = min(best, *g.Initial.U)
	}
	if sxx == 0 {
		return nil
	}
	f := sxy / sxx
	sag := peak.Sag
	sag.Value, sag.U = f*sag.Value, math.Hypot(f*sag.U, best)
	sag.U95 = sag.K * sag.U
	return &Largest{At: *expanded(&peak.At, "mm"), Sag: *expanded(&sag, "mm")}
}

// netCurve is the fitted curve at a place less the straight line through it at
// two supports; on any other layout the curve itself.
func netCurve(rig *config.Rig, curve func([]float64) ([]float64, error), at float64) (float64, error) {
	if len(rig.Supports) != 2 || rig.Supports[0].At.Value == rig.Supports[1].At.Value {
		v, err := curve([]float64{at})
		if err != nil {
			return 0, err
		}
		return v[0], nil
	}
	a, b := rig.Supports[0].At.Value, rig.Supports[1].At.Value
	v, err := curve([]float64{at, a, b})
	if err != nil {
		return 0, err
	}
	return v[0] - ((b-at)*v[1]+(at-a)*v[2])/(b-a), nil
}

// addIncrements adds a step's gross increments; a gauge that misses one is no
// longer whole.
func addIncrements(s steps.Step, sums []steps.Value, whole []bool) {
	for g := range sums {
		if g >= len(s.Gauges) || s.Gauges[g].Gross.Increment == nil {
			whole[g] = false
			continue
		}
		v := s.Gauges[g].Gross.Increment
		sums[g] = steps.Value{MM: sums[g].MM + v.MM, U: math.Hypot(sums[g].U, v.U)}
	}
}
