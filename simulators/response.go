package simulators

import (
	"math"

	"gaugelog/simulators/creep"
	"gaugelog/simulators/statics"
)

// response is every view's displacement over the whole test, worked out once
// at the nodes of a grid and read by interpolation. The error of the
// interpolation is below 0.05 micrometre once a load is placed (it is tested).
//
// Loads enter by their exact hereditary integrals. The plungers' springs push
// with -k times the displacement under them, which itself creeps: a Volterra
// equation, solved node by node with the spring forces linear in between.
type response struct {
	grid   *grid
	curves []curve
}

// newResponse works it out. Views come back in the order given.
func newResponse(b *beam, loads []*pusher, springs []spring, shifts []shift, moments []float64, end float64, views []view) *response {
	finest := 0.0
	if b.law.Tertiary.Amplitude > 0 {
		finest = b.law.Tertiary.Growth / 12
	}
	r := &response{grid: newGrid(withOnsets(b, loads, moments), end, finest)}
	pushers := append(append([]*pusher(nil), loads...), b.frictions(loads, springs, moments)...)
	live := springs[:0:0]
	for _, s := range springs {
		if s.stiffness > 0 {
			live = append(live, s)
		}
	}
	n := len(r.grid.times)
	q, f := make([][]float64, len(pushers)), make([][]float64, len(pushers))
	for p, one := range pushers {
		q[p], f[p] = make([]float64, n), make([]float64, n)
		for i, t := range r.grid.times {
			q[p][i], f[p][i] = b.spread(one, t), one.force(t)
		}
	}
	where := make([]statics.Load, len(pushers))
	for p, one := range pushers {
		where[p] = one.where
	}
	if len(live) > 0 {
		sq, sf := springForces(b, r.grid, live, where, q, f, shifts)
		q, f = append(q, sq...), append(f, sf...)
		for _, s := range live {
			where = append(where, statics.Load{From: s.at, To: s.at})
		}
	}
	for _, v := range views {
		value := sum(b, v, where, q, f, n)
		for i, t := range r.grid.times {
			value[i] += b.shifted(v, shifts, t)
		}
		r.curves = append(r.curves, newCurve(r.grid, value))
	}
	return r
}

// withOnsets adds the instants at which an accelerating end sets in: there the
// response has kinks.
func withOnsets(b *beam, loads []*pusher, moments []float64) []float64 {
	if b.law.Tertiary.Amplitude == 0 {
		return moments
	}
	out := append([]float64(nil), moments...)
	for _, l := range loads {
		for _, c := range l.changes {
			out = append(out, c.from+b.law.Tertiary.From, c.to+b.law.Tertiary.From)
		}
	}
	return sortedUnique(out)
}

// sum adds up what all pushers do to a view at every node.
func sum(b *beam, v view, where []statics.Load, q, f [][]float64, n int) []float64 {
	value := make([]float64, n)
	for p := range where {
		creeping, rigid := b.effect(v, where[p])
		for i := range value {
			value[i] += creeping*q[p][i] + rigid*f[p][i]
		}
	}
	return value
}

// springForces solves for the springs' forces f at the nodes and returns them
// with their creeping histories q.
func springForces(b *beam, g *grid, springs []spring, where []statics.Load, lq, lf [][]float64, shifts []shift) (q, f [][]float64) {
	n, m := len(g.times), len(springs)
	q, f = make([][]float64, m), make([][]float64, m)
	free := make([][]float64, m) // displacement under each spring without springs
	creeping, rigid := make([][]float64, m), make([][]float64, m)
	for a, s := range springs {
		v := view{terms: []viewTerm{{s.at, 1}}, seat: -1}
		free[a] = sum(b, v, where, lq, lf, n)
		for i, t := range g.times {
			free[a][i] += b.shifted(v, shifts, t)
		}
		q[a], f[a] = make([]float64, n), make([]float64, n)
		creeping[a], rigid[a] = make([]float64, m), make([]float64, m)
		for c, other := range springs {
			creeping[a][c], rigid[a][c] = b.effect(v, statics.Load{From: other.at, To: other.at})
		}
	}
	h := &history{law: b.law, times: g.times}
	matrix, right := make([][]float64, m), make([]float64, m)
	for i := 1; i < n; i++ {
		h.advance(i)
		for a := range springs {
			q[a][i] = h.past(f[a])
		}
		for a, s := range springs {
			matrix[a] = append(matrix[a][:0], make([]float64, m)...)
			right[a] = -s.stiffness*free[a][i] - f[a][i-1]
			for c := range springs {
				matrix[a][c] = s.stiffness * (creeping[a][c]*h.last + rigid[a][c])
				right[a] -= s.stiffness * (creeping[a][c]*q[c][i] + rigid[a][c]*f[c][i-1])
			}
			matrix[a][a]++
		}
		eliminate(matrix, right)
		for a := range springs {
			f[a][i] = f[a][i-1] + right[a]
			q[a][i] += right[a] * h.last
		}
	}
	return q, f
}

// history convolves forces that are linear between nodes with the law.
type history struct {
	law   creep.Law
	times []float64
	mean  []float64 // mean[m]: the law's mean over the m-th interval, seen from node i
	last  float64   // the same of the newest interval
}

// advance works the means out for node i.
func (h *history) advance(i int) {
	h.mean = h.mean[:0]
	t := h.times[i]
	older := h.law.Integral(t - h.times[0])
	for m := 1; m <= i; m++ {
		newer := h.law.Integral(t - h.times[m])
		width := h.times[m] - h.times[m-1]
		if width > 0 {
			h.mean = append(h.mean, (older-newer)/width)
		} else {
			h.mean = append(h.mean, h.law.At(t-h.times[m]))
		}
		older = newer
	}
	h.last = h.mean[i-1]
	h.mean = h.mean[:i-1]
}

// past is the creeping force of all changes before the newest interval.
func (h *history) past(f []float64) float64 {
	sum := 0.0
	for m, j := range h.mean {
		sum += (f[m+1] - f[m]) * j
	}
	return sum
}

// eliminate solves matrix x = right by Gauss's elimination with row exchange;
// x comes back in right. The matrix is the unit matrix plus something
// non-negative definite, so that it has an inverse.
func eliminate(matrix [][]float64, right []float64) {
	n := len(right)
	for c := range n {
		best := c
		for r := c + 1; r < n; r++ {
			if math.Abs(matrix[r][c]) > math.Abs(matrix[best][c]) {
				best = r
			}
		}
		matrix[c], matrix[best] = matrix[best], matrix[c]
		right[c], right[best] = right[best], right[c]
		for r := c + 1; r < n; r++ {
			k := matrix[r][c] / matrix[c][c]
			for j := c; j < n; j++ {
				matrix[r][j] -= k * matrix[c][j]
			}
			right[r] -= k * right[c]
		}
	}
	for c := n - 1; c >= 0; c-- {
		for j := c + 1; j < n; j++ {
			right[c] -= matrix[c][j] * right[j]
		}
		right[c] /= matrix[c][c]
	}
}
