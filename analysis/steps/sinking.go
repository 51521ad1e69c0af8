package steps

import (
	"math"

	"gonum.org/v1/gonum/mat"

	"gaugelog/analysis/history"
)

// sinking is one step's bins, gauge by gauge, and the movements of the supports
// fitted to them.
type sinking struct {
	r       *run
	t       []int64
	y       [][]float64 // by gauge, NaN where there is none
	columns [][]float64 // by cause: left, right, common, creep
	fits    map[uint64]*mat.Dense
	common  int // index of its column, -1
}

// sinkingIn gathers the bins of step k behind its full load, offsets and sudden
// shifts taken off.
func (r *run) sinkingIn(k int) *sinking {
	st := r.out.Steps[k]
	s := &sinking{r: r, fits: map[uint64]*mat.Dense{}, common: -1}
	from := max(st.From, st.Full)
	if st.Full != 0 {
		from += max(60*second, 3*nanos(r.spacing(from))) // the load is surely on by then
	}
	// Bins of a short run are narrower than the readings lie apart: one reading
	// alone is no level.
	width := history.BinWidth(r.h.First, r.h.Last)
	width *= max(1, (nanos(2*r.spacing(from))+width-1)/width)
	first := from/width + 1
	n := int(st.To/width - first)
	if n < leastBins {
		return s
	}
	s.t = make([]int64, n)
	for i := range s.t {
		s.t[i] = (first+int64(i))*width + width/2
	}
	for g := range r.gauges {
		y, weight := make([]float64, n), make([]float64, n)
		for _, p := range r.gauges[g].seq {
			i := int(p.t/width - first)
			if i >= 0 && i < n && !r.excluded(g, p.from, p.to+1) {
				y[i] += float64(p.n) * (p.y - r.shifted(g, p.t, from))
				weight[i] += float64(p.n)
			}
		}
		for i := range y {
			y[i] /= weight[i] // NaN where nothing was read
		}
		s.y = append(s.y, y)
	}
	// A gauge that comes or goes would move what is fitted to the others.
	fewest := n
	for _, y := range s.y {
		fewest = min(fewest, absent(y))
	}
	for _, y := range s.y {
		if absent(y) > fewest+n/5 {
			for i := range y {
				y[i] = math.NaN()
			}
		}
	}
	s.columns = append(s.columns, r.supportPattern(0), r.supportPattern(1))
	for _, g := range r.gauges {
		if g.cfg.Sees == "reference" && len(g.seq) > 0 {
			s.common = len(s.columns)
		}
	}
	if s.common >= 0 {
		one := make([]float64, len(r.gauges))
		for g := range one {
			one[g] = 1
		}
		s.columns = append(s.columns, one)
	}
	if v := r.shape(k); v != nil {
		s.columns = append(s.columns, v)
	}
	return s
}

// absent counts the bins without a reading.
func absent(y []float64) (n int) {
	for _, v := range y {
		if math.IsNaN(v) {
			n++
		}
	}
	return n
}

// shifted is what the offsets found, and the sudden shifts of supports, add to a
// gauge's bins at t.
func (r *run) shifted(g int, t, from int64) float64 {
	sum := 0.0
	for _, p := range r.pending {
		if p.gauge == g && p.offset.Time <= t {
			sum += p.offset.Value.MM
		}
	}
	for _, e := range r.shifts {
		if e.known[g] && e.hi <= t && e.hi > from {
			sum += e.jump[g].MM
		}
	}
	return sum
}

// shape is how the sags of what hangs in step k are distributed over the
// gauges; nil where nobody can tell.
func (r *run) shape(k int) []float64 {
	v := make([]float64, len(r.gauges))
	if r.opt.Influence != nil {
		for j, l := range r.h.Rig.Loads {
			for g := range v {
				v[g] += r.opt.Influence[g][j] * r.out.Steps[k].Loads[l.Name]
			}
		}
	} else {
		for _, p := range r.parts[:min(k+1, len(r.parts))] {
			for g := range v {
				if p.event != nil && r.seesBeam(g) {
					v[g] += p.event.jump[g].MM
				}
			}
		}
	}
	most := 0.0
	for g := range v {
		most = max(most, math.Abs(v[g]))
	}
	if most == 0 {
		return nil
	}
	for g := range v {
		v[g] /= most
	}
	return v
}

// movement is how far the support of one side had gone down in each bin, by
// least squares over the gauges that left readings; NaN where they cannot tell.
func (s *sinking) movement(side int) []float64 {
	out := make([]float64, len(s.t))
	for i := range out {
		x, _ := s.solve(func(g int) float64 { return s.y[g][i] })
		out[i] = math.NaN()
		if x != nil {
			out[i] = x[side]
		}
	}
	return out
}

// solve fits the causes to one value a gauge; misfit is the greatest residual.
func (s *sinking) solve(value func(g int) float64) (x []float64, misfit float64) {
	var mask uint64
	var rows []int
	for g := range s.y {
		if !math.IsNaN(value(g)) && g < 64 {
			mask |= 1 << g
			rows = append(rows, g)
		}
	}
	if len(rows) < len(s.columns) {
		return nil, 0
	}
	inv, ok := s.fits[mask]
	if !ok {
		inv = s.invert(rows)
		s.fits[mask] = inv
	}
	if inv == nil {
		return nil, 0
	}
	x = make([]float64, len(s.columns))
	for c := range x {
		for i, g := range rows {
			x[c] += inv.At(c, i) * value(g)
		}
	}
	for _, g := range rows {
		e := value(g)
		for c := range x {
			e -= x[c] * s.columns[c][g]
		}
		misfit = max(misfit, math.Abs(e))
	}
	return x, misfit
}

// invert returns (A'A)^-1 A' for the gauges present, nil where they cannot
// tell the causes apart.
func (s *sinking) invert(rows []int) *mat.Dense {
	a := mat.NewDense(len(rows), len(s.columns), nil)
	for i, g := range rows {
		for c := range s.columns {
			a.Set(i, c, s.columns[c][g])
		}
	}
	var ata, inv, out mat.Dense
	ata.Mul(a.T(), a)
	if mat.Cond(&ata, 2) > 1e6 || inv.Inverse(&ata) != nil {
		return nil
	}
	out.Mul(&inv, a.T())
	return &out
}
