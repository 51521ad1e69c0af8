package simulators

import "math"

// grid is the instants at which the response is worked out: between two
// moments at which something happens, evenly in ln(1 + time since/scale), so
// that one piece covers a ramp's milliseconds and a hold's months alike.
type grid struct {
	pieces []piece
	times  []float64
}

// piece is the grid between two moments.
type piece struct {
	from, to float64
	first    int // its first node; the last is first+steps
	steps    int
	h        float64 // distance of nodes in ln(1 + (t-from)/scale)
}

const (
	gridScale      = 0.02 // s
	nodesPerDecade = 20
	fewPerDecade   = 8    // where the plan has very many changes
	manyNodes      = 6000 // beyond this the coarser grid is used
)

// newGrid covers 0..end. finest bounds the distance of nodes where the law
// has an accelerating end (s; 0: none).
func newGrid(moments []float64, end, finest float64) *grid {
	g := fillGrid(moments, end, finest, nodesPerDecade)
	if len(g.times) > manyNodes {
		g = fillGrid(moments, end, finest, fewPerDecade)
	}
	return g
}

func fillGrid(moments []float64, end, finest, perDecade float64) *grid {
	g := &grid{}
	from := 0.0
	for _, m := range append(append([]float64(nil), moments...), end) {
		if m <= from || m > end {
			continue
		}
		g.add(from, m, finest, perDecade)
		from = m
	}
	return g
}

func (g *grid) add(from, to, finest, perDecade float64) {
	width := math.Log1p((to - from) / gridScale)
	steps := math.Ceil(perDecade*width/math.Ln10) + 4
	if finest > 0 {
		steps = math.Max(steps, math.Min(20000, math.Ceil(width*(to-from)/finest)))
	}
	p := piece{from: from, to: to, first: len(g.times), steps: int(steps), h: width / steps}
	for i := range p.steps {
		g.times = append(g.times, from+gridScale*math.Expm1(float64(i)*p.h))
	}
	g.times = append(g.times, to)
	g.pieces = append(g.pieces, p)
}

// find returns the piece that holds t, looking from hint on; readers go
// forward in time, so the hint is nearly always right.
func (g *grid) find(t float64, hint int) int {
	for hint > 0 && t < g.pieces[hint].from {
		hint--
	}
	for hint+1 < len(g.pieces) && t >= g.pieces[hint].to {
		hint++
	}
	return hint
}

// curve is one view's displacement at the grid's nodes, with its slope there
// by the grid's own coordinate.
type curve struct{ value, slope []float64 }

// newCurve takes slopes from the neighbours by fourth-order differences,
// one-sided at a piece's ends (every piece has five nodes or more).
func newCurve(g *grid, value []float64) curve {
	slope := make([]float64, len(value))
	for _, p := range g.pieces {
		v, s := value[p.first:p.first+p.steps+1], slope[p.first:p.first+p.steps+1]
		n := p.steps
		for i := 2; i < n-1; i++ {
			s[i] = (8*(v[i+1]-v[i-1]) - (v[i+2] - v[i-2])) / 12
		}
		s[0] = (-25*v[0] + 48*v[1] - 36*v[2] + 16*v[3] - 3*v[4]) / 12
		s[1] = (-3*v[0] - 10*v[1] + 18*v[2] - 6*v[3] + v[4]) / 12
		s[n] = (25*v[n] - 48*v[n-1] + 36*v[n-2] - 16*v[n-3] + 3*v[n-4]) / 12
		s[n-1] = (3*v[n] + 10*v[n-1] - 18*v[n-2] + 6*v[n-3] - v[n-4]) / 12
	}
	return curve{value: value, slope: slope}
}

// at interpolates by a cubic between two nodes.
func (c curve) at(g *grid, piece int, t float64) float64 {
	p := &g.pieces[piece]
	u := math.Log1p(max(0, t-p.from)/gridScale) / p.h
	i := min(int(u), p.steps-1)
	u = min(1, u-float64(i))
	i += p.first
	a, b, sa, sb := c.value[i], c.value[i+1], c.slope[i], c.slope[i+1]
	d := b - a
	return a + u*(sa+u*(3*d-2*sa-sb+u*(sa+sb-2*d)))
}
