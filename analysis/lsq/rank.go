package lsq

import (
	"errors"
	"fmt"
	"math"
	"strings"

	"gonum.org/v1/gonum/blas"
	"gonum.org/v1/gonum/mat"
)

// ErrRank marks an error of columns that cannot be told apart; use errors.As
// with *RankError for their names.
var ErrRank = errors.New("columns cannot be told apart")

// RankError says which unknowns the observations cannot separate.
type RankError struct {
	// Columns are the indices of the unknowns involved, rising; Names theirs.
	Columns []int
	Names   []string
	// Rank is the number of combinations that can be found, of Of unknowns.
	Rank, Of int
}

// Error says what and what to do.
func (e *RankError) Error() string {
	return fmt.Sprintf("the readings fix only %d of %d unknowns: %s cannot be told apart; fix one of them or add readings that separate them",
		e.Rank, e.Of, strings.Join(e.Names, ", "))
}

// Is makes errors.Is(err, ErrRank) hold.
func (e *RankError) Is(target error) bool { return target == ErrRank }

// smallestRatio is the least ratio of singular values of the scaled design
// that still counts as full rank. Below it no digit of the answer is left.
const smallestRatio = 1e-13

// check returns the condition number of the scaled design, or a *RankError.
func (f *factor) check(names []string) (float64, error) {
	values, v := f.singular()
	if values == nil {
		return 0, errors.New("singular values of the design did not converge; it holds numbers beyond the range of floating point")
	}
	limit := values[0] * max(smallestRatio, float64(max(f.m, f.n))*0x1p-52)
	rank := 0
	for rank < f.n && values[rank] > limit {
		rank++
	}
	if rank == f.n {
		return values[0] / values[f.n-1], nil
	}
	return math.MaxFloat64, &RankError{Columns: involved(v, rank), Names: pick(names, involved(v, rank)), Rank: rank, Of: f.n}
}

// plainlyRegular reports, by a bound that costs a fraction of the singular
// values, that check would find full rank: the least of them is no less than
// one over the Frobenius norm of R's inverse, the greatest, columns being of
// unit length, no more than the square root of their number. False: check.
func (f *factor) plainlyRegular() bool {
	const certain = 1e-10 // far above where rounding could mislead
	limit := math.Sqrt(float64(f.n)) * max(certain, 100*float64(max(f.m, f.n))*0x1p-52)
	length := make([]float64, f.n)
	for j := range f.n {
		for i := 0; i <= j; i++ {
			length[j] = math.Hypot(length[j], f.qr.Data[i*f.qr.Stride+j])
		}
		if !(length[j] > 0) || f.qr.Data[j*f.qr.Stride+j] == 0 {
			return false
		}
	}
	var norm2 float64
	x := make([]float64, f.n)
	for j := range f.n {
		clear(x)
		x[j] = 1
		f.solveR(blas.NoTrans, x)
		for i := 0; i <= j; i++ {
			v := x[i] * length[i]
			norm2 += v * v
		}
	}
	return norm2*limit*limit < 1
}

// involved lists the unknowns with a part in the null space.
func involved(v *mat.Dense, rank int) []int {
	n, _ := v.Dims()
	var cols []int
	for j := range n {
		for k := rank; k < n; k++ {
			if math.Abs(v.At(j, k)) > 1e-3 {
				cols = append(cols, j)
				break
			}
		}
	}
	return cols
}

// pick returns the names of columns, made up by number where there are none.
func pick(names []string, cols []int) []string {
	out := make([]string, len(cols))
	for i, c := range cols {
		if c < len(names) && names[c] != "" {
			out[i] = names[c]
		} else {
			out[i] = fmt.Sprintf("column %d", c+1)
		}
	}
	return out
}
