package stiffness

import (
	"context"
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"runtime"
	"sort"
	"sync"

	"gonum.org/v1/gonum/mat"
)

// MonteCarlo is the check of the uncertainty by JCGM 101: the inputs drawn
// from their distributions, the fit done anew for each draw.
type MonteCarlo struct {
	Draws   int
	Seed    uint64
	Refused int // draws whose inputs made no beam (left out)
	Modulus Drawn
	Bending Drawn
	// Words says whether law of propagation and draws agree, for the report.
	Words string
}

// Drawn is one figure's distribution against the law of propagation.
type Drawn struct {
	Mean, SD float64
	// Lo and Hi are the shortest interval that holds 95 % of the draws;
	// PropagatedLo and PropagatedHi are value -+ U95.
	Lo, Hi, PropagatedLo, PropagatedHi float64
	// Agrees holds JCGM 101 clause 8's criterion: both ends within Tolerance,
	// half a unit of the second significant digit of u. Noise is the standard
	// error of Lo and Hi themselves, as far as this many draws know them;
	// twice that is granted beside the tolerance.
	Agrees    bool
	Tolerance float64
	Noise     float64
}

// thoroughDraws is the number of draws, thoroughSeed where they begin: the
// same input gives the same draws, whatever the number of cores.
const (
	thoroughDraws = 200_000
	thoroughSeed  = 101
	drawsPerBatch = 1000
)

// Thorough checks the estimate's uncertainty by 2e5 seeded draws on all
// cores. progress, if not nil, is called from one goroutine at a time with
// the draws done and wanted. It ends early with the context's error.
func Thorough(ctx context.Context, in Input, progress func(done, total int)) (*MonteCarlo, error) {
	return thorough(ctx, in, thoroughDraws, thoroughSeed, progress)
}

func thorough(ctx context.Context, in Input, draws int, seed uint64, progress func(done, total int)) (*MonteCarlo, error) {
	e, err := Compute(in)
	if err != nil {
		return nil, err
	}
	batches := (draws + drawsPerBatch - 1) / drawsPerBatch
	modulus, bending := make([][]float64, batches), make([][]float64, batches)
	d, err := newDrawer(e.fit)
	if err != nil {
		return nil, err
	}
	var (
		wg   sync.WaitGroup
		lock sync.Mutex
		done int
		next = make(chan int)
	)
	for range min(runtime.GOMAXPROCS(0), batches) {
		wg.Go(func() {
			for b := range next {
				n := min(drawsPerBatch, draws-b*drawsPerBatch)
				modulus[b], bending[b] = d.batch(seed, b, n)
				lock.Lock()
				done += n
				if progress != nil {
					progress(done, draws)
				}
				lock.Unlock()
			}
		})
	}
	err = feed(ctx, next, batches)
	close(next)
	wg.Wait()
	if err != nil {
		return nil, err
	}
	mc := &MonteCarlo{Draws: draws, Seed: seed}
	for _, m := range modulus {
		mc.Refused += len(m)
	}
	mc.Refused = draws - mc.Refused
	if mc.Refused > draws/100 {
		return nil, fmt.Errorf("%d of %d draws made no beam; mend: check the stated uncertainties of dimensions and places, they are as large as the values", mc.Refused, draws)
	}
	mc.Modulus, mc.Bending = drawn(modulus, *e.Modulus), drawn(bending, e.Bending)
	mc.Words = mc.words()
	return mc, nil
}

func feed(ctx context.Context, next chan<- int, batches int) error {
	for b := range batches {
		select {
		case next <- b:
		case <-ctx.Done():
			return ctx.Err()
		}
	}
	return nil
}

func join(parts [][]float64) []float64 {
	var out []float64
	for _, p := range parts {
		out = append(out, p...)
	}
	sort.Float64s(out)
	return out
}

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
	y, x, err := f.m.evaluate(st, f.theta)
	if err != nil {
		return nil, nil, false
	}
	n := len(y)
	z := make([]float64, n)
	for r := range z {
		z[r] = f.birge * rng.NormFloat64()
	}
	res := mat.NewVecDense(n, nil)
	res.MulVec(&d.noise, mat.NewVecDense(n, z))
	for r, o := range f.m.rows {
		res.SetVec(r, res.AtVec(r)+o.mm-y[r])
	}
	move, ok := d.solve(x, res, rng)
	if !ok {
		return nil, nil, false
	}
	theta = append([]float64(nil), f.theta...)
	for j := range theta {
		theta[j] += move[j]
	}
	return theta, st, true
}

// solve is the weighted fit of the residuals, priors drawn as well.
func (d *drawer) solve(x *mat.Dense, res *mat.VecDense, rng *rand.Rand) ([]float64, bool) {
	n, k := x.Dims()
	priors := d.f.priors()
	a, b := mat.NewDense(n+len(priors), k, nil), mat.NewVecDense(n+len(priors), nil)
	top := a.Slice(0, n, 0, k).(*mat.Dense)
	head := b.SliceVec(0, n).(*mat.VecDense)
	if err := top.Solve(&d.white, x); err != nil {
		return nil, false
	}
	if err := head.SolveVec(&d.white, res); err != nil {
		return nil, false
	}
	for i, p := range priors {
		a.Set(n+i, p.Column, 1/p.U)
		b.SetVec(n+i, (p.Value-d.f.theta[p.Column])/p.U+rng.NormFloat64())
	}
	return normal(a, b)
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

// groups is into how many parts the draws are split to see how well they know
// their own interval.
const groups = 10

// drawn sums up the draws and holds them against the propagated interval.
func drawn(batches [][]float64, q Quantity) Drawn {
	v := join(batches)
	d := Drawn{PropagatedLo: q.Value - q.U95, PropagatedHi: q.Value + q.U95}
	for _, x := range v {
		d.Mean += x / float64(len(v))
	}
	d.SD = math.Sqrt(variance(v))
	d.Lo, d.Hi = shortest(v, 0.95)
	d.Tolerance = tolerance(q.U)
	d.Noise = noise(batches)
	grant := d.Tolerance + 2*d.Noise
	d.Agrees = math.Abs(d.Lo-d.PropagatedLo) <= grant && math.Abs(d.Hi-d.PropagatedHi) <= grant
	return d
}

// noise is the standard error of the shortest interval's ends, from the
// scatter of the intervals of parts of the draws; 0 for too few draws.
func noise(batches [][]float64) float64 {
	if len(batches) < groups {
		return 0
	}
	var lo, hi [groups]float64
	for g := range groups {
		var part [][]float64
		for b := g; b < len(batches); b += groups {
			part = append(part, batches[b])
		}
		lo[g], hi[g] = shortest(join(part), 0.95)
	}
	v := math.Max(variance(lo[:]), variance(hi[:]))
	return math.Sqrt(v / groups)
}

func variance(v []float64) float64 {
	mean, sum := 0.0, 0.0
	for _, x := range v {
		mean += x / float64(len(v))
	}
	for _, x := range v {
		sum += (x - mean) * (x - mean) / float64(len(v)-1)
	}
	return sum
}

// shortest is the shortest interval with a share p of the sorted values.
func shortest(v []float64, p float64) (lo, hi float64) {
	n := int(math.Round(p * float64(len(v))))
	best := math.Inf(1)
	for i := 0; i+n < len(v); i++ {
		if w := v[i+n] - v[i]; w < best {
			best, lo, hi = w, v[i], v[i+n]
		}
	}
	return lo, hi
}

// tolerance is half a unit of the second significant digit of u (JCGM 101,
// 7.9.2).
func tolerance(u float64) float64 {
	if !(u > 0) {
		return 0
	}
	return 0.5 * math.Pow(10, math.Floor(math.Log10(u))-1)
}

func (mc *MonteCarlo) words() string {
	m := mc.Modulus
	how := "agrees with"
	if !m.Agrees {
		how = "differs from"
	}
	return fmt.Sprintf("%d draws of all inputs (seed %d) give 95 %% of the moduli in %.6g to %.6g MPa, which %s the propagated %.6g to %.6g MPa (tolerance %.2g MPa at each end, beside the draws' own noise of %.2g MPa)",
		mc.Draws, mc.Seed, m.Lo, m.Hi, how, m.PropagatedLo, m.PropagatedHi, m.Tolerance, m.Noise)
}
