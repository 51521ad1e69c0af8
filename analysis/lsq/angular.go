package lsq

import (
	"errors"
	"math"

	"gonum.org/v1/gonum/blas/blas64"
	"gonum.org/v1/gonum/mat"
)

// Angular is a linear least-squares problem in block angular form: every
// block of observations depends on unknowns of its own and on some that all
// blocks share. Each block is reduced to a small triangle by itself (Björck,
// Numerical Methods for Least Squares Problems, SIAM 1996, section 6.3), so
// that many blocks cost no more than their own columns.
type Angular struct {
	Blocks []AngularBlock
	Shared int // number of shared unknowns, the same in every block
	// Priors are of shared unknowns.
	Priors []Prior
}

// AngularBlock is one block, whitened. Its slices are overwritten.
type AngularBlock struct {
	// Private and Shared hold one column an unknown, as long as Y.
	Private, Shared [][]float64
	Y               []float64
	// Priors are of private unknowns.
	Priors []Prior
}

// AngularSolution is the answer to an Angular problem.
type AngularSolution struct {
	Shared  []float64
	Private [][]float64 // by block
	// Chi2 is the sum of squares of whitened residuals, priors included.
	Chi2 float64
	// LogDet is the logarithm of the determinant of the normal matrix; minus
	// infinity where unknowns cannot be told apart.
	LogDet float64

	blocks []Reduced
	// r is the triangle of the shared unknowns and the right side, side
	// shared+1, row by row; diagonal entries may have either sign.
	r     []float64
	side  int
	whole int // observations and priors
}

// Reduced is a block after its own columns were eliminated.
type Reduced struct {
	private int
	// r is the triangle of private unknowns, shared unknowns and right side.
	r    []float64
	side int
	rows int
}

// Reduce eliminates the block's own columns; shared is their number.
func (b AngularBlock) Reduce(shared int) Reduced {
	p := len(b.Private)
	cols := make([][]float64, 0, p+shared+1)
	cols = append(append(append(cols, b.Private...), b.Shared...), b.Y)
	out := Reduced{private: p, side: p + shared + 1, rows: len(b.Y) + len(b.Priors)}
	out.r = triangle(cols)
	if len(b.Priors) > 0 {
		out.r = triangle(stacked([][]float64{out.r}, out.side, b.Priors))
	}
	return out
}

// stacked lays triangles of one side below each other, and priors below
// those, column by column.
func stacked(triangles [][]float64, side int, priors []Prior) [][]float64 {
	rows := len(triangles)*side + len(priors)
	cols := make([][]float64, side)
	for j := range cols {
		cols[j] = make([]float64, rows)
		for k, r := range triangles {
			for i := 0; i <= j; i++ {
				cols[j][k*side+i] = r[i*side+j]
			}
		}
	}
	for i, q := range priors {
		cols[q.Column][len(triangles)*side+i] = 1 / q.U
		cols[side-1][len(triangles)*side+i] = q.Value / q.U
	}
	return cols
}

// triangle overwrites columns by Householder's reflections and returns the
// upper triangle, square, row by row; missing rows are zeros.
func triangle(cols [][]float64) []float64 {
	c, n := len(cols), len(cols[0])
	out := make([]float64, c*c)
	for j := range c {
		x := cols[j]
		for i := 0; i < min(j, n); i++ {
			out[i*c+j] = x[i]
		}
		if j >= n {
			continue
		}
		v := vector(x[j:])
		length := blas64.Nrm2(v)
		if length == 0 {
			continue
		}
		alpha := -math.Copysign(length, x[j])
		out[j*c+j] = alpha
		x[j] -= alpha
		beta := -1 / (alpha * x[j]) // 2 / v'v
		for _, y := range cols[j+1:] {
			w := vector(y[j:])
			blas64.Axpy(-beta*blas64.Dot(v, w), v, w)
		}
	}
	return out
}

func vector(v []float64) blas64.Vector { return blas64.Vector{N: len(v), Data: v, Inc: 1} }

// Solve solves the problem. An error only where numbers are not finite;
// unknowns that cannot be told apart show in LogDet and Check.
func (a Angular) Solve() (*AngularSolution, error) {
	reduced := make([]Reduced, len(a.Blocks))
	for i, b := range a.Blocks {
		reduced[i] = b.Reduce(a.Shared)
	}
	return Join(reduced, a.Shared, a.Priors)
}

// Join solves for blocks that were reduced before.
func Join(blocks []Reduced, shared int, priors []Prior) (*AngularSolution, error) {
	s := &AngularSolution{blocks: blocks, side: shared + 1, whole: len(priors)}
	var lower [][]float64
	for i := range blocks {
		lower = append(lower, blocks[i].lower())
		s.whole += blocks[i].rows
		s.LogDet += 2 * logDiagonal(blocks[i].r, blocks[i].side, blocks[i].private)
	}
	s.r = triangle(stacked(lower, s.side, priors))
	s.LogDet += 2 * logDiagonal(s.r, s.side, shared)
	last := s.r[len(s.r)-1]
	s.Chi2 = last * last
	s.Shared = backward(s.r, s.side, 0, shared, nil)
	for i := range blocks {
		s.Private = append(s.Private, backward(blocks[i].r, blocks[i].side, 0, blocks[i].private, s.Shared))
	}
	if !finite(s.Chi2) {
		return nil, errors.New("the columns of a fit hold numbers beyond the range of floating point")
	}
	return s, nil
}

// lower is the part of the triangle below the private unknowns.
func (b *Reduced) lower() []float64 {
	k := b.side - b.private
	out := make([]float64, k*k)
	for i := range k {
		copy(out[i*k:(i+1)*k], b.r[(b.private+i)*b.side+b.private:(b.private+i+1)*b.side])
	}
	return out
}

func logDiagonal(r []float64, side, n int) float64 {
	var s float64
	for i := range n {
		s += math.Log(math.Abs(r[i*side+i]))
	}
	return s
}

// backward solves the first n rows of a triangle for the unknowns they begin
// with, the unknowns behind them being known; the right side is the last
// column. An unknown without a row of its own is 0.
func backward(r []float64, side, first, n int, known []float64) []float64 {
	x := make([]float64, n)
	for i := n - 1; i >= 0; i-- {
		row := r[(first+i)*side : (first+i+1)*side]
		if row[i] == 0 {
			continue
		}
		t := row[side-1]
		for j := i + 1; j < n; j++ {
			t -= row[j] * x[j]
		}
		for j, k := range known {
			t -= row[n+j] * k
		}
		x[i] = t / row[i]
	}
	return x
}

// SharedCovariance returns the covariance of the shared unknowns.
func (s *AngularSolution) SharedCovariance() *mat.SymDense {
	n := s.side - 1
	inv := make([][]float64, n) // columns of R^-1
	for j := range inv {
		inv[j] = solveUnit(s.r, s.side, n, j)
	}
	c := mat.NewSymDense(max(n, 1), nil)
	for i := range n {
		for j := i; j < n; j++ {
			var t float64
			for k := j; k < n; k++ {
				t += inv[k][i] * inv[k][j]
			}
			c.SetSym(i, j, t)
		}
	}
	return c
}

// solveUnit is column j of the inverse of the triangle's first n rows.
func solveUnit(r []float64, side, n, j int) []float64 {
	x := make([]float64, n)
	x[j] = 1 / r[j*side+j]
	for i := j - 1; i >= 0; i-- {
		var t float64
		for k := i + 1; k <= j; k++ {
			t += r[i*side+k] * x[k]
		}
		x[i] = -t / r[i*side+i]
	}
	return x
}

// PrivateU returns the standard uncertainties of block i's own unknowns,
// c being SharedCovariance.
func (s *AngularSolution) PrivateU(i int, c *mat.SymDense) []float64 {
	b := &s.blocks[i]
	out := make([]float64, b.private)
	for j := range out {
		// Row j of R^-1, and of R^-1 times what couples to the shared ones.
		row := make([]float64, b.private)
		var own float64
		for k := j; k < b.private; k++ {
			row[k] = solveUnit(b.r, b.side, b.private, k)[j]
			own += row[k] * row[k]
		}
		g := make([]float64, s.side-1)
		for m := range g {
			for k := j; k < b.private; k++ {
				g[m] += row[k] * b.r[k*b.side+b.private+m]
			}
		}
		out[j] = math.Sqrt(own + quadratic(c, g))
	}
	return out
}

func quadratic(c *mat.SymDense, g []float64) float64 {
	var t float64
	for i, a := range g {
		for j, b := range g {
			t += a * c.At(i, j) * b
		}
	}
	return max(t, 0)
}

// Check returns the condition number of the whole design with its columns
// scaled to unit length, or a *RankError. names lists the shared unknowns,
// then each block's own.
func (s *AngularSolution) Check(names []string) (float64, error) {
	shared := s.side - 1
	n := shared
	for i := range s.blocks {
		n += s.blocks[i].private
	}
	a := mat.NewDense(n, n, nil)
	at := shared
	for i := range s.blocks {
		b := &s.blocks[i]
		for r := range b.private {
			for c := r; c < b.private; c++ {
				a.Set(at+r, at+c, b.r[r*b.side+c])
			}
			for c := range shared {
				a.Set(at+r, c, b.r[r*b.side+b.private+c])
			}
		}
		at += b.private
	}
	for r := range shared {
		for c := r; c < shared; c++ {
			a.Set(r, c, s.r[r*s.side+c])
		}
	}
	return newFactor(a).check(names)
}

// Compact returns a dense problem with the same solutions as blocks reduced
// before, of few rows: the shared unknowns' columns come first, then each
// block's own. Whatever the blocks cannot fit is in the last rows of y.
func Compact(blocks []Reduced, shared int) (a *mat.Dense, y []float64) {
	rows, n := 0, shared
	for i := range blocks {
		rows += blocks[i].side
		n += blocks[i].private
	}
	a, y = mat.NewDense(rows, n, nil), make([]float64, rows)
	at, row := shared, 0
	for i := range blocks {
		b := &blocks[i]
		for r := range b.side {
			line := b.r[r*b.side : (r+1)*b.side]
			for c := r; c < b.private; c++ {
				a.Set(row, at+c, line[c])
			}
			for c := range shared {
				a.Set(row, c, line[b.private+c])
			}
			y[row] = line[b.side-1]
			row++
		}
		at += b.private
	}
	return a, y
}
