package stiffness

import (
	"fmt"
	"math"

	"gaugelog/analysis/lsq"
	"gaugelog/config"
)

// Estimate is what the loading says of the beam. All figures belong to the
// initial-sag time: they contain the creep up to it.
type Estimate struct {
	InitialAfterS float64
	// Modulus is E = EI/I in MPa, shear taken apart. Never nil in an Estimate
	// that came without an error.
	Modulus *Quantity
	// ApparentModulus, MPa, is what bending alone would need to explain the
	// creep gauge's net sag, plungers as they are: it includes shear. Nil
	// where that gauge was not read.
	ApparentModulus *Quantity
	ApparentGauge   string
	Bending         Quantity  // EI, N.mm2
	Shear           *Quantity // S = kappa G A, N; nil where it was left out
	ShearModulus    *Quantity // G, MPa; nil where S is or the area is unknown
	ShearFrom       string    // "test" | "prior" | "none"
	ShearWords      string    // how it came about, in words
	// CorrelationBendingShear is that of alpha and gamma in the free fit; nil
	// where the readings cannot even be fitted that way.
	CorrelationBendingShear *float64
	Supports                []SupportEstimate
	// Unknowns names the fit's unknowns; Correlation is theirs, row by row.
	Unknowns    []string
	Correlation [][]float64
	StiffnessAt []GaugeStiffness
	Standards   []StandardModulus
	Fit         Fit
	Residuals   []Residual
	// Budget is the modulus's, greatest share first; BendingBudget EI's.
	Budget        []Line
	BendingBudget []Line
	Section       *Section
	Gravity       Value // m/s2
	Warnings      []Warning

	fit *fitted
}

// SupportEstimate is one support's yielding.
type SupportEstimate struct {
	Name       string
	Compliance *Quantity // mm/N; nil where neither measured nor stated
	Measured   bool      // a gauge showed it
}

// Fit says how well the model holds the readings.
type Fit struct {
	Chi2      float64
	DOF       int
	P         float64 // probability of a greater chi2
	Birge     float64 // factor on the readings' own uncertainty; 1 where none was needed or freedom is below 5
	Condition float64 // of the whitened design, columns scaled
}

// Residual is reading minus model, mm; U the increment's standard
// uncertainty, shared causes included.
type Residual struct {
	Gauge, Step string
	MM, U       float64
}

// Warning is something the reader of the figures must know.
type Warning struct{ Code, Gauge, Text string }

// Compute fits the beam to all gauges and steps. Errors say what the test
// cannot give and what would mend it: no readings, fewer readings than
// unknowns, a layout that does not stand, a section without dimensions.
func Compute(in Input) (*Estimate, error) {
	m, err := prepare(&in)
	if err != nil {
		return nil, err
	}
	c, err := chooseShear(&in, m)
	if err != nil {
		return nil, err
	}
	e := &Estimate{InitialAfterS: in.InitialAfterS, Section: m.sec, Gravity: c.f.gravity, ShearFrom: c.from, ShearWords: c.words, CorrelationBendingShear: c.corr}
	if c.apart != "" {
		e.warn("shear-not-as-expected", "", "%s", c.apart)
	}
	e.fit = e.tryRigid(c.f)
	e.figures()
	e.supports()
	e.gauges()
	e.cautions()
	return e, nil
}

// tryRigid lets supports move as they like in each step where yielding in
// proportion to the load does not hold the readings and free movement does.
func (e *Estimate) tryRigid(f *fitted) *fitted {
	if f.sol.DOF < 1 || !f.m.determinate || len(f.m.yields) == 0 || lsq.Chi2P(f.sol.Chi2, f.sol.DOF) >= 0.01 {
		return f
	}
	free := *f.m
	free.rigid = true
	g, err := newFit(f.in, &free)
	if err != nil || g.sol.DOF < 1 || lsq.Chi2P(g.sol.Chi2, g.sol.DOF) < 0.05 {
		return f
	}
	e.warn("support-not-elastic", "", "the supports did not go down in proportion to their load (chi2 %.1f at %d degrees of freedom); their movement was taken as measured, step by step, and no compliance is given", f.sol.Chi2, f.sol.DOF)
	return g
}

func (e *Estimate) warn(code, gauge, format string, args ...any) {
	e.Warnings = append(e.Warnings, Warning{code, gauge, fmt.Sprintf(format, args...)})
}

func (e *Estimate) figures() {
	f := e.fit
	m := f.m
	modulus, budget := f.propagate(func(t []float64, st *state) float64 {
		i, _, _ := m.sec.shape(st.dims)
		return 1 / (t[0] * i)
	})
	e.Modulus, e.Budget = &modulus, ranked(budget)
	var lines []Line
	e.Bending, lines = f.propagate(func(t []float64, _ *state) float64 { return 1 / t[0] })
	e.BendingBudget = ranked(lines)
	if m.mode != shearNone {
		s, _ := f.propagate(func(t []float64, st *state) float64 {
			_, gamma, _ := m.parts(st, t)
			return 1 / gamma
		})
		e.Shear = &s
		if m.sec.Area.Value > 0 {
			g, _ := f.propagate(func(t []float64, st *state) float64 {
				_, gamma, _ := m.parts(st, t)
				_, a, kappa := m.sec.shape(st.dims)
				return 1 / (gamma * kappa * a)
			})
			e.ShearModulus = &g
		}
	}
	e.Fit = Fit{Chi2: f.sol.Chi2, DOF: f.sol.DOF, P: lsq.Chi2P(f.sol.Chi2, f.sol.DOF), Birge: f.birge, Condition: f.sol.Condition}
	e.Unknowns = m.names()
	for i := range f.theta {
		row := make([]float64, len(f.theta))
		for j := range f.theta {
			row[j] = f.sol.Correlation(i, j)
		}
		e.Correlation = append(e.Correlation, row)
	}
	y, _, err := m.evaluate(f.best, f.theta)
	for r, o := range m.rows {
		if err == nil {
			e.Residuals = append(e.Residuals, Residual{Gauge: m.rig.Gauges[o.gauge].Name, Step: f.in.Steps[o.step].Name, MM: o.mm - y[r], U: math.Sqrt(f.cov.At(r, r))})
		}
	}
}

func (e *Estimate) supports() {
	f := e.fit
	for s, sup := range f.m.rig.Supports {
		est := SupportEstimate{Name: sup.Name, Measured: f.m.fitted(s)}
		switch {
		case est.Measured && !f.m.rigid:
			q, _ := f.propagate(func(t []float64, st *state) float64 {
				_, _, c := f.m.parts(st, t)
				return c[s]
			})
			est.Compliance = &q
		case !est.Measured && sup.Compliance != nil:
			est.Compliance = &Quantity{Value: sup.Compliance.Value, U: sup.Compliance.U, K: lsq.Coverage95(math.Inf(1)), U95: lsq.Coverage95(math.Inf(1)) * sup.Compliance.U}
		}
		e.Supports = append(e.Supports, est)
	}
}

// ranked sorts a budget by share, greatest first, keeping the order of equals.
func ranked(lines []Line) []Line {
	out := append([]Line(nil), lines...)
	for i := 1; i < len(out); i++ {
		for j := i; j > 0 && out[j].Share > out[j-1].Share; j-- {
			out[j], out[j-1] = out[j-1], out[j]
		}
	}
	return out
}

// span is the distance between the outermost supports, or from a clamp to the
// beam's far end.
func span(rig *config.Rig) float64 {
	if len(rig.Supports) == 1 {
		at := rig.Supports[0].At.Value - rig.Specimen.From.Value
		return math.Max(at, rig.Specimen.Length.Value-at)
	}
	lo, hi := math.Inf(1), math.Inf(-1)
	for _, s := range rig.Supports {
		lo, hi = math.Min(lo, s.At.Value), math.Max(hi, s.At.Value)
	}
	return hi - lo
}
