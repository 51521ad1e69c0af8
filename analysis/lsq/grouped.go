package lsq

import (
	"errors"
	"math"

	"gonum.org/v1/gonum/mat"
)

// Grouped is a separable problem (see Separable) of several groups of
// observations: linear unknowns are either shared by all groups or private to
// one. Variable projection runs on the reduced triangles of Angular, so a
// search over q costs little however many groups there are.
type Grouped struct {
	Groups int
	// Shared is the number of shared linear unknowns.
	Shared int
	// Design returns group g at q, whitened, in slices that may be overwritten.
	Design func(q []float64, g int) AngularBlock
	// Derivative returns the derivative of group g's whitened fit by q[k], its
	// linear unknowns being as given.
	Derivative func(q []float64, k, g int, shared, private []float64) []float64
	// Lower and Upper bound q; both finite.
	Lower, Upper []float64
	// Starts are tried in turn and the best end kept.
	Starts [][]float64
	// Names of the shared unknowns, then of every group's private ones, then
	// of q.
	Names         []string
	MaxIterations int // 0 means 500
	// Enough ends the search where a step would lower the misfit by less than
	// this share of it; 0: where none lowers it.
	Enough float64
}

// nearStep is how short, in standard uncertainties, the last step need be
// where Enough is given.
const nearStep = 1e-7

// GroupedSolution is the answer to a Grouped problem.
type GroupedSolution struct {
	Shared  []float64
	Private [][]float64
	Q       []float64
	// Covariance is that of the shared linear unknowns and q, in this order;
	// those at a bound have rows of zeros: their uncertainty is unknown. Nil
	// where Status is Unidentifiable.
	Covariance *mat.SymDense
	// PrivateU are the standard uncertainties of the private unknowns.
	PrivateU  [][]float64
	AtBound   []bool // of q
	Chi2      float64
	Condition float64
	Status    Status
	Unclear   []string
}

// trial is one evaluation at q: the linear solution and, in the basis of its
// own reduction, residual and Jacobian by q.
type trial struct {
	linear *AngularSolution
	joint  *AngularSolution
	r      []float64 // residual, fit less observation: len(q)+1
	j      *mat.Dense
}

// blocksAt returns every group's block at q.
func (p *Grouped) blocksAt(q []float64) []AngularBlock {
	out := make([]AngularBlock, p.Groups)
	for g := range out {
		out[g] = p.Design(q, g)
	}
	return out
}

// cloned copies blocks, which a solution overwrites.
func cloned(blocks []AngularBlock) []AngularBlock {
	out := make([]AngularBlock, len(blocks))
	columns := func(cols [][]float64) [][]float64 {
		c := make([][]float64, len(cols))
		for j := range cols {
			c[j] = append([]float64(nil), cols[j]...)
		}
		return c
	}
	for g, b := range blocks {
		out[g] = b
		out[g].Private, out[g].Shared, out[g].Y = columns(b.Private), columns(b.Shared), append([]float64(nil), b.Y...)
	}
	return out
}

// evaluate projects at q; false where the columns have no full rank.
func (p *Grouped) evaluate(q []float64) (*trial, bool) {
	t := &trial{}
	var err error
	blocks := p.blocksAt(q)
	if t.linear, err = (Angular{Blocks: cloned(blocks), Shared: p.Shared}).Solve(); err != nil || math.IsInf(t.linear.LogDet, 0) {
		return nil, false
	}
	for g := range blocks {
		blocks[g] = p.linearised(blocks[g], q, g, t.linear.Shared, t.linear.Private[g])
	}
	nq := len(q)
	if t.joint, err = (Angular{Blocks: blocks, Shared: p.Shared + nq}).Solve(); err != nil {
		return nil, false
	}
	t.r, t.j = make([]float64, nq+1), mat.NewDense(nq+1, max(nq, 1), nil)
	side := t.joint.side
	for i := range nq + 1 {
		row := t.joint.r[(p.Shared+i)*side : (p.Shared+i+1)*side]
		t.r[i] = -row[side-1]
		for k := i; k < nq; k++ {
			t.j.Set(i, k, row[p.Shared+k])
		}
	}
	return t, allFinite(t.r)
}

// linearised turns a block into that of corrections: derivatives by q join
// the shared columns, and the observations become residuals.
func (p *Grouped) linearised(b AngularBlock, q []float64, g int, shared, private []float64) AngularBlock {
	y := b.Y
	for j, x := range private {
		for i, v := range b.Private[j] {
			y[i] -= x * v
		}
	}
	for j, x := range shared {
		for i, v := range b.Shared[j] {
			y[i] -= x * v
		}
	}
	cols := append([][]float64(nil), b.Shared...)
	for k := range q {
		cols = append(cols, p.Derivative(q, k, g, shared, private))
	}
	out := AngularBlock{Private: b.Private, Shared: cols, Y: y}
	for _, prior := range b.Priors {
		out.Priors = append(out.Priors, Prior{Column: prior.Column, Value: prior.Value - private[prior.Column], U: prior.U})
	}
	return out
}

// Fit solves the problem. Errors are those of shapes, and a design that no
// start makes of full rank; else the Status tells.
func (p Grouped) Fit() (*GroupedSolution, error) {
	if p.Design == nil || p.Derivative == nil || p.Groups < 1 || p.Shared < 1 || len(p.Starts) == 0 {
		return nil, errors.New("a grouped fit needs groups, shared unknowns, Design, Derivative and starts")
	}
	nq := len(p.Starts[0])
	if len(p.Lower) != nq || len(p.Upper) != nq {
		return nil, errors.New("a grouped fit needs a lower and an upper bound for every start's coordinate")
	}
	var best *search
	var status Status
	for _, start := range p.Starts {
		s, end := p.search(start)
		if best == nil || s.chi2 < best.chi2*(1-1e-12) {
			best, status = s, end
		}
	}
	t, ok := p.evaluate(best.p)
	if !ok || !finite(best.chi2) {
		return nil, &RankError{Names: pick(p.Names, counting(p.Shared)), Columns: counting(p.Shared), Rank: p.Shared - 1, Of: p.Shared}
	}
	return p.finish(t, best, status), nil
}

// search runs one start to its end.
func (p *Grouped) search(start []float64) (*search, Status) {
	nq := len(start)
	s := &search{m: nq + 1, lower: p.Lower, upper: p.Upper, limit: p.MaxIterations, enough: p.Enough}
	if p.Enough > 0 {
		s.near = nearStep
	}
	if s.limit == 0 {
		s.limit = 500
	}
	// Residual and Jacobian belong to one reduction: the last are kept.
	var last *trial
	var at []float64
	look := func(q []float64) (*trial, bool) {
		if last != nil && same(at, q) {
			return last, true
		}
		t, ok := p.evaluate(q)
		if ok {
			last, at = t, append([]float64(nil), q...)
		}
		return t, ok
	}
	s.residual = func(q, r []float64) bool {
		t, ok := look(q)
		if ok {
			copy(r, t.r)
		}
		return ok
	}
	s.jacobian = func(q []float64, j *mat.Dense) {
		t, ok := look(q)
		if !ok {
			panic("lsq: a Jacobian was asked for where the fit has none")
		}
		j.Copy(t.j)
		copy(s.r, t.r)
	}
	return s, s.run(start)
}

func same(a, b []float64) bool {
	for i := range a {
		if a[i] != b[i] {
			return false
		}
	}
	return len(a) == len(b)
}

// finish works out the covariance at the best point, q at a bound held there.
func (p *Grouped) finish(t *trial, s *search, status Status) *GroupedSolution {
	nq := len(s.p)
	out := &GroupedSolution{Shared: t.linear.Shared, Private: t.linear.Private, Q: s.p, Chi2: t.linear.Chi2, Status: status, AtBound: make([]bool, nq)}
	var free []int
	for k := range nq {
		if out.AtBound[k] = s.bound(k); !out.AtBound[k] {
			free = append(free, k)
		}
	}
	joint := t.joint
	if len(free) < nq {
		joint = p.held(t, s.p, free)
	}
	var names []string
	names = append(names, pick(p.Names, counting(p.Shared))...)
	private := 0
	for _, b := range t.linear.Private {
		private += len(b)
	}
	for _, k := range free {
		names = append(names, pick(p.Names, []int{p.Shared + private + k})...)
	}
	for k := range private {
		names = append(names, pick(p.Names, []int{p.Shared + k})...)
	}
	cond, err := joint.Check(names)
	if err != nil {
		out.Status = Unidentifiable
		var rank *RankError
		if errors.As(err, &rank) {
			out.Unclear = rank.Names
		}
		return out
	}
	out.Condition = cond
	c := joint.SharedCovariance()
	place := counting(p.Shared)
	for _, k := range free {
		place = append(place, p.Shared+k)
	}
	out.Covariance = mat.NewSymDense(p.Shared+nq, nil)
	for i, a := range place {
		for j := i; j < len(place); j++ {
			out.Covariance.SetSym(a, place[j], c.At(i, j))
		}
	}
	for g := range p.Groups {
		out.PrivateU = append(out.PrivateU, joint.PrivateU(g, c))
	}
	return out
}

// held is the joint reduction with only the free coordinates of q.
func (p *Grouped) held(t *trial, q []float64, free []int) *AngularSolution {
	blocks := p.blocksAt(q)
	for g := range blocks {
		b := p.linearised(blocks[g], q, g, t.linear.Shared, t.linear.Private[g])
		cols := append([][]float64(nil), b.Shared[:p.Shared]...)
		for _, k := range free {
			cols = append(cols, b.Shared[p.Shared+k])
		}
		b.Shared = cols
		blocks[g] = b
	}
	s, err := (Angular{Blocks: blocks, Shared: p.Shared + len(free)}).Solve()
	if err != nil {
		return t.joint
	}
	return s
}
