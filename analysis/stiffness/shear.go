package stiffness

import (
	"errors"
	"fmt"
	"math"
	"strings"

	"gaugelog/analysis/lsq"

	"gonum.org/v1/gonum/mat"
)

// Shear counts as told by the test if bending and shear are not nearly one
// (practice: correlation within 0.97) and S is known within 20 %.
const (
	greatestCorrelation = 0.97
	greatestShearU      = 0.20
)

// The prior (the assumed E/G, or the stated shear modulus) is one more reading
// wherever there is one: a switch between the two would pick those tests whose
// errors make the shear look large, and E would come out high in them. It
// stands aside only where it could not matter, or is not to be believed.
const (
	// sure is how many times better than the prior the test must know S to do
	// without it; its weight would be 1 in 26.
	sure = 5
	// disbelieved is how many standard uncertainties of their difference the
	// test's S may lie from the prior's before the prior is set aside.
	disbelieved = 3
)

// shearChoice is a fit with what it says of the shear.
type shearChoice struct {
	f           *fitted
	from, words string
	corr        *float64 // of 1/EI and 1/S with the shear free; nil where that cannot be fitted
	apart       string   // how far the test's S lies from the prior's, if too far to be believed
}

// chooseShear fits with the prior of the shear as one more reading; with the
// shear free where the test knows it so well that the prior does not matter,
// or contradicts it, or there is none.
func chooseShear(in *Input, m *model) (*shearChoice, error) {
	held, known := m.held(in)
	c := &shearChoice{}
	why := "the readings do not fix it"
	free := *m
	free.mode = shearFree
	if f, err := newFit(in, &free); err == nil && f.theta[0] > 0 {
		corr := f.sol.Correlation(0, 1)
		c.corr = &corr
		if why = f.untold(); why == "" {
			c.from, c.words = "test", fmt.Sprintf("told by the test (correlation with bending %.2f)", corr)
			if held.mode == shearNone {
				c.f = f
				return c, nil
			}
			gamma, u := held.priorFlexibility(in, f)
			mine := f.birge * f.sol.U(1)
			off := math.Abs(f.theta[1]-gamma) / math.Hypot(mine, u)
			switch {
			case off > disbelieved:
				c.f, c.apart = f, fmt.Sprintf("the test tells a shear stiffness %.0f %% off the one that follows from %s, %.1f times the uncertainty of their difference; the test's own was taken", 100*math.Abs(gamma/f.theta[1]-1), known, off)
				return c, nil
			case mine*sure < u:
				c.f = f
				return c, nil
			}
			c.words += fmt.Sprintf(", with %s as one more reading", known)
		}
	}
	if c.from == "" {
		c.from, c.words = "prior", fmt.Sprintf("taken from %s, because %s", known, why)
		switch held.mode {
		case shearNone:
			c.from, c.words = "none", "left out: "+why+", and the section states no area"
		case shearRatio:
			c.words += "; gauges on overhangs would tell"
		}
	}
	f, err := newFit(in, held)
	if err != nil {
		return nil, tooFew(err, len(m.rows), held.names())
	}
	c.f = f
	return c, f.rises()
}

// untold says why the free fit does not tell the shear; "" where it does.
func (f *fitted) untold() string {
	corr, u := f.sol.Correlation(0, 1), f.sol.U(1)/f.theta[1]
	switch {
	case !(f.theta[1] > 0):
		return "the readings show none beyond their uncertainty"
	case u > greatestShearU:
		return fmt.Sprintf("it would be uncertain by %.0f %%", 100*u)
	case math.Abs(corr) > greatestCorrelation:
		return fmt.Sprintf("bending and shear cannot be told apart here (correlation %.2f)", corr)
	}
	return ""
}

// held is the model with the prior of the shear in it, and that prior in words.
func (m *model) held(in *Input) (*model, string) {
	h := *m
	exp := in.Rig.Specimen.Expect.ShearModulus
	switch {
	case !(m.sec.Area.Value > 0):
		h.mode = shearNone
		return &h, ""
	case exp != nil && exp.Value > 0:
		h.mode = shearGiven
		return &h, fmt.Sprintf("expect.shear_modulus, %g\u202fMPa", exp.Value)
	}
	h.mode = shearRatio
	return &h, "E/G = " + h.ratioWords()
}

// priorFlexibility is 1/S by the prior, with its standard uncertainty, for the
// bending stiffness of a fit with the shear free.
func (m *model) priorFlexibility(in *Input, free *fitted) (gamma, u float64) {
	st := nominal(in.Rig, m.sec)
	m.assume(st)
	bending := make([]float64, m.unknowns())
	bending[0] = free.theta[0]
	_, gamma, _ = m.parts(st, bending)
	if c, has := m.shearPrior(); has {
		c.move(st, c.u)
		_, by, _ := m.parts(st, bending)
		u = math.Abs(by - gamma)
	}
	return gamma, u
}

// assume puts the prior's value into a state.
func (m *model) assume(st *state) {
	switch m.mode {
	case shearRatio:
		st.ratio, _ = assumedRatio(m.rig)
	case shearGiven:
		st.shear = m.rig.Specimen.Expect.ShearModulus.Value
	}
}

// tooFew says of a fit that failed for want of readings what was to be found.
func tooFew(err error, rows int, unknowns []string) error {
	mend := "mend: read more gauges or steps, or state the supports' compliance and take their gauges out"
	switch {
	case rows < len(unknowns):
		return fmt.Errorf("%d increments cannot give %d unknowns (%s); %s", rows, len(unknowns), strings.Join(unknowns, ", "), mend)
	case errors.Is(err, lsq.ErrRank):
		return fmt.Errorf("the gauges cannot give all of %s: %w; %s", strings.Join(unknowns, ", "), err, mend)
	}
	return err
}

// learn finds what the readings say of the shear beside its prior. The weights
// hold the prior's uncertainty as a cause that all readings share, and so the
// bending stiffness has it already; the shear's own best value is its prior
// plus u2 J^T V^-1 (readings - fit) (generalised least squares with the shear
// as an unknown of known spread).
func (f *fitted) learn() error {
	f.best = f.st
	for i, c := range f.causes {
		if !c.shear {
			continue
		}
		var w mat.VecDense
		if err := f.chol.SolveVecTo(&w, f.jac.ColView(i)); err != nil {
			var poor mat.Condition
			if !errors.As(err, &poor) {
				return err
			}
		}
		w.ScaleVec(c.u*c.u, &w)
		y, _, err := f.m.evaluate(f.st, f.theta)
		if err != nil {
			return err
		}
		shift := 0.0
		for r, o := range f.m.rows {
			shift += w.AtVec(r) * (o.mm - y[r])
		}
		f.best = f.st.clone()
		c.move(f.best, shift)
		if !(f.best.ratio > 0 || f.best.shear > 0) {
			f.best = f.st // readings that contradict every shear
			return nil
		}
		f.shear, f.learns = &w, c
	}
	return nil
}

// learned is a figure's change with the shear's prior, per unit of that prior;
// 0 where nothing was learned of it.
func (f *fitted) learned(fig figure) float64 {
	if f.shear == nil {
		return 0
	}
	h := f.learns.u / 10
	up, down := f.best.clone(), f.best.clone()
	f.learns.move(up, h)
	f.learns.move(down, -h)
	return (fig(f.theta, up) - fig(f.theta, down)) / (2 * h)
}
