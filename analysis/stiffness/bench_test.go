package stiffness

import (
	"math/rand/v2"
	"testing"
)

func BenchmarkCompute(b *testing.B) {
	in, _ := simulate(rand.New(rand.NewPCG(1, 1)))
	for range b.N {
		if _, err := Compute(in); err != nil {
			b.Fatal(err)
		}
	}
}

// BenchmarkDraw is one draw of the Monte Carlo on one core.
func BenchmarkDraw(b *testing.B) {
	in, _ := simulate(rand.New(rand.NewPCG(1, 1)))
	e, err := Compute(in)
	if err != nil {
		b.Fatal(err)
	}
	d, err := newDrawer(e.fit)
	if err != nil {
		b.Fatal(err)
	}
	rng := rand.New(rand.NewPCG(1, 2))
	for range b.N {
		if _, _, ok := d.draw(rng); !ok {
			b.Fatal("a draw made no beam")
		}
	}
}
