package nudge

import (
	"math"
	"slices"
	"testing"
	"time"

	"pgregory.net/rapid"
)

// play feeds a source's shape, ten indications a second, to the watcher.
func play(w *Watcher, seconds float64, shapes map[string]func(t float64) float64) []Touch {
	names := make([]string, 0, len(shapes))
	for n := range shapes {
		names = append(names, n)
	}
	slices.Sort(names)
	var out []Touch
	for i := 0; float64(i) < seconds*10; i++ {
		at := float64(i) / 10
		for _, n := range names {
			if t, ok := w.Add(n, time.Duration(i)*100*time.Millisecond, shapes[n](at)); ok {
				out = append(out, t)
			}
		}
	}
	return out
}

// push moves from 3 s to 4 s by mm and comes back.
func push(rest, mm, from float64) func(float64) float64 {
	return func(t float64) float64 {
		if t < from || t > from+1 {
			return rest
		}
		return rest + mm*math.Sin(math.Pi*(t-from))
	}
}

func still(rest float64) func(float64) float64 { return func(float64) float64 { return rest } }

func TestWhichAndWhichWay(t *testing.T) {
	for _, mm := range []float64{0.8, -0.8, 0.1} {
		got := play(New(Options{}), 8, map[string]func(float64) float64{"a": still(1), "b": push(5, mm, 3), "c": still(-2)})
		if len(got) != 1 || got[0].Source != "b" || math.Abs(got[0].Moved()-mm) > 1e-9 || len(got[0].Beside) != 0 {
			t.Errorf("push of %g mm: %+v", mm, got)
		}
	}
}

// Pushed and left where it is: that is a touch as well.
func TestLeftThere(t *testing.T) {
	got := play(New(Options{}), 8, map[string]func(float64) float64{"b": func(t float64) float64 {
		if t < 3 {
			return 0
		}
		return 0.5
	}})
	if len(got) != 1 || got[0].To != 0.5 || got[0].Moved() != 0.5 {
		t.Errorf("%+v", got)
	}
}

func TestTwoAtOnce(t *testing.T) {
	got := play(New(Options{}), 8, map[string]func(float64) float64{"a": push(0, 0.5, 3), "b": push(0, 0.4, 3.2)})
	if len(got) != 2 || !slices.Equal(got[0].Beside, []string{"b"}) || !slices.Equal(got[1].Beside, []string{"a"}) {
		t.Errorf("%+v", got)
	}
	// One after the other are two touches of one each.
	got = play(New(Options{}), 12, map[string]func(float64) float64{"a": push(0, 0.5, 3), "b": push(0, 0.4, 7)})
	if len(got) != 2 || len(got[0].Beside)+len(got[1].Beside) != 0 {
		t.Errorf("%+v", got)
	}
}

// Noise and creep are no touches, whatever their seed.
func TestNoise(t *testing.T) {
	rapid.Check(t, func(r *rapid.T) {
		noise := rapid.SliceOfN(rapid.Float64Range(-0.02, 0.02), 300, 300).Draw(r, "noise")
		w := New(Options{})
		for i, n := range noise {
			if touch, ok := w.Add("a", time.Duration(i)*100*time.Millisecond, 3+n+float64(i)*1e-4); ok {
				r.Fatalf("%+v", touch)
			}
		}
	})
}

func TestNoNumberIsNoTouch(t *testing.T) {
	got := play(New(Options{}), 6, map[string]func(float64) float64{"a": func(t float64) float64 {
		if t > 3 && t < 4 {
			return math.NaN()
		}
		return 1
	}})
	if len(got) != 0 {
		t.Errorf("%+v", got)
	}
}
