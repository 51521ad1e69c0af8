package analysis

import (
	"fmt"
	"math"
	"math/rand/v2"
	"runtime"
	"sync"
	"testing"

	"gaugelog/analysis/stiffness"
)

// estimate takes one simulated test through step matching to the modulus.
func estimate(seed, number uint64) (e *stiffness.Estimate, truth float64, s *simulatedTest, err error) {
	s = newSimulatedTest(rand.New(rand.NewPCG(seed, number)))
	h, truth, err := s.run(number)
	if err != nil {
		return nil, 0, s, err
	}
	st, err := stageOf(h)
	if err != nil {
		return nil, 0, s, err
	}
	e, err = stiffness.Compute(stiffnessInput(h, st.findings, st.gravity.Value))
	return e, truth, s, err
}

// tally counts how often intervals hold the truth.
type tally struct {
	tests, held int
	z, z2       float64
}

func (c *tally) add(d, u, u95 float64) {
	c.tests++
	if math.Abs(d) <= u95 {
		c.held++
	}
	c.z += d / u
	c.z2 += d * d / (u * u)
}

func (c *tally) share() float64 { return float64(c.held) / float64(c.tests) }

func (c *tally) String() string {
	n := float64(c.tests)
	return fmt.Sprintf("%d of %d (%.2f %%); mean error %.3f u, root mean square %.3f u", c.held, c.tests, 100*c.share(), c.z/n, math.Sqrt(c.z2/n))
}

// coverage draws tests on all cores and says what share of the 95 % intervals
// of the modulus holds the truth, in all and by layout.
func coverage(t *testing.T, tests int, seed uint64) float64 {
	t.Helper()
	var (
		all     tally
		by      = map[string]*tally{}
		lock    sync.Mutex
		group   sync.WaitGroup
		next    = make(chan uint64)
		widened int
	)
	for range runtime.GOMAXPROCS(0) {
		group.Go(func() {
			for i := range next {
				e, truth, s, err := estimate(seed, i)
				lock.Lock()
				if err != nil {
					t.Errorf("test %d (%s): %v", i, s.layout.name, err)
					lock.Unlock()
					continue
				}
				name := s.layout.name + ", shear from " + e.ShearFrom
				if by[name] == nil {
					by[name] = &tally{}
				}
				d := e.Modulus.Value - truth
				all.add(d, e.Modulus.U, e.Modulus.U95)
				by[name].add(d, e.Modulus.U, e.Modulus.U95)
				if e.Fit.Birge > 1 {
					widened++
				}
				lock.Unlock()
			}
		})
	}
	for i := range tests {
		next <- uint64(i)
	}
	close(next)
	group.Wait()
	t.Logf("95 %% intervals that hold the true modulus: %v; widened by the scatter in %d", &all, widened)
	for name, c := range by {
		t.Logf("  %s: %v", name, c)
	}
	return all.share()
}

// Of 40 tests a true 95 % holds fewer than 33 about once in 3000.
func TestCoverageOfFewSimulatedTests(t *testing.T) {
	if share := coverage(t, 40, 3); share < 33.0/40 {
		t.Errorf("%.1f %% of the 95 %% intervals hold the truth", 100*share)
	}
}
