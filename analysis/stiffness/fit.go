package stiffness

import (
	"errors"
	"fmt"
	"math"

	"gaugelog/analysis/lsq"

	"gonum.org/v1/gonum/mat"
)

// fitted is a model held against its readings.
type fitted struct {
	in      *Input
	m       *model
	st      *state
	gravity Value
	causes  []cause
	theta   []float64
	x       *mat.Dense
	jac     *mat.Dense    // rows x causes: change of the increments per unit of a cause
	read    *mat.SymDense // covariance of the readings' own errors
	cov     *mat.SymDense // all of it
	chol    mat.Cholesky  // of cov
	gain    *mat.Dense    // unknowns x rows: theta = gain y
	sol     *lsq.Solution
	birge   float64
	best    *state        // st with the shear as the readings and its prior have it
	shear   *mat.VecDense // change of the shear's best value per unit left over of each reading; nil: no prior
	learns  cause         // that prior
}

func newFit(in *Input, m *model) (*fitted, error) {
	g, source, err := GravityOf(in.Rig.Gravity)
	if err != nil {
		return nil, err
	}
	f := &fitted{in: in, m: m, gravity: g, st: nominal(in.Rig, m.sec), birge: 1}
	m.assume(f.st)
	f.causes = causes(in, m, g, source)
	f.read = m.readingCovariance()
	return f, f.solve()
}

// readingCovariance is that of the readings' own errors. The error of the
// plateau between two neighbouring increments of a gauge is in both, with
// opposite signs; what the later one names as its share is limited to what
// the earlier one has, so that the matrix stays a covariance.
func (m *model) readingCovariance() *mat.SymDense {
	v := mat.NewSymDense(len(m.rows), nil)
	for r, o := range m.rows {
		v.SetSym(r, r, o.u*o.u)
		for q := range r {
			p := m.rows[q]
			if p.gauge != o.gauge || p.step != o.step-1 {
				continue
			}
			own := p.u*p.u - p.uBefore*p.uBefore
			v.SetSym(q, r, -math.Min(o.uBefore*o.uBefore, 0.999*math.Max(own, 0)))
		}
	}
	return v
}

// rounds of weighting: the covariance's shared part needs the fit, and
// changes little once the fit is near.
const rounds = 2

func (f *fitted) solve() error {
	f.m.margin = 0 // what is stated must lie on the beam
	if err := f.start(); err != nil {
		return err
	}
	f.m.margin = margins(f.m.rig)
	f.cov = f.read
	for range rounds {
		if err := f.converge(); err != nil {
			return err
		}
		if err := f.shared(); err != nil {
			return err
		}
	}
	if err := f.converge(); err != nil {
		return err
	}
	return f.gains()
}

// start guesses alpha: any straight beam's sag is in proportion to it, so one
// evaluation with the supports unyielding fixes its size.
func (f *fitted) start() error {
	f.theta = make([]float64, f.m.unknowns())
	l := f.m.rig.Specimen.Length.Value
	f.theta[0] = 1 / (100 * l * l * l)
	y, _, err := f.m.evaluate(f.st, f.theta)
	if err != nil {
		return err
	}
	var num, den float64
	for r, o := range f.m.rows {
		num += y[r] * o.mm / (o.u * o.u)
		den += y[r] * y[r] / (o.u * o.u)
	}
	if den == 0 {
		return errors.New("the loads that changed do not bend the beam where gauges stand; mend: check the places of loads and gauges, and the marks")
	}
	if num > 0 {
		f.theta[0] *= num / den
	}
	return nil
}

// converge takes Gauss-Newton steps; one suffices where the mechanics is linear.
func (f *fitted) converge() error {
	for range 30 {
		y, x, err := f.m.evaluate(f.st, f.theta)
		if err != nil {
			return err
		}
		res := make([]float64, len(y))
		for r, o := range f.m.rows {
			res[r] = o.mm - y[r]
			for j, t := range f.theta {
				res[r] += x.At(r, j) * t
			}
		}
		p := lsq.Problem{Design: x, Y: res, Names: f.m.names(), Covariance: f.cov, Priors: f.priors()}
		if f.sol, err = lsq.Solve(p); err != nil {
			return fmt.Errorf("stiffness: %w", err)
		}
		change := 0.0
		for j, v := range f.sol.X {
			change = math.Max(change, math.Abs(v-f.theta[j])/(math.Abs(v)+math.Sqrt(f.sol.Covariance.At(j, j))))
		}
		f.theta, f.x = f.sol.X, x
		if f.m.determinate || change < 1e-12 {
			break
		}
	}
	return nil
}

// rises is the error of readings by which the beam goes up under its loads,
// with the wrong connection that would explain it, if one does.
func (f *fitted) rises() error {
	if f.theta[0] > 0 {
		return nil
	}
	hint := f.wiring()
	if hint == "" {
		hint = "check the gauges' sense and the loads' marks"
	}
	return errors.New("the readings say that the beam rises under its loads; mend: " + hint)
}

// priors are stated compliances of supports that are fitted too.
func (f *fitted) priors() []lsq.Prior {
	var out []lsq.Prior
	if f.m.rigid {
		return nil
	}
	for j, s := range f.m.yields {
		if c := f.m.rig.Supports[s].Compliance; c != nil && c.U > 0 {
			out = append(out, lsq.Prior{Column: f.m.firstYield() + j, Value: c.Value, U: c.U})
		}
	}
	return out
}

// shared works out how each cause moves the increments, and their covariance.
func (f *fitted) shared() error {
	n := len(f.m.rows)
	f.cov = mat.NewSymDense(n, nil)
	f.cov.CopySym(f.read)
	if len(f.causes) == 0 {
		f.jac = nil
		return nil
	}
	f.jac = mat.NewDense(n, len(f.causes), nil)
	for c, cs := range f.causes {
		col, err := f.moved(cs)
		if err != nil {
			return err
		}
		f.jac.SetCol(c, col)
		scaled := mat.NewVecDense(n, col)
		f.cov.SymRankOne(f.cov, cs.u*cs.u, scaled)
	}
	return nil
}

// moved is the change of the increments per unit of one cause.
func (f *fitted) moved(c cause) ([]float64, error) {
	h := c.u / 10
	up, down, width := f.st.clone(), f.st.clone(), 2*h
	c.move(up, h)
	if c.oneSided {
		width = h
	} else {
		c.move(down, -h)
	}
	hi, _, err := f.m.evaluate(up, f.theta)
	if err != nil {
		return nil, fmt.Errorf("%s, moved by a tenth of its uncertainty: %w", c.name, err)
	}
	lo, _, err := f.m.evaluate(down, f.theta)
	if err != nil {
		return nil, fmt.Errorf("%s, moved by a tenth of its uncertainty: %w", c.name, err)
	}
	for r := range hi {
		hi[r] = (hi[r] - lo[r]) / width
	}
	return hi, nil
}

// gains is how each reading moves each unknown.
func (f *fitted) gains() error {
	if !f.chol.Factorize(f.cov) {
		return errors.New("the covariance of the readings is not positive definite; mend: check the stated uncertainties")
	}
	var vx mat.Dense
	if err := f.chol.SolveTo(&vx, f.x); err != nil {
		var poor mat.Condition
		if !errors.As(err, &poor) {
			return err
		}
	}
	f.gain = &mat.Dense{}
	f.gain.Mul(f.sol.Covariance, vx.T())
	if f.sol.DOF >= 5 && lsq.Chi2P(f.sol.Chi2, f.sol.DOF) < 0.05 {
		f.birge = math.Sqrt(f.sol.Chi2 / float64(f.sol.DOF))
	}
	return f.learn()
}
