package stiffness

import (
	"context"
	"fmt"
	"runtime"
	"sort"
	"sync"
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
	// Digits is the number of significant digits of u to which both ends agree
	// by JCGM 101 clause 8 (half a unit of that digit): 2, 1, or 0 where they do
	// not agree. Agrees is Digits > 0. Tolerance is that at Digits (at 1 where
	// they do not agree). Noise is the standard error of Lo and Hi themselves,
	// as far as this many draws know them; twice that is granted beside it.
	Digits    int
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
