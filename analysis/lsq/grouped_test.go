package lsq

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/mat"
)

// grouped turns a dense separable problem into groups of rows that share all
// linear unknowns but those in private, which belong to the group given.
func grouped(p Separable, group []int, groups int, private map[int]int) Grouped {
	rows := make([][]int, groups)
	for i, g := range group {
		rows[g] = append(rows[g], i)
	}
	var shared []int
	own := make([][]int, groups)
	for j := range p.Columns {
		if g, ok := private[j]; ok {
			own[g] = append(own[g], j)
		} else {
			shared = append(shared, j)
		}
	}
	column := func(a *mat.Dense, g, j int) []float64 {
		out := make([]float64, len(rows[g]))
		for i, r := range rows[g] {
			out[i] = a.At(r, j)
		}
		return out
	}
	return Grouped{Groups: groups, Shared: len(shared), Lower: p.Lower, Upper: p.Upper, Starts: p.Starts,
		Design: func(q []float64, g int) AngularBlock {
			a := mat.NewDense(len(p.Y), p.Columns, nil)
			p.Design(q, a)
			b := AngularBlock{}
			for _, j := range own[g] {
				b.Private = append(b.Private, column(a, g, j))
			}
			for _, j := range shared {
				b.Shared = append(b.Shared, column(a, g, j))
			}
			for _, r := range rows[g] {
				b.Y = append(b.Y, p.Y[r])
			}
			for _, prior := range p.Priors {
				for k, j := range own[g] {
					if prior.Column == j {
						b.Priors = append(b.Priors, Prior{k, prior.Value, prior.U})
					}
				}
			}
			return b
		},
		Derivative: func(q []float64, k, g int, s, own1 []float64) []float64 {
			d := mat.NewDense(len(p.Y), p.Columns, nil)
			p.Derivative(q, k, d)
			out := make([]float64, len(rows[g]))
			for i, r := range rows[g] {
				for c, j := range shared {
					out[i] += d.At(r, j) * s[c]
				}
				for c, j := range own[g] {
					out[i] += d.At(r, j) * own1[c]
				}
			}
			return out
		}}
}

func TestNISTGrouped(t *testing.T) {
	for _, c := range []struct {
		name  string
		least float64
	}{{"Misra1a", 7}, {"DanWood", 7}, {"MGH17", 5}} {
		var s set
		load(t, "nist_"+c.name+".json", &s)
		x, y := s.xy()
		for i, start := range [][]number{s.Start1, s.Start2} {
			p := nistSeparable(c.name, x, y)
			q := floats(start)[p.Columns:]
			p.Starts = [][]float64{q}
			for range q {
				p.Lower, p.Upper = append(p.Lower, -1e6), append(p.Upper, 1e6)
			}
			group := make([]int, len(y))
			for k := range group {
				group[k] = k % 2
			}
			sol, err := grouped(p, group, 2, nil).Fit()
			if err != nil {
				t.Fatal(err)
			}
			if len(sol.Q) == 2 && sol.Q[0] > sol.Q[1] {
				// MGH17 is the same with its exponentials exchanged; which of them
				// comes first depends on the start.
				sol.Q[0], sol.Q[1] = sol.Q[1], sol.Q[0]
				sol.Shared[1], sol.Shared[2] = sol.Shared[2], sol.Shared[1]
				swap := []int{0, 2, 1, 4, 3}
				c := mat.NewSymDense(5, nil)
				for a := range swap {
					for b := a; b < 5; b++ {
						c.SetSym(a, b, sol.Covariance.At(swap[a], swap[b]))
					}
				}
				sol.Covariance = c
			}
			what := fmt.Sprintf("%s grouped from start %d (%v)", c.name, i+1, sol.Status)
			agree(t, what, append(append([]float64(nil), sol.Shared...), sol.Q...), floats(s.Params), c.least)
			if sol.Covariance == nil {
				t.Fatalf("%s: no covariance", what)
			}
			scaled := scaledCovariance(sol.Covariance, sol.Chi2, len(y)-len(s.Params))
			agree(t, what+" deviations", sds(scaled), floats(s.SD), c.least-1)
			agree(t, what+" sum of squares", []float64{sol.Chi2}, []float64{float64(s.RSS)}, c.least)
		}
	}
}

// A problem of three groups with unknowns of their own and priors on some is
// solved as by the dense code.
func TestGroupedAgreesWithSeparable(t *testing.T) {
	for seed := range uint64(20) {
		rng := rand.New(rand.NewPCG(seed, 5))
		const n, groups = 60, 3
		x, noise := make([]float64, n), make([]float64, n)
		group := make([]int, n)
		for i := range x {
			x[i], group[i], noise[i] = 0.1+10*rng.Float64(), i%groups, rng.NormFloat64()
		}
		p := Separable{Columns: 5, Lower: []float64{0.05}, Upper: []float64{5}, Starts: [][]float64{{1}},
			Priors: []Prior{{2, 0.1, 0.5}, {4, 0, 0.01}},
			Design: func(q []float64, a *mat.Dense) {
				a.Zero()
				for i, v := range x {
					a.Set(i, 0, 1)
					a.Set(i, 1, math.Exp(-q[0]*v))
					a.Set(i, 2+group[i], v)
				}
			},
			Derivative: func(q []float64, _ int, d *mat.Dense) {
				d.Zero()
				for i, v := range x {
					d.Set(i, 1, -v*math.Exp(-q[0]*v))
				}
			}}
		for i, v := range x {
			p.Y = append(p.Y, 3+2*math.Exp(-0.7*v)+0.1*float64(group[i])*v+0.01*noise[i])
		}
		want, err := p.Fit()
		if err != nil {
			t.Fatal(err)
		}
		got, err := grouped(p, group, groups, map[int]int{2: 0, 3: 1, 4: 2}).Fit()
		if err != nil {
			t.Fatal(err)
		}
		all := append([]float64(nil), got.Shared...)
		us := []float64{math.Sqrt(got.Covariance.At(0, 0)), math.Sqrt(got.Covariance.At(1, 1))}
		for g := range groups {
			all, us = append(all, got.Private[g]...), append(us, got.PrivateU[g]...)
		}
		all, us = append(all, got.Q...), append(us, math.Sqrt(got.Covariance.At(2, 2)))
		for j := range all {
			if math.Abs(all[j]-want.P[j]) > 1e-6*want.U(j) || math.Abs(us[j]/want.U(j)-1) > 1e-6 {
				t.Errorf("seed %d, unknown %d: %.12g u %.9g, dense %.12g u %.9g", seed, j, all[j], us[j], want.P[j], want.U(j))
			}
		}
		if math.Abs(got.Chi2/want.Chi2-1) > 1e-9 || math.Abs(got.Condition/want.Condition-1) > 1e-3 {
			t.Errorf("seed %d: chi2 %g, %g; condition %g, %g", seed, got.Chi2, want.Chi2, got.Condition, want.Condition)
		}
	}
}

// Unknowns that no reading separates are named.
func TestGroupedNamesWhatIsUnclear(t *testing.T) {
	p := Grouped{Groups: 1, Shared: 2, Lower: []float64{0.1}, Upper: []float64{2}, Starts: [][]float64{{1}}, Names: []string{"a", "b", "c"},
		Design: func(q []float64, _ int) AngularBlock {
			b := AngularBlock{Shared: make([][]float64, 2)}
			for i := range 9 {
				x := float64(i)
				b.Shared[0], b.Shared[1] = append(b.Shared[0], 1), append(b.Shared[1], math.Exp(-q[0]*x))
				b.Y = append(b.Y, 4)
			}
			return b
		},
		Derivative: func(q []float64, _, _ int, s, _ []float64) []float64 {
			out := make([]float64, 9)
			for i := range out {
				out[i] = -float64(i) * math.Exp(-q[0]*float64(i)) * s[1]
			}
			return out
		}}
	sol, err := p.Fit()
	if err != nil {
		t.Fatal(err)
	}
	if sol.Status != Unidentifiable || sol.Covariance != nil || len(sol.Unclear) == 0 {
		t.Errorf("a constant fixed an exponential: %+v", sol)
	}
}
