package lsq

import (
	"math"

	"gonum.org/v1/gonum/blas"
	"gonum.org/v1/gonum/blas/blas64"
	"gonum.org/v1/gonum/lapack/lapack64"
	"gonum.org/v1/gonum/mat"
)

// factor is the QR factorisation of a design whose columns were scaled to
// about unit length, so that units (mm beside 1/N) do not decide the answer.
type factor struct {
	m, n  int
	a     *mat.Dense // the scaled design
	qr    blas64.General
	tau   []float64
	scale []float64 // original column lengths; 1 for a column of zeros
	work  []float64
}

// newFactor factorises a (m x n, m >= n >= 1); a is not changed.
func newFactor(a *mat.Dense) *factor {
	m, n := a.Dims()
	f := &factor{m: m, n: n, a: mat.DenseCopyOf(a), scale: make([]float64, n), tau: make([]float64, n)}
	for j := range n {
		length := mat.Norm(f.a.ColView(j), 2)
		if length == 0 {
			length = 1
		}
		// A power of two: scaling then rounds nothing.
		_, e := math.Frexp(length)
		length = math.Ldexp(1, e)
		f.scale[j] = length
		for i := range m {
			f.a.Set(i, j, f.a.At(i, j)/length)
		}
	}
	f.qr = mat.DenseCopyOf(f.a).RawMatrix()
	f.work = make([]float64, 64*max(n, 1))
	lapack64.Geqrf(f.qr, f.tau, f.work, len(f.work))
	return f
}

// apply overwrites v (length m) with Q v, or with its transpose times v.
func (f *factor) apply(trans blas.Transpose, v []float64) {
	c := blas64.General{Rows: f.m, Cols: 1, Stride: 1, Data: v}
	lapack64.Ormqr(blas.Left, trans, f.qr, f.tau, c, f.work, len(f.work))
}

// solveR overwrites the first n of v with R^-1 v, or R^-T v.
func (f *factor) solveR(trans blas.Transpose, v []float64) {
	t := blas64.Triangular{Uplo: blas.Upper, Diag: blas.NonUnit, N: f.n, Stride: f.qr.Stride, Data: f.qr.Data}
	blas64.Trsv(trans, t, blas64.Vector{N: f.n, Inc: 1, Data: v})
}

// singular returns the singular values of R, its columns scaled to exactly
// unit length, in falling order, and the right singular vectors (columns of v).
func (f *factor) singular() (values []float64, v *mat.Dense) {
	r := mat.NewDense(f.n, f.n, nil)
	for i := range f.n {
		for j := i; j < f.n; j++ {
			r.Set(i, j, f.qr.Data[i*f.qr.Stride+j])
		}
	}
	for j := range f.n {
		if length := mat.Norm(r.ColView(j), 2); length > 0 {
			for i := 0; i <= j; i++ {
				r.Set(i, j, r.At(i, j)/length)
			}
		}
	}
	var svd mat.SVD
	if !svd.Factorize(r, mat.SVDFull) {
		return nil, nil
	}
	v = new(mat.Dense)
	svd.VTo(v)
	return svd.Values(nil), v
}

// solve returns the least-squares solution in scaled unknowns and refines it
// on the augmented system (Björck, Numerical Methods for Least Squares
// Problems, SIAM 1996, section 2.9) until it no longer changes.
func (f *factor) solve(b []float64, refine bool) []float64 {
	x := make([]float64, f.n)
	w := append([]float64(nil), b...)
	f.apply(blas.Trans, w)
	copy(x, w[:f.n])
	f.solveR(blas.NoTrans, x)
	if !refine {
		return x
	}
	r := make([]float64, f.m)
	for i := range r {
		s := sum2{high: b[i]}
		for j := range f.n {
			s.addProduct(-f.a.At(i, j), x[j])
		}
		r[i] = s.value()
	}
	last := math.Inf(1)
	for range 12 {
		step := f.refineOnce(b, x, r)
		if step == 0 || step > last/2 {
			break
		}
		last = step
	}
	return x
}

// refineOnce corrects x and the residual r by one solve of the augmented
// system and returns the length of the correction of x.
func (f *factor) refineOnce(b, x, r []float64) float64 {
	top := make([]float64, f.m)
	for i := range top {
		s := sum2{high: b[i]}
		s.add(-r[i])
		for j := range f.n {
			s.addProduct(-f.a.At(i, j), x[j])
		}
		top[i] = s.value()
	}
	low := make([]float64, f.n)
	for j := range low {
		var s sum2
		for i := range f.m {
			s.addProduct(-f.a.At(i, j), r[i])
		}
		low[j] = s.value()
	}
	f.apply(blas.Trans, top)
	f.solveR(blas.Trans, low)
	dx := make([]float64, f.n)
	for j := range dx {
		dx[j] = top[j] - low[j]
		top[j] = low[j]
	}
	f.solveR(blas.NoTrans, dx)
	f.apply(blas.NoTrans, top)
	var length float64
	for j := range dx {
		x[j] += dx[j]
		length += dx[j] * dx[j]
	}
	for i := range r {
		r[i] += top[i]
	}
	return math.Sqrt(length)
}

// covariance returns (A^T A)^-1 in the caller's units.
func (f *factor) covariance() *mat.SymDense {
	inv := mat.NewDense(f.n, f.n, nil)
	col := make([]float64, f.n)
	for j := range f.n {
		clear(col)
		col[j] = 1
		f.solveR(blas.NoTrans, col)
		for i, v := range col {
			inv.Set(i, j, v)
		}
	}
	c := mat.NewSymDense(f.n, nil)
	for i := range f.n {
		for j := i; j < f.n; j++ {
			var s float64
			for k := j; k < f.n; k++ {
				s += inv.At(i, k) * inv.At(j, k)
			}
			c.SetSym(i, j, s/f.scale[i]/f.scale[j])
		}
	}
	return c
}
