package stiffness

import (
	"errors"
	"math"
	"math/rand/v2"

	"gonum.org/v1/gonum/blas"
	"gonum.org/v1/gonum/blas/blas64"
	"gonum.org/v1/gonum/mat"
)

// drawer redoes the fit with drawn inputs. The weights stay those of the
// estimate, so one factor of the covariance serves all draws.
type drawer struct {
	f     *fitted
	noise mat.TriDense // read = noise noise^T
	white mat.TriDense // cov = white white^T
}

func newDrawer(f *fitted) (*drawer, error) {
	d := &drawer{f: f}
	var c mat.Cholesky
	if !c.Factorize(f.read) {
		return nil, errors.New("the readings' covariance is not positive definite; mend: check the uncertainties of the increments")
	}
	c.LTo(&d.noise)
	f.chol.LTo(&d.white)
	return d, nil
}

func (d *drawer) batch(seed uint64, b, n int) (modulus, bending []float64) {
	rng := rand.New(rand.NewPCG(seed, uint64(b)))
	for range n {
		theta, st, ok := d.draw(rng)
		if !ok {
			continue
		}
		i, _, _ := d.f.m.sec.shape(st.dims)
		ei := 1 / theta[0]
		if e := ei / i; !math.IsNaN(e) && !math.IsInf(e, 0) && e > 0 {
			modulus, bending = append(modulus, e), append(bending, ei)
		}
	}
	return modulus, bending
}

// draw makes one set of inputs and fits them.
func (d *drawer) draw(rng *rand.Rand) (theta []float64, st *state, ok bool) {
	f := d.f
	st = f.st.clone()
	for _, c := range f.causes {
		c.move(st, c.u*c.variate(rng))
	}
	mm := d.readings(rng)
	prior := make([]float64, len(f.priors()))
	for i := range prior {
		prior[i] = rng.NormFloat64()
	}
	if f.m.determinate {
		theta, ok = d.fit(st, mm, prior)
	} else {
		theta, ok = d.iterate(st, mm, prior)
	}
	return theta, st, ok
}

// readings are the increments with errors drawn from their own covariance.
func (d *drawer) readings(rng *rand.Rand) []float64 {
	n := len(d.f.m.rows)
	z := make([]float64, n)
	for r := range z {
		z[r] = d.f.birge * rng.NormFloat64()
	}
	blas64.Trmv(blas.NoTrans, d.noise.RawTriangular(), blas64.Vector{N: n, Inc: 1, Data: z})
	for r, o := range d.f.m.rows {
		z[r] += o.mm
	}
	return z
}

// fit is the weighted fit of a determinate beam, in which the unknowns enter
// linearly, with the design of the drawn inputs.
func (d *drawer) fit(st *state, mm, prior []float64) ([]float64, bool) {
	f := d.f
	y, x, err := f.m.evaluate(st, f.theta)
	if err != nil {
		return nil, false
	}
	n, k := x.Dims()
	priors := f.priors()
	a, b := mat.NewDense(n+len(priors), k, nil), mat.NewVecDense(n+len(priors), nil)
	a.Slice(0, n, 0, k).(*mat.Dense).Copy(x)
	for r := range y {
		b.SetVec(r, mm[r]-y[r])
	}
	white, top := d.white.RawTriangular(), a.RawMatrix()
	top.Rows = n
	blas64.Trsm(blas.Left, blas.NoTrans, 1, white, top)
	blas64.Trsv(blas.NoTrans, white, blas64.Vector{N: n, Inc: 1, Data: b.RawVector().Data[:n]})
	for i, p := range priors {
		a.Set(n+i, p.Column, 1/p.U)
		b.SetVec(n+i, (p.Value-f.theta[p.Column])/p.U+prior[i])
	}
	move, ok := normal(a, b)
	for j := range move {
		move[j] += f.theta[j]
	}
	return move, ok
}

// chords is how many steps a redundant beam's draw is fitted with. The design
// is that of the estimate throughout; each step leaves of the error the share
// by which the drawn design differs, a few hundredths.
const chords = 4

// iterate fits a redundant beam, in which the unknowns do not enter linearly.
func (d *drawer) iterate(st *state, mm, prior []float64) ([]float64, bool) {
	f := d.f
	theta := append([]float64(nil), f.theta...)
	res := make([]float64, len(mm))
	for range chords {
		y, err := f.m.predict(st, theta)
		if err != nil {
			return nil, false
		}
		for r := range res {
			res[r] = mm[r] - y[r]
		}
		move := make([]float64, len(theta))
		for j := range move {
			for r, v := range res {
				move[j] += f.gain.At(j, r) * v
			}
			for i, p := range f.priors() {
				pull := (p.Value-theta[p.Column])/p.U + prior[i]
				move[j] += f.sol.Covariance.At(j, p.Column) * pull / p.U
			}
		}
		for j, v := range move {
			theta[j] += v
		}
	}
	return theta, true
}

// normal solves by columns scaled to unit length and Cholesky: the condition
// was looked at when the estimate was made, and a draw needs few digits.
func normal(a *mat.Dense, b *mat.VecDense) ([]float64, bool) {
	_, k := a.Dims()
	scale := make([]float64, k)
	for j := range k {
		scale[j] = mat.Norm(a.ColView(j), 2)
		if scale[j] == 0 {
			return nil, false
		}
	}
	g := mat.NewSymDense(k, nil)
	rhs := mat.NewVecDense(k, nil)
	for i := range k {
		rhs.SetVec(i, mat.Dot(a.ColView(i), b)/scale[i])
		for j := i; j < k; j++ {
			g.SetSym(i, j, mat.Dot(a.ColView(i), a.ColView(j))/(scale[i]*scale[j]))
		}
	}
	var c mat.Cholesky
	if !c.Factorize(g) {
		return nil, false
	}
	var out mat.VecDense
	if err := c.SolveVecTo(&out, rhs); err != nil {
		return nil, false
	}
	x := make([]float64, k)
	for j := range x {
		x[j] = out.AtVec(j) / scale[j]
	}
	return x, true
}

// distribution names what variate draws from.
func (c cause) distribution() string {
	switch {
	case c.rectangular:
		return "rectangular"
	case c.dof > 0:
		return "t"
	}
	return "normal"
}

// variate is drawn from the cause's distribution in units of u: Student's t
// where its degrees of freedom are few (JCGM 101, 6.4.9), rectangular where
// so stated, else normal.
func (c cause) variate(rng *rand.Rand) float64 {
	switch {
	case c.rectangular:
		return math.Sqrt(3) * (2*rng.Float64() - 1)
	case c.dof > 0:
		chi2 := 0.0
		for range int(math.Round(c.dof)) {
			v := rng.NormFloat64()
			chi2 += v * v
		}
		return rng.NormFloat64() / math.Sqrt(chi2/math.Round(c.dof))
	}
	return rng.NormFloat64()
}
