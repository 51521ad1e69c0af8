package steps

import (
	"flag"
	"math"
)

// How much the random tests draw. The campaign tag makes the tests thirty days
// long and the sizes those of continuous integration; the full sizes run with
//
//	go test -tags campaign -timeout 6h -run 'Covers|Calm|Foul' -v ./analysis/steps -args -steps 2000 -calm 1000 -foul 1000 -seed 1
var (
	stepsDrawn = flag.Int("steps", stepsUsual, "steps to time")
	calmDrawn  = flag.Int("calm", calmUsual, "undisturbed tests to draw")
	foulDrawn  = flag.Int("foul", foulUsual, "disturbed tests to draw")
	seedShift  = flag.Uint64("seed", 0, "another lot of draws: shifts every seed by that many millions")
)

func seedOf(base uint64, i int) uint64 { return base + *seedShift*1_000_000 + uint64(i) }

// atMost and atLeast are the counts that a share of n draws may reach: the
// share itself at the full size, widened by three binomial standard deviations
// below it.
func atMost(share float64, n int) float64 { return share*float64(n) + slack(share, n) }

func atLeast(share float64, n int) float64 { return share*float64(n) - slack(share, n) }

func slack(share float64, n int) float64 {
	if n >= 1000 {
		return 0
	}
	return 3 * math.Sqrt(float64(n)*share*(1-share))
}
